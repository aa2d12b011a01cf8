"""A row becomes durable. Blocking and for one thread; `writer.py` gives it to the event loop."""

from __future__ import annotations

import math
import sqlite3
from contextlib import suppress
from pathlib import Path
from typing import NamedTuple

from edgectl.journal.chain import (
    COLUMNS,
    ChainEnd,
    Row,
    break_between,
    genesis,
    sealed,
)
from edgectl.journal.database import (
    JournalUnusableError,
    connect_writer,
    first_row,
    newest_rows,
    read_meta,
)
from edgectl.journal.lock import FileLock
from edgectl.ports import NotJournalledError
from edgectl.records.encoding import EncodingError, canonical
from edgectl.records.entries import Entry

# Rows that are verified when a journal is opened; `verify` looks at all of them.
TAIL_ROWS = 100

_INSERT = f"INSERT INTO entries ({COLUMNS}) VALUES (?, ?, ?, ?, ?, ?, ?)"


class Columns(NamedTuple):
    """An entry as it will be stored, before it has its place in the chain."""

    kind: str
    cycle: int | None
    at: float
    body: str


def columns_of(entry: Entry) -> Columns:
    """The stored form of an entry.

    Raises
    ------
    EncodingError
        The entry is not what an entry must be (NaN in the body, a time that is
        not finite, a cycle beyond 63 bits): a mistake of the caller.
    """
    if not math.isfinite(entry.at):
        raise EncodingError(f"$.at: {entry.at} is not a time")
    if entry.cycle is not None and not -(2**63) <= entry.cycle < 2**63:
        raise EncodingError(f"$.cycle: {entry.cycle} does not fit into 64 bits")
    body = canonical(dict(entry.body)).decode("utf-8")
    # SQLite gives a stored -0.0 back as 0.0, which has another hash.
    return Columns(entry.kind.value, entry.cycle, float(entry.at) + 0.0, body)


class Store:
    """The one connection that writes, and the end of the chain it builds on.

    After a failure nobody knows whether the row is on the disk. So the
    connection is given up, and the next append opens a new one and builds on
    whatever row it then finds.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._lock = FileLock(path.with_name(path.name + ".lock"))
        self._connection: sqlite3.Connection | None = None
        self._identity: tuple[int, int] | None = None
        self._end = ChainEnd(0, "")

    def open(self) -> ChainEnd:
        """Lock, open or make the file, verify its newest rows.

        Raises
        ------
        JournalLockedError
            Another process writes this journal.
        JournalUnusableError
            The file is not a journal, its newest rows are not intact, or the
            disk does not let us.
        """
        try:
            self._path.parent.mkdir(parents=True, exist_ok=True)
            self._lock.acquire()
            self._connect(create=True)
        except (OSError, sqlite3.Error) as error:
            self._lock.release()
            raise JournalUnusableError(f"cannot open {self._path}: {error}") from error
        except NotJournalledError:
            self._lock.release()
            raise
        return self._end

    def append(self, columns: Columns) -> Row:
        """Add one row; when this returns, it is on the disk. Raises NotJournalledError."""
        try:
            if self._connection is None:
                # Never a new file in the place of one that was there: that needs a person.
                self._connect(create=False)
            self._require_same_file()
            row = sealed(self._end, *columns)
            self._commit(row)
        except (OSError, sqlite3.Error) as error:
            self._disconnect()
            raise NotJournalledError(
                f"{self._path}: {error}; the next entry opens the journal again"
            ) from error
        except NotJournalledError:
            self._disconnect()
            raise
        self._end = ChainEnd(row.seq, row.entry_hash)
        return row

    def close(self) -> None:
        self._disconnect()
        self._lock.release()

    def _connect(self, *, create: bool) -> None:
        self._connection = connect_writer(self._path, create=create)
        try:
            self._end = _verified_end(self._connection, self._path)
            self._identity = self._file_identity()
        except (OSError, sqlite3.Error, NotJournalledError):
            self._disconnect()
            raise

    def _disconnect(self) -> None:
        if self._connection is None:
            return
        # It is closed because it failed; that closing fails as well says nothing new.
        with suppress(sqlite3.Error):
            self._connection.close()
        self._connection = None

    def _commit(self, row: Row) -> None:
        assert self._connection is not None
        self._connection.execute("BEGIN IMMEDIATE")
        self._connection.execute(_INSERT, row)
        self._connection.execute("COMMIT")

    def _require_same_file(self) -> None:
        """SQLite would go on writing into a file that was removed or moved away."""
        if self._file_identity() != self._identity:
            raise JournalUnusableError(f"{self._path} is no longer the file that was opened")

    def _file_identity(self) -> tuple[int, int]:
        status = self._path.stat()
        return status.st_dev, status.st_ino


def _verified_end(connection: sqlite3.Connection, path: Path) -> ChainEnd:
    """The newest row, after the tail was found intact. Raises JournalUnusableError."""
    start = ChainEnd(0, genesis(read_meta(connection)))
    first = first_row(connection)
    if first is None:
        return start
    _require_follows(start, [first], path)
    rows = newest_rows(connection, TAIL_ROWS)
    # The oldest row of the tail has only its own word for what stood before it.
    return _require_follows(ChainEnd(rows[0].seq - 1, rows[0].previous_hash), rows, path)


def _require_follows(end: ChainEnd, rows: list[Row], path: Path) -> ChainEnd:
    """The last of `rows`, when each follows the one before. Raises JournalUnusableError."""
    for row in rows:
        if why := break_between(end, row):
            raise JournalUnusableError(
                f"{path}: {why}. Keep the file for inspection and start a new journal"
            )
        end = ChainEnd(row.seq, row.entry_hash)
    return end
