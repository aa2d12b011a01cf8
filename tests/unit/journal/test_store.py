"""A row becomes durable: opening, continuing, refusing, and carrying on after a failure."""

from __future__ import annotations

import math
import os
import shutil
import sqlite3
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from edgectl.journal.chain import META, ChainEnd, genesis, hash_of
from edgectl.journal.database import APPLICATION_ID, JournalUnusableError
from edgectl.journal.lock import JournalLockedError
from edgectl.journal.reader import JournalReader
from edgectl.journal.store import TAIL_ROWS, Columns, Store, columns_of
from edgectl.journal.verify import verify
from edgectl.ports import NotJournalledError
from edgectl.records.encoding import EncodingError
from edgectl.records.entries import Entry, EntryKind

MakeEntry = Callable[..., Entry]
WriteJournal = Callable[..., Path]


def edit(path: Path, statement: str) -> None:
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA ignore_check_constraints = ON")
    connection.execute(statement)
    connection.commit()
    connection.close()


def reason_to_refuse(path: Path) -> str:
    store = Store(path)
    with pytest.raises(JournalUnusableError) as caught:
        store.open()
    store.close()
    return str(caught.value)


def test_a_new_journal_is_made_with_its_folder(tmp_path: Path) -> None:
    path = tmp_path / "state" / "journal.db"
    store = Store(path)
    assert store.open() == ChainEnd(0, genesis(META))
    store.close()
    connection = sqlite3.connect(path)
    assert connection.execute("PRAGMA application_id").fetchone() == (APPLICATION_ID,)
    assert connection.execute("PRAGMA journal_mode").fetchone() == ("wal",)
    assert dict(connection.execute("SELECT * FROM meta")) == META
    connection.close()


def test_each_commit_waits_for_the_disk(write_journal: WriteJournal) -> None:
    store = Store(write_journal())
    store.open()
    connection = store._connection
    assert connection is not None
    assert connection.execute("PRAGMA synchronous").fetchone() == (2,)  # FULL
    store.close()


def test_a_journal_is_continued_where_it_ended(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(3)
    store = Store(path)
    end = store.open()
    row = store.append(columns_of(make_entry(4)))
    store.close()
    assert end.seq == 3
    assert (row.seq, row.previous_hash) == (4, end.entry_hash)
    assert row.entry_hash == hash_of(row)
    assert verify(path).entries == 4


finite = st.floats(allow_nan=False, allow_infinity=False)


# The examples share one journal on purpose: each builds on what the others left.
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    at=finite,
    cycle=st.none() | st.integers(-(2**63), 2**63 - 1),
    body=st.dictionaries(st.text(), st.text() | finite, max_size=3),
)
@example(at=-0.0, cycle=-(2**63), body={"zero": -0.0})
def test_whatever_is_stored_verifies(
    tmp_path: Path, at: float, cycle: int | None, body: dict[str, str | float]
) -> None:
    path = tmp_path / "journal.db"
    store = Store(path)
    store.open()
    row = store.append(columns_of(Entry(EntryKind.EVENT, cycle, at, {**body})))
    store.close()
    report = verify(path)
    assert (report.intact, report.why, report.entries) == (True, None, row.seq)
    with JournalReader(path) as reader:
        (entry,) = reader.entries(first_seq=row.seq)
    assert (entry.cycle, entry.at, entry.body) == (cycle, at, body)


@pytest.mark.parametrize(
    ("entry", "place"),
    [
        (Entry(EntryKind.EVENT, 1, math.nan, {}), r"^\$\.at: nan"),
        (Entry(EntryKind.EVENT, 1, math.inf, {}), r"^\$\.at: inf"),
        (Entry(EntryKind.EVENT, 2**63, 1.0, {}), r"^\$\.cycle: "),
        (Entry(EntryKind.EVENT, 1, 1.0, {"a": [math.nan]}), r"^\$\.a\[0\]: nan"),
    ],
)
def test_what_no_entry_may_be_is_refused_before_it_is_queued(entry: Entry, place: str) -> None:
    with pytest.raises(EncodingError, match=place):
        columns_of(entry)


# -- two writers ------------------------------------------------------------------------


def test_a_second_writer_is_refused_and_told_who_holds_it(write_journal: WriteJournal) -> None:
    path = write_journal()
    first, second = Store(path), Store(path)
    first.open()
    with pytest.raises(JournalLockedError, match=f"held by process {os.getpid()}"):
        second.open()
    first.close()
    second.open()
    second.close()


