"""Scripted faults: what goes wrong, from which cycle to which."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Final

from edgectl.records.readings import Reading

TAG_FAULTS: Final = (
    "bad", "uncertain", "nan", "inf", "minus_inf", "huge", "denormal", "nothing",
    "stale", "future", "no_source_time", "missing", "frozen",
)  # fmt: skip
SOLVER_FAULTS: Final = (
    "overrun", "lost", "warming", "no_plan", "no_estimate", "nan_move", "nan_prediction",
    "wrong_id", "outside_limits", "too_far", "worse_than_nothing", "false_cost",
    "infinite_memory", "mismatch",
)  # fmt: skip
READ_FAULTS: Final = ("unreachable", "not_as_described", "slow_read")
JOURNAL_FAULTS: Final = ("slow_journal", "failing_journal")
SINK_FAULTS: Final = ("partial_publish", "refused_publish", "slow_publish")
PLANT_FAULTS: Final = ("switch_off", "manual", "valve_end")
RESTART: Final = "restart"


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault, active while `begin <= cycle < begin + cycles`. Cycles count from 1."""

    kind: str
    begin: int
    cycles: int = 1
    subject: str = ""
    """Tag of a tag's fault, MV of a loop's."""

    def active(self, cycle: int) -> bool:
        return self.begin <= cycle < self.begin + self.cycles

    @property
    def end(self) -> int:
        return self.begin + self.cycles


class Script:
    """All faults of a story."""

    def __init__(self, faults: Sequence[Fault] = ()) -> None:
        self.faults = tuple(faults)

    def active(self, cycle: int, kinds: Sequence[str]) -> list[Fault]:
        return [f for f in self.faults if f.kind in kinds and f.active(cycle)]

    def first(self, cycle: int, kinds: Sequence[str]) -> str | None:
        found = self.active(cycle, kinds)
        return found[0].kind if found else None

    @property
    def over_at(self) -> int:
        """The first cycle without any fault to come."""
        return max((fault.end for fault in self.faults), default=1)


def spoiled(reading: Reading, kind: str, last: Reading | None) -> Reading | None:
    """What a tag's fault makes of a reading; None when it is not delivered at all."""
    values = {
        "nan": math.nan,
        "inf": math.inf,
        "minus_inf": -math.inf,
        "huge": 1e300,
        "denormal": 5e-324,
        "nothing": None,
    }
    if kind in values:
        return replace(reading, value=values[kind])
    source = reading.source_time
    match kind:
        case "bad":
            return replace(reading, value=None, status_code=0x808C0000)
        case "uncertain":
            return replace(reading, status_code=0x40900000)
        case "stale":
            return replace(reading, source_time=None if source is None else source - 86_400.0)
        case "future":
            return replace(reading, source_time=None if source is None else source + 86_400.0)
        case "no_source_time":
            return replace(reading, source_time=None)
        case "frozen":
            return reading if last is None else replace(reading, value=last.value)
        case "missing":
            return None
    raise ValueError(f"unknown fault of a tag: {kind!r}")
