"""The journal beside an event loop: a receipt means durable, and nothing waits for ever."""

from __future__ import annotations

import asyncio
import sqlite3
import threading
from collections.abc import AsyncIterator, Callable
from pathlib import Path

import pytest
import pytest_asyncio

from edgectl.clock import PlantClock
from edgectl.journal.chain import META, ChainEnd, genesis
from edgectl.journal.database import JournalUnusableError
from edgectl.journal.lock import JournalLockedError
from edgectl.journal.reader import JournalReader
from edgectl.journal.store import Store
from edgectl.journal.verify import verify
from edgectl.journal.writer import SqliteJournal
from edgectl.ports import CycleJournal, NotJournalledError
from edgectl.records.encoding import EncodingError
from edgectl.records.entries import Entry, EntryKind

pytestmark = pytest.mark.asyncio

MakeEntry = Callable[..., Entry]


def journal_at(path: Path, queue_limit: int = 32) -> SqliteJournal:
    return SqliteJournal(path, PlantClock.real(), queue_limit)


def writer_threads() -> list[threading.Thread]:
    return [thread for thread in threading.enumerate() if thread.name == "journal-writer"]


@pytest_asyncio.fixture
async def journal(tmp_path: Path) -> AsyncIterator[SqliteJournal]:
    journal = journal_at(tmp_path / "journal.db")
    await journal.open()
    yield journal
    await journal.close()
    assert writer_threads() == []


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "journal.db"


class BusyDisk:
    """Holds the database's write lock: to the writer, a disk that does not answer."""

    def __init__(self, path: Path) -> None:
        self._connection = sqlite3.connect(path, isolation_level=None)

    def __enter__(self) -> None:
        self._connection.execute("BEGIN IMMEDIATE")

    def __exit__(self, *_: object) -> None:
        self._connection.close()


async def test_it_is_a_cycle_journal(journal: SqliteJournal) -> None:
    port: CycleJournal = journal
    assert port is journal


