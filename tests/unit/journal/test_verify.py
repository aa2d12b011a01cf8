"""Every way to spoil a journal is found, and named by its place."""

from __future__ import annotations

import os
import shutil
import sqlite3
import tempfile
from collections.abc import Callable
from pathlib import Path

import pytest

from edgectl.journal.chain import COLUMNS, META, ChainEnd, Row, genesis, sealed
from edgectl.journal.store import Store, columns_of
from edgectl.journal.verify import ChainReport, verify
from edgectl.records.entries import Entry, EntryKind

WriteJournal = Callable[..., Path]
MakeEntry = Callable[..., Entry]

NOBODY = 65534


def edit(path: Path, *statements: str) -> None:
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA ignore_check_constraints = ON")
    for statement in statements:
        connection.execute(statement)
    connection.commit()
    connection.close()


def append_sealed(path: Path, body: str, kind: str = "event") -> None:
    """A row with good hashes, by somebody who knows the scheme."""
    connection = sqlite3.connect(path)
    newest = connection.execute(f"SELECT {COLUMNS} FROM entries ORDER BY seq DESC").fetchone()
    row = sealed(ChainEnd(newest[0], newest[-1]), kind, 1, 1.0, body)
    connection.execute(f"INSERT INTO entries ({COLUMNS}) VALUES (?, ?, ?, ?, ?, ?, ?)", row)
    connection.commit()
    connection.close()


def test_an_intact_journal(write_journal: WriteJournal) -> None:
    path = write_journal(6)
    report = verify(path)
    assert (report.intact, report.entries, report.first_bad_seq, report.why) == (
        True,
        6,
        None,
        None,
    )
    assert (report.from_time, report.to_time) == (1_700_000_030.0, 1_700_000_180.0)
    assert verify(path, anchor=report.newest_hash).intact


def test_an_empty_journal(write_journal: WriteJournal) -> None:
    path = write_journal(0)
    start = genesis(META)
    assert verify(path) == ChainReport(True, 0, None, None, start, None, None)
    assert verify(path, anchor=start).intact


@pytest.mark.parametrize(
    ("column", "values"),
    [
        ("seq", ("99", "-4", "0", "9223372036854775807", "-9223372036854775808")),
        ("kind", ("'delivery'", "x'6576656e74'", "'event '", "NULL")),
        ("cycle", ("4000", "NULL", "'four'", "4.5")),
        ("at", ("0.0", "1700000120.0000002", "'noon'", "NULL")),
        ("body", ("'{\"n\":4 }'", "'{\"n\":5}'", "'not json'", "x'00'", "CAST(x'ff' AS TEXT)")),
        ("previous_hash", ("'00'", "upper(previous_hash)", "entry_hash", "x''")),
        ("entry_hash", ("'00'", "upper(entry_hash)", "previous_hash", "''")),
    ],
)
def test_an_edit_of_any_column_is_found(
    write_journal: WriteJournal, column: str, values: tuple[str, ...]
) -> None:
    path = write_journal(6, (EntryKind.EVENT,))
    original = path.read_bytes()
    for value in values:
        path.write_bytes(original)
        connection = sqlite3.connect(path)
        # NOT NULL stands in the way of NULL; somebody who edits can take it down.
        connection.executescript(
            "PRAGMA journal_mode = DELETE; CREATE TABLE free (seq INTEGER PRIMARY KEY, kind, cycle,"
            " at, previous_hash, entry_hash, body); INSERT INTO free SELECT * FROM entries;"
            f"UPDATE free SET {column} = {value} WHERE seq = 4;"
            "DROP TABLE entries; ALTER TABLE free RENAME TO entries;"
        )
        connection.close()
        report = verify(path)
        assert not report.intact, value
        smallest = column == "seq" and value.startswith(("-", "0"))
        assert report.first_bad_seq == (1 if smallest else 4), value
        assert report.entries == report.first_bad_seq - 1
        assert report.why


def test_columns_of_any_type_do_no_harm_when_unchanged(write_journal: WriteJournal) -> None:
    # The table taken down and put up again as above, without an edit, is the same chain.
    path = write_journal(6)
    edit(path, "CREATE TABLE free (seq INTEGER PRIMARY KEY, kind, cycle, at, previous_hash,"
         " entry_hash, body)", "INSERT INTO free SELECT * FROM entries", "DROP TABLE entries",
         "ALTER TABLE free RENAME TO entries")  # fmt: skip
    assert verify(path).intact


@pytest.mark.parametrize("seq", [1, 3, 5])
def test_a_removed_row_is_found(write_journal: WriteJournal, seq: int) -> None:
    path = write_journal(6)
    edit(path, f"DELETE FROM entries WHERE seq = {seq}")
    report = verify(path)
    assert (report.intact, report.first_bad_seq) == (False, seq)
    assert report.why == f"entry {seq} is missing: the next one is {seq + 1}"


def test_a_removed_and_renumbered_row_is_found(write_journal: WriteJournal) -> None:
    path = write_journal(6)
    edit(path, "DELETE FROM entries WHERE seq = 3", "UPDATE entries SET seq = 3 WHERE seq = 4",
         "UPDATE entries SET seq = 4 WHERE seq = 5",
         "UPDATE entries SET seq = 5 WHERE seq = 6")  # fmt: skip
    assert verify(path).first_bad_seq == 3


