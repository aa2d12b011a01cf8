"""One root cause, one event: raised once, counted, cleared once."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Final

from edgectl.cycle.state import Condition
from edgectl.records.cycle_record import EventRecord

CLEARED_AFTER: Final = 3
"""Cycles without the condition before it counts as over: a cause that flickers is one cause."""


@dataclass(frozen=True, slots=True)
class _Raised:
    condition: Condition
    cycles: int
    absent: int = 0


class EventBook:
    """What is raised now. Feed it every cycle's conditions; it gives the events to write down."""

    def __init__(self) -> None:
        self._raised: dict[tuple[str, str], _Raised] = {}

    def update(self, conditions: Iterable[Condition]) -> list[EventRecord]:
        now = {(c.event, c.subject): c for c in conditions}
        events = []
        for key, condition in now.items():
            if key not in self._raised:
                events.append(_event(condition, raised=True, cycles=0))
                self._raised[key] = _Raised(condition, 1)
            else:
                known = self._raised[key]
                self._raised[key] = replace(known, cycles=known.cycles + 1, absent=0)
        for key, known in list(self._raised.items()):
            if key in now:
                continue
            self._raised[key] = replace(known, absent=known.absent + 1)
            if known.absent + 1 >= CLEARED_AFTER:
                del self._raised[key]
                events.append(_event(known.condition, raised=False, cycles=known.cycles))
        return events


def _event(condition: Condition, *, raised: bool, cycles: int) -> EventRecord:
    over = f"Over after {cycles} cycles: {condition.sentence}"
    return EventRecord(
        event=condition.event,
        subject=condition.subject,
        raised=raised,
        severity=condition.severity,
        cycles=cycles,
        sentence=condition.sentence if raised else over,
    )
