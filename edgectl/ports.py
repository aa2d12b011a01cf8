"""The edges the loop knows, and the errors they may raise: one page.

Adapters live in `opcua`, `worker`, `journal` and `clock`; in-memory ones in
`testing`. Every awaitable here is bounded by a deadline that the caller gives
(plant-independent wall seconds on the event loop's clock).
"""

from __future__ import annotations

from typing import Protocol

from edgectl.records.advice import Advice, Delivery
from edgectl.records.entries import Entry, Receipt
from edgectl.records.plan import PlanRequest, SolveOutcome
from edgectl.records.readings import TagSnapshot


class PortError(Exception):
    """An edge failed in a way the loop expects and records."""


class PlantUnreachableError(PortError):
    """No session with the plant's server, or the call did not answer in time."""


class PlantMismatchError(PortError):
    """The server answers, but a node, type or unit is not what the site file says."""


class NotJournalledError(PortError):
    """The entry did not become durable in time, or cannot."""


class Clock(Protocol):
    """The only source of time. Plant time runs at `speed` times wall time."""

    @property
    def speed(self) -> float: ...

    def plant_time(self) -> float:
        """Seconds since the Unix epoch, plant time."""

    def wall(self) -> float:
        """Monotonic wall seconds; differences only."""

    async def sleep_until(self, plant_time: float) -> None:
        """Return at that instant or, if it has passed, at once."""


class TagSource(Protocol):
    """Reads the tags of the site file. Never writes."""

    async def read(self, cycle: int, timeout_s: float) -> TagSnapshot:
        """One Read call. Raises PlantUnreachableError or PlantMismatchError."""


class AdviceSink(Protocol):
    """Writes advisory nodes only: it stands behind the write fence."""

    async def publish(self, advice: Advice, heartbeat: int, timeout_s: float) -> Delivery:
        """Write `valid=false`, the values, the stamps, `valid`; withdraw on a partial failure.

        Never raises for a refused or lost write: the delivery says what happened.
        """

    async def withdraw(self, reason: str, sentence: str, timeout_s: float) -> Delivery:
        """Write `valid=false` with the reason; used when stopping and when publishing failed."""


class CycleJournal(Protocol):
    """The durable record."""

    async def append(self, entry: Entry, timeout_s: float) -> Receipt:
        """Return once the entry is durable. Raises NotJournalledError."""


class PlanSolver(Protocol):
    """Estimates and plans in another process, inside a budget."""

    async def solve(self, request: PlanRequest, deadline: float) -> SolveOutcome:
        """Never later than `deadline` (the clock's wall seconds) plus the time of a kill signal."""
