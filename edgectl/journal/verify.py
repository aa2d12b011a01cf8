"""Is the journal what was written? Reads every row, also beside a live writer.

Found without help: an altered column, a row removed from the middle, rows
swapped, text that is not JSON, a damaged or truncated file. A tail that was cut
off cleanly leaves a shorter, intact chain: that shows only against an *anchor*,
a newest hash that was kept somewhere else. Whoever can write the file and
knows the scheme can rebuild the whole chain, and again only an anchor shows it.
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass, replace
from pathlib import Path

from edgectl.journal.chain import ChainEnd, Row, break_between, genesis
from edgectl.journal.database import all_rows, connect_reader, identity_problem, read_meta
from edgectl.records.encoding import EncodingError, parse
from edgectl.records.entries import EntryKind


@dataclass(frozen=True, slots=True)
class ChainReport:
    """What `verify` found, up to and including the first bad row."""

    intact: bool
    entries: int
    """Good rows before the first bad one; all rows when intact."""
    first_bad_seq: int | None
    """None when intact, and when the fault is not at a row (not a journal at all)."""
    why: str | None
    newest_hash: str | None
    """Of the last good row; the genesis in an empty journal. Keep it as the next anchor."""
    from_time: float | None
    """Plant time of the first good row [s]."""
    to_time: float | None
    """Plant time of the last good row [s]."""

    def broken(self, why: str, first_bad_seq: int | None) -> ChainReport:
        return replace(self, intact=False, why=why, first_bad_seq=first_bad_seq)


NOTHING = ChainReport(True, 0, None, None, None, None, None)


def verify(path: Path, anchor: str | None = None) -> ChainReport:
    """Walk the whole chain. Never raises for what it finds in the file.

    Parameters
    ----------
    path : Path
        The journal.
    anchor : str or None
        A hash that was the newest once, kept somewhere else: it must be in the chain.
    """
    try:
        connection = connect_reader(path)
    except (OSError, sqlite3.Error) as error:
        return NOTHING.broken(f"cannot read {path}: {error}", None)
    try:
        return _walk(connection, anchor)
    finally:
        connection.close()


def _walk(connection: sqlite3.Connection, anchor: str | None) -> ChainReport:
    try:
        if problem := identity_problem(connection):
            return NOTHING.broken(problem, None)
        end = ChainEnd(0, genesis(read_meta(connection)))
    except (sqlite3.Error, TypeError) as error:
        return NOTHING.broken(f"the database is damaged: {error}", None)
    report = replace(NOTHING, newest_hash=end.entry_hash)
    anchored = anchor is None or anchor == end.entry_hash
    try:
        for row in all_rows(connection):
            if fault := break_between(end, row) or _unreadable(row):
                return report.broken(fault, end.seq + 1)
            end = ChainEnd(row.seq, row.entry_hash)
            anchored = anchored or anchor == row.entry_hash
            report = replace(
                report,
                entries=report.entries + 1,
                newest_hash=row.entry_hash,
                from_time=row.at if report.from_time is None else report.from_time,
                to_time=row.at,
            )
    except sqlite3.Error as error:
        why = f"the database is damaged behind entry {end.seq}: {error}"
        return report.broken(why, end.seq + 1)
    if not anchored:
        why = f"the anchor {anchor} is not in the chain: its tail was cut off, or all of it rebuilt"
        return report.broken(why, end.seq + 1)
    return report


def _unreadable(row: Row) -> str | None:
    """Why a row with a good hash still is not an entry: a forger's, or a bug's."""
    try:
        body = parse(row.body.encode("utf-8"))
        EntryKind(row.kind)
    except (EncodingError, ValueError) as error:
        return f"entry {row.seq}: {error}"
    if not isinstance(body, dict):
        return f"entry {row.seq}: its body is not an object"
    return None
