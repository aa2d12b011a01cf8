"""When cycles begin, and until when each phase may take.

The grid is absolute: its instants never move, whatever a cycle does. A cycle that
begins a little late keeps its place on the grid and has less time; one that would
begin too late is skipped and counted. There is never a burst of missed cycles.

Of the wall period, reading, estimating and planning end at 80 % at the latest;
10 % is kept back for the journal, 10 % for publishing. Each phase may also not
take longer than the site file allows it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

from edgectl.cycle.policies import CyclePolicy

LATEST_START: Final = 0.2
"""Part of a period by which a cycle may begin late; later it is skipped."""
READ_UNTIL: Final = 0.4
SOLVE_UNTIL: Final = 0.8
JOURNAL_UNTIL: Final = 0.9
PUBLISH_UNTIL: Final = 1.0
"""Parts of the wall period, counted from the grid instant."""
LEAST_SHARE: Final = 0.02
"""Of the wall period, that a phase gets even when those before it took all the time."""
SOFT_SHARE: Final = 0.85
"""Of the time left to the worker, after which the engine returns what it has."""


@dataclass(frozen=True, slots=True)
class Grid:
    """Instants `origin + index * period_s` of plant time."""

    origin: float
    period_s: float

    def instant(self, index: int) -> float:
        return self.origin + index * self.period_s

    def following(self, index: int, now: float) -> int:
        """The next instant that can still be met. More than `index + 1`: the rest is skipped."""
        latest_start = LATEST_START * self.period_s
        first = math.ceil((now - self.origin - latest_start) / self.period_s)
        return max(index + 1, first)


@dataclass(frozen=True, slots=True)
class Tick:
    """One cycle's place in time."""

    cycle: int
    now: float
    """Plant time at which it began."""
    begun_wall: float
    late_s: float
    """Wall seconds after its grid instant."""
    skipped: int
    """Grid instants missed since the cycle before."""


@dataclass(frozen=True, slots=True)
class Deadlines:
    """Ends of a cycle's phases on the clock's wall, for one cycle."""

    due_wall: float
    period_wall_s: float
    policy: CyclePolicy

    @classmethod
    def of(cls, tick: Tick, policy: CyclePolicy, speed: float) -> Deadlines:
        return cls(tick.begun_wall - tick.late_s, policy.period_s / speed, policy)

    def read_timeout_s(self, wall: float) -> float:
        return self._left_s(wall, READ_UNTIL, self.policy.read_timeout_s)

    def solve_timeout_s(self, wall: float) -> float:
        """The budget as enforced."""
        return self._left_s(wall, SOLVE_UNTIL, self.policy.budget_s)

    def journal_timeout_s(self, wall: float) -> float:
        return self._left_s(wall, JOURNAL_UNTIL, self.policy.journal_wait_s)

    def publish_timeout_s(self, wall: float) -> float:
        return self._left_s(wall, PUBLISH_UNTIL, self.policy.write_timeout_s)

    def entry_timeout_s(self, wall: float) -> float:
        """For what is written down after publishing."""
        return self._left_s(wall, PUBLISH_UNTIL, self.policy.journal_wait_s)

    def _left_s(self, wall: float, until: float, allowed_s: float) -> float:
        left_s = self.due_wall + until * self.period_wall_s - wall
        return min(allowed_s, max(left_s, LEAST_SHARE * self.period_wall_s))


def enforced_budget_s(policy: CyclePolicy, speed: float) -> float:
    """Wall seconds that estimate and plan may take in a cycle that begins on time."""
    return min(policy.budget_s, SOLVE_UNTIL * policy.period_s / speed)
