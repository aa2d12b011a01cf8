"""What the journal's tests share: entries, and journals already written."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from pathlib import Path

import pytest

from edgectl.journal.chain import COLUMNS, ChainEnd, sealed
from edgectl.journal.store import Store, columns_of
from edgectl.records.entries import Entry, EntryKind, Json

PLANT_START = 1_700_000_000.0


def entry_number(n: int, kind: EntryKind = EntryKind.EVENT, **body: Json) -> Entry:
    return Entry(kind, n, PLANT_START + 30.0 * n, {"n": n, **body})


@pytest.fixture
def make_entry() -> Callable[..., Entry]:
    return entry_number


@pytest.fixture
def write_journal(tmp_path: Path) -> Callable[..., Path]:
    """Writes a journal of `count` entries, kinds in turn, and closes it."""

    def write(count: int = 6, kinds: tuple[EntryKind, ...] = tuple(EntryKind)) -> Path:
        path = tmp_path / "journal.db"
        store = Store(path)
        end = store.open()
        store.close()
        # One commit for all of them: a test that reads need not wait for the disk each time.
        connection = sqlite3.connect(path)
        for n in range(1, count + 1):
            row = sealed(end, *columns_of(entry_number(n, kinds[(n - 1) % len(kinds)])))
            connection.execute(f"INSERT INTO entries ({COLUMNS}) VALUES (?, ?, ?, ?, ?, ?, ?)", row)
            end = ChainEnd(row.seq, row.entry_hash)
        connection.commit()
        connection.close()
        return path

    return write
