"""The runtime's side of a rehearsal: it takes its orders as JSON lines on standard input.

    parent: {"measure": 6, "slow_cycles": null}        how to begin
    us:     {"ready": true, "solve_ms": [...]}         workers built, solves measured
    parent: {"plant_start": ..., "anchor": ..., "speed": ..., "cycles": 120}
    ...     cycles, until they are done or standard input closes

So the workers are built and measured before the plant's clock starts, and the
runtime ends when its parent does, however that died. From the second order on it
is the production runtime: the same start-up, the same loop.
"""

from __future__ import annotations

import asyncio
import json
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from edgectl.clock import PlantClock
from edgectl.console.pace import measured_solves_ms
from edgectl.runtime.policies import policies_from
from edgectl.runtime.startup import RunOrder, run_site
from edgectl.settings import Site
from edgectl.worker.handle import WatchedSolver
from edgectl.worker.messages import Setup

BUILD_LIMIT_S: Final = 180.0


class OrderError(Exception):
    """Standard input did not bring the order that was due."""


@dataclass(frozen=True, slots=True)
class Orders:
    """Lines from the parent."""

    reader: asyncio.StreamReader
    transport: asyncio.BaseTransport

    @classmethod
    async def open(cls) -> Orders:
        loop = asyncio.get_running_loop()
        reader = asyncio.StreamReader()
        transport, _ = await loop.connect_read_pipe(
            lambda: asyncio.StreamReaderProtocol(reader), sys.stdin
        )
        return cls(reader, transport)

    async def next(self) -> dict[str, Any]:
        """The next order. Raises OrderError."""
        line = await self.reader.readline()
        if not line:
            raise OrderError("standard input was closed before the order came")
        try:
            order = json.loads(line)
        except ValueError as error:
            raise OrderError(f"not an order: {line[:80]!r}") from error
        if not isinstance(order, dict):
            raise OrderError(f"not an order: {line[:80]!r}")
        return order

    async def closed(self) -> None:
        """Return when the parent is gone."""
        while await self.reader.read(4096):
            pass


async def rehearse(site: Site, password: str | None, journal: Path, stop: asyncio.Event) -> None:
    """Build, measure, then run as production does."""
    orders = await Orders.open()
    try:
        first = await orders.next()
        slow = first.get("slow_cycles")
        setup = Setup(
            site.as_dict(), rehearsal=True, slow_cycles=None if slow is None else (slow[0], slow[1])
        )
        solver = WatchedSolver(setup)
        solver.start()
        try:
            # The standby too: nothing is built beside the first cycles.
            await solver.wait_ready(BUILD_LIMIT_S, workers=2)
            solves = await measured_solves_ms(
                solver, site, policies_from(site), int(first.get("measure", 0))
            )
            _say({"ready": True, "solve_ms": solves})
            second = await orders.next()
            await _until_done(site, password, journal, solver, orders, second, stop)
        finally:
            await solver.close()
    finally:
        orders.transport.close()


async def _until_done(
    site: Site,
    password: str | None,
    journal: Path,
    solver: WatchedSolver,
    orders: Orders,
    second: dict[str, Any],
    stop: asyncio.Event,
) -> None:
    clock = PlantClock(second["plant_start"], second["anchor"], second["speed"])
    order = RunOrder(site, password, journal, clock, cycles=second["cycles"])

    async def stop_with_the_parent() -> None:
        await orders.closed()
        stop.set()

    async with asyncio.TaskGroup() as tasks:
        watch = tasks.create_task(stop_with_the_parent())
        await run_site(order, solver, stop)
        watch.cancel()


def _say(content: dict[str, Any]) -> None:
    sys.stdout.write(json.dumps(content) + "\n")
    sys.stdout.flush()
