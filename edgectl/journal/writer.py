"""The journal as the event loop sees it: `append` waits, nothing blocks.

    event loop                     writer thread
    append -> queue (bounded) ---> Store.append: insert, commit, on the disk
           <- future <----------- receipt, or why not

What a receipt means: the row is on the disk, with this number and this hash.
What NotJournalledError means: it was not *within that time*. An entry that
timed out keeps its place in the queue and may still become a row; it then
stands in the chain like any other, and the entry behind it (a delivery without
a decision_seq) tells that it came too late for its advice.
"""

from __future__ import annotations

import asyncio
import threading
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from queue import SimpleQueue
from typing import NamedTuple, TypeVar

from edgectl.journal.chain import ChainEnd, row_bytes
from edgectl.journal.store import Columns, Store, columns_of
from edgectl.ports import Clock, NotJournalledError
from edgectl.records.entries import Entry, Receipt

T = TypeVar("T")

# A cycle writes about three entries: more than this waiting means that the disk does not answer.
QUEUE_LIMIT = 32


class _Ticket(NamedTuple):
    columns: Columns
    asked_at: float
    answer: asyncio.Future[Receipt]


class SqliteJournal:
    """A CycleJournal in one SQLite file.

    Parameters
    ----------
    path : Path
        The file; made with its folder if it is not there.
    clock : Clock
        Its `wall` gives `Receipt.write_ms`: from the call of `append` until
        the row is on the disk, the wait behind other entries included.
    queue_limit : int
        Entries that may wait. The one beyond is refused at once.
    """

    def __init__(self, path: Path, clock: Clock, queue_limit: int = QUEUE_LIMIT) -> None:
        self._clock = clock
        self._queue_limit = queue_limit
        self._store = Store(path)
        self._path = path
        self._queue: SimpleQueue[_Ticket | None] = SimpleQueue()
        self._waiting: set[asyncio.Future[Receipt]] = set()
        self._thread: threading.Thread | None = None
        self._ended = asyncio.Event()
        self._accepts = False

    async def open(self) -> ChainEnd:
        """Open or make the file and start the writer; the end of the chain it builds on.

        Raises
        ------
        JournalLockedError
            Another process writes this journal.
        JournalUnusableError
            Not a journal, not intact, or not writable.
        """
        if self._thread is not None:
            raise RuntimeError("a SqliteJournal is opened once")
        loop = asyncio.get_running_loop()
        opened: asyncio.Future[ChainEnd] = loop.create_future()
        # A daemon: a disk that never answers must not keep the process from ending.
        self._thread = threading.Thread(
            target=self._write, args=(loop, opened), name="journal-writer", daemon=True
        )
        self._thread.start()
        end = await opened
        self._accepts = True
        return end

    async def append(self, entry: Entry, timeout_s: float) -> Receipt:
        """Return once the entry is on the disk.

        Raises
        ------
        NotJournalledError
            Not within `timeout_s` (it may still be written), refused by the
            disk, too many entries waiting, or the journal is not open.
        EncodingError
            The entry is not plain finite JSON: a mistake of the caller.
        """
        asked_at = self._clock.wall()
        columns = columns_of(entry)
        if not self._accepts:
            raise NotJournalledError(f"{self._path} is not open")
        if len(self._waiting) >= self._queue_limit:
            raise NotJournalledError(
                f"{self._path}: {len(self._waiting)} entries are waiting for the disk already"
            )
        answer: asyncio.Future[Receipt] = asyncio.get_running_loop().create_future()
        self._waiting.add(answer)
        self._queue.put(_Ticket(columns, asked_at, answer))
        budget = asyncio.timeout(timeout_s)
        try:
            async with budget:
                return await answer
        except TimeoutError as error:
            if not budget.expired():
                raise
            raise NotJournalledError(
                f"{self._path}: not on the disk within {timeout_s:g} s; it may still be written"
            ) from error

    async def close(self, timeout_s: float = 10.0) -> None:
        """Write what waits, then let the file go. Raises NotJournalledError past `timeout_s`."""
        if self._thread is None:
            return
        if self._accepts:
            self._accepts = False
            self._queue.put(None)
        budget = asyncio.timeout(timeout_s)
        try:
            async with budget:
                await self._ended.wait()
        except TimeoutError as error:
            if not budget.expired():
                raise
            raise NotJournalledError(
                f"{self._path}: {len(self._waiting)} entries not on the disk {timeout_s:g} s "
                "after the journal was closed; they may still be written"
            ) from error
        # It has said that it is done: nothing is left to wait for.
        self._thread.join()

    # -- in the writer thread ---------------------------------------------------------------

    def _write(self, loop: asyncio.AbstractEventLoop, opened: asyncio.Future[ChainEnd]) -> None:
        try:
            try:
                end = self._store.open()
            except NotJournalledError as error:
                _tell(loop, _fail, opened, error)
                return
            _tell(loop, _succeed, opened, end)
            while (ticket := self._queue.get()) is not None:
                self._write_one(loop, ticket)
        finally:
            self._store.close()
            _tell(loop, self._end)

    def _write_one(self, loop: asyncio.AbstractEventLoop, ticket: _Ticket) -> None:
        try:
            row = self._store.append(ticket.columns)
        except NotJournalledError as error:
            _tell(loop, self._settle, ticket.answer, error)
        else:
            write_ms = (self._clock.wall() - ticket.asked_at) * 1e3
            receipt = Receipt(row.seq, row.entry_hash, row_bytes(row), write_ms)
            _tell(loop, self._settle, ticket.answer, receipt)

    # -- in the event loop, called by the writer thread -------------------------------------

    def _settle(
        self, answer: asyncio.Future[Receipt], result: Receipt | NotJournalledError
    ) -> None:
        self._waiting.discard(answer)
        if isinstance(result, Receipt):
            _succeed(answer, result)
        else:
            _fail(answer, result)

    def _end(self) -> None:
        """The thread is over: after `close`, or because of a bug that it has printed."""
        self._accepts = False
        for answer in self._waiting:
            _fail(answer, NotJournalledError(f"{self._path}: the writer thread has ended"))
        self._waiting.clear()
        self._ended.set()


def _tell(loop: asyncio.AbstractEventLoop, what: Callable[..., None], *arguments: object) -> None:
    # A closed loop has nobody left to tell; what was written stays written.
    with suppress(RuntimeError):
        loop.call_soon_threadsafe(what, *arguments)


def _succeed(answer: asyncio.Future[T], result: T) -> None:
    # Whoever timed out has cancelled the future: the late result is for nobody.
    if not answer.done():
        answer.set_result(result)


def _fail(answer: asyncio.Future[T], error: NotJournalledError) -> None:
    if not answer.done():
        answer.set_exception(error)
