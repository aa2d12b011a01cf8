"""How late the event loop runs: a probe that asks to be woken and looks at the clock."""

from __future__ import annotations

import asyncio
import math
from typing import Final

from edgectl.ports import Clock
from edgectl.records.cycle_record import LoopLag

MOST_SAMPLES: Final = 10_000


class LagProbe:
    """Samples the lag all the time; `take` gives what was seen since it was asked last."""

    def __init__(self, clock: Clock, interval_s: float = 0.05) -> None:
        self._clock = clock
        self._interval_s = interval_s
        self._samples_ms: list[float] = []

    async def run(self) -> None:
        """Until cancelled."""
        while True:
            asked_at = self._clock.wall()
            await asyncio.sleep(self._interval_s)
            late_ms = 1e3 * (self._clock.wall() - asked_at - self._interval_s)
            # Nobody took them for very long: the newest matter.
            del self._samples_ms[: max(0, len(self._samples_ms) - MOST_SAMPLES)]
            self._samples_ms.append(max(0.0, late_ms))

    def take(self) -> LoopLag:
        ranked = sorted(self._samples_ms)
        self._samples_ms.clear()
        if not ranked:
            return LoopLag(0.0, 0.0)
        p90, p99 = (ranked[math.ceil(share * len(ranked)) - 1] for share in (0.90, 0.99))
        return LoopLag(round(p99, 3), round(ranked[-1], 3), round(p90, 3), len(ranked))