async def test_a_receipt_names_the_row(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    receipt = await journal.append(make_entry(1, EntryKind.DECISION), timeout_s=10.0)
    with JournalReader(path) as reader:
        (entry,) = reader.entries()
    assert (receipt.seq, receipt.entry_hash) == (entry.seq, entry.entry_hash)
    assert receipt.record_bytes == entry.record_bytes
    assert receipt.write_ms > 0.0


async def test_entries_stand_in_the_order_of_the_calls(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    async with asyncio.TaskGroup() as group:
        tasks = [group.create_task(journal.append(make_entry(n), 10.0)) for n in range(1, 11)]
    assert [task.result().seq for task in tasks] == list(range(1, 11))
    with JournalReader(path) as reader:
        assert [entry.cycle for entry in reader.entries()] == list(range(1, 11))


async def test_the_loop_runs_on_while_the_disk_is_busy(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    with BusyDisk(path):
        task = asyncio.ensure_future(journal.append(make_entry(1), 10.0))
        for _ in range(100):
            await asyncio.sleep(0)
        assert not task.done()
    assert (await task).seq == 1


async def test_a_late_row_is_refused_to_its_caller_and_stays_in_the_chain(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    with BusyDisk(path):
        with pytest.raises(
            NotJournalledError, match=r"not on the disk within 0\.05 s; it may still"
        ):
            await journal.append(make_entry(1), timeout_s=0.05)
        assert verify(path).entries == 0
    receipt = await journal.append(make_entry(2), timeout_s=10.0)
    assert receipt.seq == 2
    with JournalReader(path) as reader:
        assert [entry.cycle for entry in reader.entries()] == [1, 2]
    assert verify(path).newest_hash == receipt.entry_hash


async def test_the_queue_has_an_end(path: Path, make_entry: MakeEntry) -> None:
    journal = journal_at(path, queue_limit=3)
    await journal.open()
    with BusyDisk(path):
        for n in range(1, 4):
            with pytest.raises(NotJournalledError, match=r"within 0\.01 s"):
                await journal.append(make_entry(n), timeout_s=0.01)
        # Their callers have gone, they still wait for the disk: that is what the limit is for.
        with pytest.raises(NotJournalledError, match="3 entries are waiting"):
            await journal.append(make_entry(4), timeout_s=10.0)
    await journal.close()
    assert verify(path).entries == 3


async def test_a_cancelled_caller_leaves_nothing_behind(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    with BusyDisk(path):
        task = asyncio.ensure_future(journal.append(make_entry(1), 10.0))
        await asyncio.sleep(0)
        task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await task
    assert (await journal.append(make_entry(2), 10.0)).seq == 2


async def test_a_timeout_from_outside_is_not_taken_for_the_disks(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path
) -> None:
    with BusyDisk(path), pytest.raises(TimeoutError):
        async with asyncio.timeout(0.01):
            await journal.append(make_entry(1), timeout_s=10.0)


async def test_a_failed_write_is_not_the_end(
    journal: SqliteJournal, make_entry: MakeEntry, path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object) -> None:
        raise sqlite3.OperationalError("database or disk is full")

    await journal.append(make_entry(1), 10.0)
    monkeypatch.setattr(Store, "_commit", fail)
    for _ in range(3):
        with pytest.raises(NotJournalledError, match="disk is full"):
            await journal.append(make_entry(2), 10.0)
    monkeypatch.undo()
    assert (await journal.append(make_entry(2), 10.0)).seq == 2
    assert verify(path).intact


async def test_close_writes_what_waits(path: Path, make_entry: MakeEntry) -> None:
    journal = journal_at(path)
    await journal.open()
    tasks = [asyncio.ensure_future(journal.append(make_entry(n), 10.0)) for n in range(1, 6)]
    await asyncio.sleep(0)
    await journal.close()
    assert [(await task).seq for task in tasks] == [1, 2, 3, 4, 5]
    assert not path.with_name("journal.db-wal").exists()
    with pytest.raises(NotJournalledError, match="is not open"):
        await journal.append(make_entry(6), 10.0)
    await journal.close()


async def test_close_says_when_the_disk_does_not_answer(path: Path, make_entry: MakeEntry) -> None:
    journal = journal_at(path)
    await journal.open()
    with BusyDisk(path):
        with pytest.raises(NotJournalledError, match="within"):
            await journal.append(make_entry(1), timeout_s=0.01)
        with pytest.raises(NotJournalledError, match="1 entries not on the disk"):
            await journal.close(timeout_s=0.05)
    await journal.close()
    assert verify(path).entries == 1


async def test_a_journal_that_cannot_be_opened_says_why_and_leaves_no_thread(
    tmp_path: Path, make_entry: MakeEntry
) -> None:
    path = tmp_path / "journal.db"
    path.write_text("This is a text of more than sixteen bytes, and no database.")
    journal = journal_at(path)
    with pytest.raises(JournalUnusableError, match="not a database"):
        await journal.open()
    with pytest.raises(NotJournalledError, match="is not open"):
        await journal.append(make_entry(1), 1.0)
    await journal.close()
    assert writer_threads() == []


async def test_two_writers_cannot_share_a_journal(journal: SqliteJournal, path: Path) -> None:
    second = journal_at(path)
    with pytest.raises(JournalLockedError):
        await second.open()
    await second.close()


async def test_a_journal_goes_on_where_it_was_closed(path: Path, make_entry: MakeEntry) -> None:
    end = ChainEnd(0, genesis(META))
    for n in range(1, 4):
        journal = journal_at(path)
        assert await journal.open() == end
        receipt = await journal.append(make_entry(n), 10.0)
        end = ChainEnd(receipt.seq, receipt.entry_hash)
        await journal.close()
    assert verify(path, end.entry_hash).entries == 3


async def test_an_entry_that_is_none_is_a_bug_of_the_caller(journal: SqliteJournal) -> None:
    with pytest.raises(EncodingError, match=r"^\$\.x: nan"):
        await journal.append(Entry(EntryKind.EVENT, 1, 1.0, {"x": float("nan")}), 10.0)


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
async def test_a_bug_in_the_thread_fails_its_callers(
    path: Path, make_entry: MakeEntry, monkeypatch: pytest.MonkeyPatch
) -> None:
    def stumble(*_: object) -> None:
        raise ZeroDivisionError

    journal = journal_at(path)
    await journal.open()
    monkeypatch.setattr(Store, "append", stumble)
    with pytest.raises(NotJournalledError, match="the writer thread has ended"):
        await journal.append(make_entry(1), 10.0)
    with pytest.raises(NotJournalledError, match="is not open"):
        await journal.append(make_entry(2), 10.0)
    await journal.close()
    assert writer_threads() == []
