"""Tag values exactly as the plant's server gave them."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Quality(StrEnum):
    """The three OPC UA severities (OPC 10000-4, 7.39.1)."""

    GOOD = "good"
    UNCERTAIN = "uncertain"
    BAD = "bad"


def quality_of(status_code: int) -> Quality:
    """Severity of an OPC UA status code: its two top bits (OPC 10000-4, 7.39.1)."""
    severity = (status_code >> 30) & 0b11
    if severity == 0:
        return Quality.GOOD
    if severity == 1:
        return Quality.UNCERTAIN
    return Quality.BAD


@dataclass(frozen=True, slots=True)
class Reading:
    """One tag as received: value, status and both timestamps, untouched."""

    tag: str
    value: float | None
    """None when the server sent no number. May be NaN or infinite: validation refuses it."""
    status_code: int
    source_time: float | None
    server_time: float | None

    @property
    def quality(self) -> Quality:
        return quality_of(self.status_code)


@dataclass(frozen=True, slots=True)
class TagSnapshot:
    """Every tag of the site file, read in one call."""

    cycle: int
    received_at: float
    readings: tuple[Reading, ...]
    """In the order of the site file."""
