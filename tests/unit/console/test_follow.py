"""Following a journal that grows."""

from __future__ import annotations

import io
from collections.abc import Iterator
from pathlib import Path

import pytest
from rich.console import Console

from edgectl.console.follow import JournalFollower
from edgectl.console.live import LiveView
from edgectl.journal.store import Store, columns_of
from edgectl.records.entries import Entry
from edgectl.testing.invented_journal import invented_entries


@pytest.fixture
def said() -> io.StringIO:
    return io.StringIO()


@pytest.fixture
def view(said: io.StringIO) -> LiveView:
    return LiveView(Console(file=said, width=100, force_terminal=False, color_system=None))


@pytest.fixture
def entries() -> Iterator[Entry]:
    return invented_entries(cycles=6)


def test_each_entry_is_shown_once_as_it_comes(
    tmp_path: Path, view: LiveView, said: io.StringIO, entries: Iterator[Entry]
) -> None:
    path = tmp_path / "new.journal"
    store = Store(path)
    with JournalFollower(path) as follower:
        follower.show_new(view)
        assert said.getvalue() == ""
        store.open()
        store.append(columns_of(next(entries)))
        follower.show_new(view)
        follower.show_new(view)
        assert said.getvalue().count("started, cold") == 1
        store.append(columns_of(next(entries)))
        follower.show_new(view)
        assert "starting" not in said.getvalue(), "shown before it was known to be delivered"
        store.append(columns_of(next(entries)))
        follower.show_new(view)
        assert said.getvalue().count("06:00  starting") == 1
    store.close()


def test_a_file_that_is_not_a_journal_yet_is_waited_for(
    tmp_path: Path, view: LiveView, said: io.StringIO
) -> None:
    path = tmp_path / "new.journal"
    path.write_bytes(b"not yet")
    with JournalFollower(path) as follower:
        follower.show_new(view)
    assert said.getvalue() == ""
