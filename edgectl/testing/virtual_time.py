"""An event loop whose time jumps to the next timer: a day of cycles in seconds.

Threads, processes and sockets do not obey virtual time; they belong elsewhere.
A wait that no timer can end fails at once instead of hanging.
"""

from __future__ import annotations

import asyncio
import selectors
from collections.abc import Coroutine
from typing import Any, Final, TypeVar

T = TypeVar("T")

HORIZON_S: Final = 30 * 86400.0
"""Virtual time at which a test that goes on for ever is given up."""


class EndlessWaitError(Exception):
    """Everybody waits, and nothing will ever happen."""


class _JumpingSelector(selectors.SelectSelector):
    def __init__(self) -> None:
        super().__init__()
        self.now = 0.0

    def select(self, timeout: float | None = None) -> list[tuple[selectors.SelectorKey, int]]:
        ready = super().select(0)
        if ready or timeout == 0:
            return ready
        if timeout is None:
            raise EndlessWaitError("a wait with no timer that could end it")
        self.now += timeout
        if self.now > HORIZON_S:
            raise EndlessWaitError(f"still waiting after {HORIZON_S:g} virtual seconds")
        return ready


class VirtualTimeLoop(asyncio.SelectorEventLoop):
    """Starts at time 0; `time()` moves only while everybody waits."""

    def __init__(self) -> None:
        self._jumping = _JumpingSelector()
        super().__init__(self._jumping)

    def time(self) -> float:
        return self._jumping.now


class VirtualClock:
    """The clock port on the running loop's time."""

    def __init__(self, start: float = 1_767_592_800.0, speed: float = 1.0) -> None:
        self.start = start
        self.speed = speed

    def wall(self) -> float:
        return asyncio.get_running_loop().time()

    def plant_time(self) -> float:
        return self.start + self.speed * self.wall()

    async def sleep_until(self, plant_time: float) -> None:
        await asyncio.sleep(max(0.0, (plant_time - self.plant_time()) / self.speed))


def run_virtual(main: Coroutine[Any, Any, T]) -> T:
    """Run to the end on a fresh virtual-time loop."""
    with asyncio.Runner(loop_factory=VirtualTimeLoop) as runner:
        return runner.run(main)
