"""One invented shift, in a real journal file."""

from __future__ import annotations

from pathlib import Path

import pytest

from edgectl.console.history import History, read_history
from edgectl.journal.store import Store, columns_of
from edgectl.testing.invented_journal import invented_entries


@pytest.fixture(scope="session")
def shift_journal(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A journal of four invented hours."""
    path = tmp_path_factory.mktemp("shift") / "shift.journal"
    store = Store(path)
    store.open()
    for entry in invented_entries():
        store.append(columns_of(entry))
    store.close()
    return path


@pytest.fixture(scope="session")
def shift(shift_journal: Path) -> History:
    return read_history(shift_journal)
