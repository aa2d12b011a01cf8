"""Reading a journal, beside its live writer or long after: never writes, never holds it up.

Every query is short and ends its read transaction, so that a reader that takes
its time does not keep the writer's log from being folded into the file.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Self

from edgectl.journal.chain import COLUMNS, ChainEnd, Row, genesis, hash_of, row_bytes
from edgectl.journal.database import (
    PAGE_ROWS,
    SEQ_MAX,
    connect_reader,
    identity_problem,
    read_meta,
)
from edgectl.ports import PortError
from edgectl.records.encoding import EncodingError, parse
from edgectl.records.entries import EntryKind, Json


class JournalUnreadableError(PortError):
    """The file is not a journal, or the row is damaged; the message names the place."""


@dataclass(frozen=True, slots=True)
class StoredEntry:
    """One row, its body parsed."""

    seq: int
    kind: EntryKind
    cycle: int | None
    at: float
    body: dict[str, Json]
    entry_hash: str
    record_bytes: int


class JournalReader:
    """A read-only view; use it as a context manager, in the thread that made it."""

    def __init__(self, path: Path) -> None:
        """Open the journal. Raises JournalUnreadableError."""
        self._path = path
        try:
            self._connection = connect_reader(path)
        except sqlite3.Error as error:
            raise JournalUnreadableError(f"cannot read {path}: {error}") from error
        try:
            problem = identity_problem(self._connection)
        except sqlite3.Error as error:
            problem = str(error)
        if problem is not None:
            self._connection.close()
            raise JournalUnreadableError(f"{path}: {problem}")

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def close(self) -> None:
        self._connection.close()

    def end(self) -> ChainEnd:
        """The newest row's number and hash: the anchor to keep somewhere else."""
        newest = self._select("SELECT %s FROM entries ORDER BY seq DESC LIMIT 1", ())
        if newest:
            return ChainEnd(newest[0].seq, newest[0].entry_hash)
        return ChainEnd(0, genesis(read_meta(self._connection)))

    def entries(
        self,
        *kinds: EntryKind,
        first_seq: int = 1,
        from_time: float | None = None,
        to_time: float | None = None,
    ) -> Iterator[StoredEntry]:
        """Entries in the order in which they were written, also those added meanwhile.

        Parameters
        ----------
        kinds : EntryKind
            Only these kinds; all when none is given.
        first_seq : int
            Only from this number on [-]. A follower asks for the last one plus one.
        from_time, to_time : float or None
            Only entries with from_time <= at < to_time; plant time [s].

        Raises
        ------
        JournalUnreadableError
            A row is damaged. `verify` says more.
        """
        where, arguments = _conditions(kinds, from_time, to_time)
        statement = f"SELECT %s FROM entries WHERE seq > ?{where} ORDER BY seq LIMIT {PAGE_ROWS}"
        seq = first_seq - 1
        while page := self._select(statement, (seq, *arguments)):
            yield from map(self._entry, page)
            seq = page[-1].seq

    def newest(self, kind: EntryKind) -> StoredEntry | None:
        """The newest entry of this kind, if there is one. Raises JournalUnreadableError."""
        statement = "SELECT %s FROM entries WHERE kind = ? ORDER BY seq DESC LIMIT 1"
        found = self._select(statement, (kind.value,))
        return self._entry(found[0]) if found else None

    def newest_intact(self, kind: EntryKind) -> StoredEntry | None:
        """The newest entry of this kind whose columns give its hash; damaged ones are passed over.

        Raises JournalUnreadableError when the file itself cannot be read.
        """
        statement = "SELECT %s FROM entries WHERE kind = ? AND seq < ? ORDER BY seq DESC LIMIT 1"
        seq = SEQ_MAX
        while found := self._select(statement, (kind.value, seq)):
            if found[0].entry_hash == hash_of(found[0]):
                return self._entry(found[0])
            seq = found[0].seq
        return None

    def _select(self, statement: str, arguments: Sequence[object]) -> list[Row]:
        try:
            found = self._connection.execute(statement % COLUMNS, arguments).fetchall()
        except sqlite3.Error as error:
            raise JournalUnreadableError(f"{self._path}: {error}") from error
        return [Row._make(columns) for columns in found]

    def _entry(self, row: Row) -> StoredEntry:
        try:
            body = parse(row.body.encode("utf-8"))
            if not isinstance(body, dict):
                raise EncodingError(f"expected an object, found {type(body).__name__}")
            kind = EntryKind(row.kind)
        except ValueError as error:
            raise JournalUnreadableError(f"{self._path}, entry {row.seq}: {error}") from error
        return StoredEntry(row.seq, kind, row.cycle, row.at, body, row.entry_hash, row_bytes(row))


def restore(path: Path) -> StoredEntry | None:
    """The newest intact decision, whose memory a restart may carry on from.

    None when there is no journal yet or no decision in it. Raises
    JournalUnreadableError when there is a file and it cannot be read.
    """
    if not path.exists():
        return None
    with JournalReader(path) as reader:
        return reader.newest_intact(EntryKind.DECISION)


def _conditions(
    kinds: tuple[EntryKind, ...], from_time: float | None, to_time: float | None
) -> tuple[str, list[object]]:
    where = ""
    arguments: list[object] = []
    if kinds:
        where += f" AND kind IN ({', '.join('?' * len(kinds))})"
        arguments += [kind.value for kind in kinds]
    if from_time is not None:
        where += " AND at >= ?"
        arguments.append(from_time)
    if to_time is not None:
        where += " AND at < ?"
        arguments.append(to_time)
    return where, arguments