def test_two_swapped_rows_are_found(write_journal: WriteJournal) -> None:
    path = write_journal(6)
    edit(path, "UPDATE entries SET seq = 100 WHERE seq = 2",
         "UPDATE entries SET seq = 2 WHERE seq = 5",
         "UPDATE entries SET seq = 5 WHERE seq = 100")  # fmt: skip
    assert verify(path).first_bad_seq == 2


@pytest.mark.parametrize(
    "statement",
    [
        "UPDATE meta SET value = '01'",
        "DELETE FROM meta",
        "INSERT INTO meta VALUES ('note', 'mine')",
        "DROP TABLE meta",
        "DROP TABLE entries",
        "PRAGMA application_id = 1",
        "PRAGMA user_version = 7",
    ],
)
def test_a_change_beside_the_entries_is_found(write_journal: WriteJournal, statement: str) -> None:
    path = write_journal(3)
    edit(path, statement)
    report = verify(path)
    assert not report.intact
    assert report.why


def test_a_cut_tail_is_found_with_an_anchor_and_only_with_it(write_journal: WriteJournal) -> None:
    path = write_journal(6)
    anchor = verify(path).newest_hash
    edit(path, "DELETE FROM entries WHERE seq > 4")
    assert verify(path).intact
    report = verify(path, anchor)
    assert (report.intact, report.entries, report.first_bad_seq) == (False, 4, 5)
    assert report.why is not None
    assert "tail was cut off" in report.why


def test_an_old_anchor_still_holds(write_journal: WriteJournal, make_entry: MakeEntry) -> None:
    path = write_journal(2)
    anchor = verify(path).newest_hash
    store = Store(path)
    store.open()
    store.append(columns_of(make_entry(3)))
    store.close()
    assert verify(path, anchor).entries == 3


@pytest.mark.parametrize(
    ("body", "kind", "why"),
    [
        ("{", "event", "entry 4: not JSON"),
        ('{"a":NaN}', "event", "entry 4: not JSON: NaN"),
        ("[]", "event", "entry 4: its body is not an object"),
        ("{}", "rumour", "entry 4: 'rumour' is not a valid EntryKind"),
    ],
)
def test_a_good_hash_over_no_entry_is_found(
    write_journal: WriteJournal, body: str, kind: str, why: str
) -> None:
    path = write_journal(3)
    append_sealed(path, body, kind)
    report = verify(path)
    assert (report.intact, report.entries, report.first_bad_seq) == (False, 3, 4)
    assert report.why is not None
    assert report.why.startswith(why)


def test_a_database_cut_at_any_page_is_a_finding(write_journal: WriteJournal) -> None:
    path = write_journal(120)
    whole, anchor = path.read_bytes(), verify(path).newest_hash
    for size in [*range(0, len(whole), 4096), 1, 100, 5000, len(whole) - 1]:
        path.write_bytes(whole[:size])
        report = verify(path, anchor)
        assert not report.intact, size
        assert report.why
    path.write_bytes(whole)
    assert verify(path, anchor).intact


def test_a_changed_byte_is_a_finding_or_changes_no_row(write_journal: WriteJournal) -> None:
    path = write_journal(30)
    whole, anchor, rows = path.read_bytes(), verify(path).newest_hash, read_rows(path)
    found = 0
    for place in range(0, len(whole), 37):
        path.write_bytes(whole[:place] + bytes([whole[place] ^ 0x41]) + whole[place + 1 :])
        report = verify(path, anchor)
        assert not report.intact or read_rows(path) == rows, place
        found += not report.intact
    assert found > 50


def read_rows(path: Path) -> list[Row]:
    connection = sqlite3.connect(path)
    rows = connection.execute(f"SELECT {COLUMNS} FROM entries ORDER BY seq").fetchall()
    connection.close()
    return rows


def test_what_is_not_a_journal_is_a_finding(tmp_path: Path) -> None:
    nowhere = tmp_path / "nowhere.db"
    assert not verify(nowhere).intact
    assert not nowhere.exists()
    text = tmp_path / "text.db"
    text.write_text("This is a text of more than sixteen bytes, and no database.")
    assert "not a database" in (verify(text).why or "")
    other = tmp_path / "other.db"
    edit(other, "CREATE TABLE recipes (name TEXT)")
    assert "not a journal" in (verify(other).why or "")


def test_a_sealed_copy_on_read_only_media_can_be_read(write_journal: WriteJournal) -> None:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        shutil.copy(write_journal(3), folder)
        (folder / "journal.db").chmod(0o444)
        folder.chmod(0o555)
        me = os.geteuid()
        if me == 0:
            os.seteuid(NOBODY)  # root may write anywhere
        try:
            report = verify(folder / "journal.db")
        finally:
            os.seteuid(me)
        assert report.entries == 3
        assert [item.name for item in folder.iterdir()] == ["journal.db"]
        folder.chmod(0o755)


def test_a_live_writer_is_no_obstacle(write_journal: WriteJournal, make_entry: MakeEntry) -> None:
    path = write_journal(2)
    store = Store(path)
    store.open()
    store.append(columns_of(make_entry(3)))
    assert verify(path).entries == 3
    store.append(columns_of(make_entry(4)))
    assert verify(path).entries == 4
    store.close()
