"""What the hash chain covers, and how.

`entry_hash` is the SHA-256 of seq, kind, cycle, at, body and previous_hash;
`previous_hash` is the `entry_hash` of the row before. So the chain covers every
stored column, `entry_hash` itself included: it is what the next row builds on,
and the newest one is the anchor to keep somewhere else.

The values are framed before hashing: a letter for the type, the length in
bytes, a colon, the bytes. No two different rows have the same framing, whatever
stands in them: "1" is not 1, and nothing can move from one column to the next.

The first row has no row before it. Its previous_hash is the *genesis*, the hash
of the journal's meta table, so that the chain covers that table too.
"""

from __future__ import annotations

import hashlib
import struct
from collections.abc import Iterable, Mapping
from typing import NamedTuple, TypeAlias

Column: TypeAlias = "int | float | str | bytes | None"

SCHEMA_VERSION = 1
META = {"schema_version": str(SCHEMA_VERSION)}
"""The meta table of a journal made by this version. Its genesis is in the tests."""


class Row(NamedTuple):
    """One row of `entries`, in the order in which its columns are selected."""

    seq: int
    kind: str
    cycle: int | None
    at: float
    body: str
    previous_hash: str
    entry_hash: str


COLUMNS = ", ".join(Row._fields)


class ChainEnd(NamedTuple):
    """The newest row: its number (0 in a new journal) and its hash (then the genesis)."""

    seq: int
    entry_hash: str


def genesis(meta: Mapping[str, str]) -> str:
    """What the first row builds on."""
    pairs = (part for key in sorted(meta) for part in (key, meta[key]))
    return _sha256(("edgectl journal", *pairs))


def hash_of(row: Row) -> str:
    """The hash that this row should carry."""
    return _sha256(row[:-1])


def sealed(end: ChainEnd, kind: str, cycle: int | None, at: float, body: str) -> Row:
    """The next row behind `end`."""
    row = Row(end.seq + 1, kind, cycle, at, body, end.entry_hash, "")
    return row._replace(entry_hash=hash_of(row))


def break_between(end: ChainEnd, row: Row) -> str | None:
    """Why `row` is not the honest successor of `end`; None when it is."""
    if row.seq != end.seq + 1:
        return f"entry {end.seq + 1} is missing: the next one is {row.seq}"
    if row.entry_hash != hash_of(row):
        return f"entry {row.seq} was altered: its columns do not give its hash"
    if row.previous_hash != end.entry_hash:
        before = f"entry {end.seq}" if end.seq else "the meta table"
        return f"entry {row.seq} does not follow {before}: its previous_hash is another one"
    return None


def row_bytes(row: Row) -> int:
    """Bytes that the columns hold: text in UTF-8, eight for a number, none for NULL."""
    return sum(8 if isinstance(value, int | float) else len(_typed(value)[1]) for value in row)


def framed(values: Iterable[Column]) -> bytes:
    """The unambiguous bytes of some columns."""
    parts: list[bytes] = []
    for value in values:
        letter, data = _typed(value)
        parts += (letter, str(len(data)).encode("ascii"), b":", data)
    return b"".join(parts)


def _typed(value: Column) -> tuple[bytes, bytes]:
    if value is None:
        return b"n", b""
    if isinstance(value, int):
        return b"i", str(value).encode("ascii")
    if isinstance(value, float):
        return b"f", struct.pack(">d", value)
    if isinstance(value, str):
        return b"t", _text(value)
    return b"b", value


def _text(value: str) -> bytes:
    # Damaged text is read with the same handler, so its hash is that of the bytes on disk.
    return value.encode("utf-8", "surrogateescape")


def _sha256(values: Iterable[Column]) -> str:
    return hashlib.sha256(framed(values)).hexdigest()
