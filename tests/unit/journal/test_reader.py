"""Reading beside a live writer: by number, kind and time, and the newest intact decision."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from pathlib import Path

import pytest

from edgectl.journal.chain import META, ChainEnd, genesis
from edgectl.journal.reader import JournalReader, JournalUnreadableError, restore
from edgectl.journal.store import Store, columns_of
from edgectl.journal.verify import verify
from edgectl.records.entries import Entry, EntryKind

WriteJournal = Callable[..., Path]
MakeEntry = Callable[..., Entry]

DECISION, DELIVERY, EVENT = EntryKind.DECISION, EntryKind.DELIVERY, EntryKind.EVENT
TURN = (DECISION, DELIVERY, EVENT)


def edit(path: Path, statement: str) -> None:
    connection = sqlite3.connect(path)
    connection.execute(statement)
    connection.commit()
    connection.close()


def test_entries_come_back_as_they_were_written(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    with JournalReader(write_journal(6, TURN)) as reader:
        found = list(reader.entries())
    for n, entry in enumerate(found, start=1):
        wanted = make_entry(n, TURN[(n - 1) % 3])
        assert (entry.kind, entry.cycle, entry.at, entry.body) == (
            wanted.kind, wanted.cycle, wanted.at, wanted.body,
        )  # fmt: skip
    assert [entry.seq for entry in found] == [1, 2, 3, 4, 5, 6]


def test_by_kind_number_and_time(write_journal: WriteJournal) -> None:
    with JournalReader(write_journal(9, TURN)) as reader:
        numbers = lambda *kinds, **limits: [e.seq for e in reader.entries(*kinds, **limits)]  # noqa: E731 short here, and nowhere else
        assert numbers(DECISION) == [1, 4, 7]
        assert numbers(DELIVERY, EVENT) == [2, 3, 5, 6, 8, 9]
        assert numbers(first_seq=8) == [8, 9]
        assert numbers(from_time=1_700_000_090.0, to_time=1_700_000_150.0) == [3, 4]
        assert numbers(EVENT, first_seq=4, to_time=1_700_000_200.0) == [6]


def test_more_entries_than_one_page(write_journal: WriteJournal) -> None:
    with JournalReader(write_journal(450, TURN)) as reader:
        assert [entry.seq for entry in reader.entries()] == list(range(1, 451))
        assert len(list(reader.entries(DECISION))) == 150


def test_the_end_is_the_anchor(write_journal: WriteJournal) -> None:
    path = write_journal(4)
    with JournalReader(path) as reader:
        assert reader.end() == ChainEnd(4, verify(path).newest_hash or "")


def test_an_empty_journal(write_journal: WriteJournal) -> None:
    path = write_journal(0)
    with JournalReader(path) as reader:
        assert list(reader.entries()) == []
        assert reader.newest(DECISION) is None
        assert reader.end() == ChainEnd(0, genesis(META))
    assert restore(path) is None


def test_a_follower_sees_what_is_added(write_journal: WriteJournal, make_entry: MakeEntry) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    with JournalReader(path) as reader:
        assert reader.end().seq == 2
        store.append(columns_of(make_entry(3, DECISION)))
        assert [entry.seq for entry in reader.entries(first_seq=3)] == [3]
        newest = reader.newest(DECISION)
        assert newest is not None
        assert newest.seq == 3
    store.close()


def test_a_slow_reader_does_not_hold_up_the_log(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(450)
    store = Store(path)
    store.open()
    with JournalReader(path) as reader:
        walk = reader.entries()
        next(walk)
        store.append(columns_of(make_entry(451)))
        connection = sqlite3.connect(path)
        busy, _, _ = connection.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()
        connection.close()
        assert busy == 0
        assert len(list(walk)) == 450
    store.close()


def test_a_reader_cannot_write(write_journal: WriteJournal) -> None:
    with (
        JournalReader(write_journal()) as reader,
        pytest.raises(sqlite3.OperationalError, match="readonly"),
    ):
        reader._connection.execute("DELETE FROM entries")


def test_the_newest_intact_decision_is_restored(write_journal: WriteJournal) -> None:
    path = write_journal(9, TURN)
    edit(path, "UPDATE entries SET body = '{\"n\":70}' WHERE seq = 7")
    found = restore(path)
    assert found is not None
    assert (found.seq, found.body) == (4, {"n": 4})


def test_nothing_is_restored_without_a_journal(tmp_path: Path) -> None:
    assert restore(tmp_path / "journal.db") is None


def test_a_damaged_row_is_named(write_journal: WriteJournal) -> None:
    path = write_journal(6, TURN)
    edit(path, "UPDATE entries SET body = '{' WHERE seq = 4")
    with JournalReader(path) as reader:
        with pytest.raises(JournalUnreadableError, match="entry 4: not JSON"):
            list(reader.entries())
        with pytest.raises(JournalUnreadableError, match="entry 4"):
            reader.newest(DECISION)


@pytest.mark.parametrize("text", ["", "This is a text of more than sixteen bytes, no database."])
def test_what_is_not_a_journal_is_refused(tmp_path: Path, text: str) -> None:
    path = tmp_path / "journal.db"
    with pytest.raises(JournalUnreadableError, match="cannot read"):
        JournalReader(path)
    path.write_text(text)
    with pytest.raises(JournalUnreadableError):
        JournalReader(path)
