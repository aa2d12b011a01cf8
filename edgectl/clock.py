"""The only reader of the operating system's clocks.

Plant time = start + speed x wall time. On a real plant the speed is 1 and the
start is the wall clock's reading at start-up, so that a step of the wall clock
cannot move the grid, the ages or the validity times. A simulated plant and the
runtime share one plant time through the same anchor: CLOCK_MONOTONIC is common
to all processes of a Linux box.
"""

from __future__ import annotations

import asyncio
import time
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class PlantClock:
    """Plant time from an anchor on the monotonic clock.

    Parameters
    ----------
    start : float
        Plant time at the anchor, seconds since the Unix epoch [s].
    anchor : float
        Monotonic wall time of that instant [s].
    speed : float
        Plant seconds per wall second [-].
    """

    start: float
    anchor: float
    speed: float = 1.0

    @classmethod
    def real(cls) -> PlantClock:
        """Plant time that is real time, anchored now."""
        return cls(start=time.time(), anchor=time.monotonic())

    def plant_time(self) -> float:
        return self.start + self.speed * (time.monotonic() - self.anchor)

    def wall(self) -> float:
        return time.monotonic()

    async def sleep_until(self, plant_time: float) -> None:
        remaining = (plant_time - self.plant_time()) / self.speed
        await asyncio.sleep(max(0.0, remaining))


def utc_now() -> float:
    """The wall clock, seconds since the Unix epoch [s]; for stamps outside the cycle only."""
    return time.time()
