"""Journal entries: what is written down, and the receipt for it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import TypeAlias, Union

Json: TypeAlias = Union[bool, int, float, str, "list[Json]", "dict[str, Json]", None]


class EntryKind(StrEnum):
    OPENED = "opened"
    """A runtime started: versions, hashes, what was restored."""
    DECISION = "decision"
    DELIVERY = "delivery"
    WITHDRAWAL = "withdrawal"
    EVENT = "event"
    CLOSED = "closed"


@dataclass(frozen=True, slots=True)
class Entry:
    """One row to be. `body` is plain JSON without NaN or infinities (see `encoding`)."""

    kind: EntryKind
    cycle: int | None
    at: float
    """Plant time, seconds since the Unix epoch."""
    body: Mapping[str, Json]


@dataclass(frozen=True, slots=True)
class Receipt:
    """Proof that an entry is durable."""

    seq: int
    entry_hash: str
    record_bytes: int
    write_ms: float