def test_a_refused_open_keeps_no_lock(tmp_path: Path) -> None:
    path = tmp_path / "journal.db"
    path.write_text("This is a text of more than sixteen bytes, and no database.")
    store = Store(path)
    for _ in range(2):
        with pytest.raises(JournalUnusableError, match="not a database"):
            store.open()


# -- what is not a journal --------------------------------------------------------------


def test_another_database_is_refused_and_left_alone(tmp_path: Path) -> None:
    path = tmp_path / "other.db"
    edit(path, "CREATE TABLE recipes (name TEXT)")
    before = path.read_bytes()
    assert "not a journal" in reason_to_refuse(path)
    assert path.read_bytes() == before


def test_a_newer_schema_is_refused(write_journal: WriteJournal) -> None:
    path = write_journal()
    edit(path, "PRAGMA user_version = 2")
    assert "journal schema 2; this version reads schema 1" in reason_to_refuse(path)


def test_a_folder_that_cannot_be_made_is_refused(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    assert "cannot open" in reason_to_refuse(tmp_path / "file" / "journal.db")


@pytest.mark.parametrize(
    ("statement", "why"),
    [
        ("UPDATE entries SET body = '{}' WHERE seq = 6", "entry 6 was altered"),
        ("DELETE FROM entries WHERE seq = 5", "entry 5 is missing"),
        ("UPDATE meta SET value = '1 ' WHERE key = 'schema_version'", "the meta table"),
        ("INSERT INTO meta VALUES ('note', 'mine')", "entry 1 does not follow the meta table"),
    ],
)
def test_a_journal_with_a_broken_tail_is_not_continued(
    write_journal: WriteJournal, statement: str, why: str
) -> None:
    path = write_journal(6)
    edit(path, statement)
    assert why in reason_to_refuse(path)


def test_opening_looks_at_the_newest_rows_and_the_first_only(write_journal: WriteJournal) -> None:
    path = write_journal(TAIL_ROWS + 5)
    edit(path, "UPDATE entries SET body = '{}' WHERE seq = 3")
    store = Store(path)
    assert store.open().seq == TAIL_ROWS + 5
    store.close()
    assert verify(path).first_bad_seq == 3
    edit(path, "UPDATE entries SET body = '{}' WHERE seq = 6")
    assert "entry 6 was altered" in reason_to_refuse(path)


# -- failures between ----------------------------------------------------------------------


def test_after_a_failure_the_next_append_opens_again(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    assert store._connection is not None
    store._connection.close()
    with pytest.raises(NotJournalledError, match="closed database"):
        store.append(columns_of(make_entry(3)))
    assert store.append(columns_of(make_entry(3))).seq == 3
    store.close()
    assert verify(path).intact


def test_a_row_that_landed_although_its_append_failed_is_built_on(
    write_journal: WriteJournal, make_entry: MakeEntry, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    commit = Store._commit

    def commit_then_fail(self: Store, row: object) -> None:
        commit(self, row)  # type: ignore[arg-type]  # passed on as it came
        raise sqlite3.OperationalError("disk I/O error")

    monkeypatch.setattr(Store, "_commit", commit_then_fail)
    with pytest.raises(NotJournalledError, match="disk I/O error"):
        store.append(columns_of(make_entry(3)))
    monkeypatch.undo()
    assert store.append(columns_of(make_entry(4))).seq == 4
    store.close()
    with JournalReader(path) as reader:
        assert [entry.cycle for entry in reader.entries()] == [1, 2, 3, 4]
    assert verify(path).intact


def test_a_file_that_was_removed_is_noticed_and_never_replaced(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    path.unlink()
    for _ in range(2):
        with pytest.raises(NotJournalledError):
            store.append(columns_of(make_entry(3)))
    store.close()
    assert not path.exists()


def test_a_file_that_was_swapped_is_noticed(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(2)
    shutil.copy(path, path.with_name("copy.db"))
    store = Store(path)
    store.open()
    path.with_name("copy.db").replace(path)
    with pytest.raises(NotJournalledError, match="no longer the file that was opened"):
        store.append(columns_of(make_entry(3)))
    store.close()


def test_a_row_slipped_in_by_a_stranger_ends_the_writing(
    write_journal: WriteJournal, make_entry: MakeEntry
) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    edit(path, "INSERT INTO entries VALUES (3, 'event', 3, 1.0, 'x', 'y', '{}')")
    with pytest.raises(NotJournalledError, match="UNIQUE"):
        store.append(columns_of(make_entry(3)))
    with pytest.raises(JournalUnusableError, match="entry 3 was altered"):
        store.append(Columns("event", 3, 1.0, "{}"))
    store.close()
