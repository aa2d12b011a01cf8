"""Connections to a journal file, for its writer and for its readers."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from importlib import resources
from pathlib import Path

from edgectl.journal.chain import COLUMNS, META, SCHEMA_VERSION, Row
from edgectl.ports import NotJournalledError

APPLICATION_ID = 0x65_64_67_65
"""Stands in the file's header, so that `file` and we know a journal from any other database."""

# How long SQLite waits for a lock that somebody else holds, e.g. a reader's checkpoint.
BUSY_S = 5.0

# Rows per query of a reader.
PAGE_ROWS = 200

# What SQLite can number. Ours begin at 1; a stranger's may stand anywhere, and must be seen.
SEQ_MIN, SEQ_MAX = -(2**63), 2**63 - 1


class JournalUnusableError(NotJournalledError):
    """The file is not a journal that this version can write to; it needs a person."""


def connect_writer(path: Path, *, create: bool) -> sqlite3.Connection:
    """Open for writing; make the schema in a new file.

    Raises sqlite3.Error or JournalUnusableError.
    """
    mode = "rwc" if create else "rw"
    connection = sqlite3.connect(
        f"{path.absolute().as_uri()}?mode={mode}", uri=True, timeout=BUSY_S, isolation_level=None
    )
    try:
        if create and _is_empty(connection):
            _create(connection)
        if problem := identity_problem(connection):
            raise JournalUnusableError(f"{path}: {problem}")
        (mode_now,) = connection.execute("PRAGMA journal_mode = WAL").fetchone()
        if mode_now != "wal":
            raise JournalUnusableError(
                f"{path}: this file system has no write-ahead log (mode {mode_now!r}); "
                "keep the journal on a local disk"
            )
        # FULL: each commit waits until the log is on the disk.
        connection.execute("PRAGMA synchronous = FULL")
    except (sqlite3.Error, JournalUnusableError):
        connection.close()
        raise
    return connection


def connect_reader(path: Path) -> sqlite3.Connection:
    """Open read-only, beside a live writer or after one. Raises sqlite3.Error."""
    uri = path.absolute().as_uri()
    connection = sqlite3.connect(f"{uri}?mode=ro", uri=True, timeout=BUSY_S, isolation_level=None)
    connection.text_factory = _any_text
    try:
        connection.execute("SELECT count(*) FROM sqlite_schema")
    except sqlite3.OperationalError:
        connection.close()
        log = path.with_name(path.name + "-wal")
        if not path.exists() or (log.exists() and log.stat().st_size > 0):
            raise
        # A sealed copy on read-only media: SQLite cannot make its index file beside it, and
        # needs none, for with no log everything stands in the file itself.
        connection = sqlite3.connect(f"{uri}?mode=ro&immutable=1", uri=True, isolation_level=None)
        connection.text_factory = _any_text
    except sqlite3.Error:
        connection.close()
        raise
    return connection


def identity_problem(connection: sqlite3.Connection) -> str | None:
    """Why this database is not a journal of this version; None when it is."""
    (application,) = connection.execute("PRAGMA application_id").fetchone()
    (version,) = connection.execute("PRAGMA user_version").fetchone()
    if application != APPLICATION_ID:
        return f"not a journal (application id {application:#x}, expected {APPLICATION_ID:#x})"
    if version != SCHEMA_VERSION:
        return f"journal schema {version}; this version reads schema {SCHEMA_VERSION}"
    if read_meta(connection).get("schema_version") != str(SCHEMA_VERSION):
        return "the meta table does not name the schema that the file's header names"
    return None


def read_meta(connection: sqlite3.Connection) -> dict[str, str]:
    return dict(connection.execute("SELECT key, value FROM meta"))


def all_rows(connection: sqlite3.Connection) -> Iterator[Row]:
    """Every row in order of seq, those added meanwhile too.

    In short queries: one long read transaction would keep the writer's log from
    being folded into the file. Raises sqlite3.Error at the row that it cannot read.
    """
    statement = f"SELECT {COLUMNS} FROM entries WHERE seq >= ? ORDER BY seq LIMIT {PAGE_ROWS}"
    next_seq: int | None = SEQ_MIN
    while next_seq is not None:
        row = None
        for columns in connection.execute(statement, (next_seq,)):
            row = Row._make(columns)
            yield row
        next_seq = row.seq + 1 if row is not None and row.seq < SEQ_MAX else None


def first_row(connection: sqlite3.Connection) -> Row | None:
    return next(all_rows(connection), None)


def newest_rows(connection: sqlite3.Connection, limit: int) -> list[Row]:
    """The newest `limit` rows, in order of seq."""
    found = connection.execute(f"SELECT {COLUMNS} FROM entries ORDER BY seq DESC LIMIT ?", (limit,))
    return [Row._make(columns) for columns in found][::-1]


def _is_empty(connection: sqlite3.Connection) -> bool:
    (objects,) = connection.execute("SELECT count(*) FROM sqlite_schema").fetchone()
    (application,) = connection.execute("PRAGMA application_id").fetchone()
    return bool(objects == 0 and application == 0)


def _create(connection: sqlite3.Connection) -> None:
    connection.execute("BEGIN EXCLUSIVE")
    for statement in _statements():
        connection.execute(statement)
    connection.executemany("INSERT INTO meta VALUES (?, ?)", META.items())
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute(f"PRAGMA user_version = {SCHEMA_VERSION}")
    connection.execute("COMMIT")


def _statements() -> Iterator[str]:
    # executescript would commit before it starts; half a schema must never be left behind.
    script = resources.files("edgectl.journal").joinpath("schema.sql").read_text("utf-8")
    statement = ""
    for line in script.splitlines(keepends=True):
        statement += line
        if sqlite3.complete_statement(statement):
            yield statement
            statement = ""


def _any_text(data: bytes) -> str:
    """Text as it stands, damaged or not: whoever reads compares its hash."""
    return data.decode("utf-8", "surrogateescape")
