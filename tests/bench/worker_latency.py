"""What the watched worker costs, with a brain that thinks for no time or burns a core.

    python tests/bench/worker_latency.py --rounds 200 --kills 20

Prints milliseconds: a request's round trip with a plan of real size; how far
past its deadline an overrun comes back; the first answer of the standby; a
replacement built from nothing; a 20 ms solve alone and beside such a build; and
how late a 1 ms timer on the same event loop ran through all of it.
"""

from __future__ import annotations

import argparse
import asyncio
import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from edgectl.clock import PlantClock
from edgectl.records.entries import Json
from edgectl.records.plan import (
    CvPrediction,
    Estimate,
    Overrun,
    Plan,
    PlannedMove,
    PlanRequest,
    ProfileStage,
    SolverStatistics,
)
from edgectl.worker.handle import WatchedSolver
from edgectl.worker.messages import Setup

CLOCK = PlantClock.real()
HORIZON = tuple(0.1 * i for i in range(30))
TICK_S = 0.001
HANG, BURN = 1_000_000, 2_000_000
BURN_S = 0.02


@dataclass(frozen=True)
class BenchBrain:
    engine: str = "none"
    model_hash: str = "none"

    def warm_up(self) -> None:
        """Nothing is compiled here."""

    def answer(self, request: PlanRequest) -> Plan:
        if request.cycle >= BURN:
            burn(BURN_S)
        elif request.cycle >= HANG:
            burn(3600.0)
        return big_plan(request)

    def job(self, name: str, arguments: Mapping[str, Json]) -> Json:
        raise ValueError(f"no job called {name}")


def build_brain(site: dict[str, Any], wall: Callable[[], float]) -> BenchBrain:
    burn(site["build_s"])
    return BenchBrain()


def burn(seconds: float) -> None:
    until = CLOCK.wall() + seconds
    while CLOCK.wall() < until:
        pass


def big_plan(request: PlanRequest) -> Plan:
    moves = tuple(PlannedMove(f"mv{i}", 1.0, 2.0, 2.0, HORIZON) for i in range(2))
    alone = {"mv0": HORIZON, "mv1": HORIZON}
    predictions = tuple(CvPrediction(f"cv{i}", HORIZON, HORIZON, alone) for i in range(4))
    profile = tuple(ProfileStage(i, 70.0 + i, 0.5) for i in range(42))
    estimate = Estimate((), {"feed": 0.3}, profile, (), request.memory)
    statistics = SolverStatistics("none", "none", True, 0, 0.0, 0.0, 0.0)
    return Plan(request.request_id, request.cycle, estimate, HORIZON, moves, predictions, 1.0, 2.0,
                (), statistics)  # fmt: skip


async def solve(solver: WatchedSolver, cycle: int, within_s: float) -> tuple[object, float]:
    """The outcome, and how long it took [ms]."""
    memory = {"states": tuple(0.01 * i for i in range(126))}
    request = PlanRequest(f"r{cycle}", cycle, 1.7e9, 30.0, 1.0, (), (), (), memory)
    began = CLOCK.wall()
    outcome = await solver.solve(request, began + within_s)
    return outcome, (CLOCK.wall() - began) * 1e3


async def measure(rounds: int, kills: int, times: dict[str, list[float]]) -> None:
    solver = WatchedSolver(Setup({"build_s": 0.5}, "worker_latency:build_brain"))
    solver.start()
    await solver.wait_ready(60.0, workers=2)

    async def timed(name: str, cycle: int, within_s: float = 30.0) -> object:
        outcome, took_ms = await solve(solver, cycle, within_s)
        times.setdefault(name, []).append(took_ms)
        return outcome

    for cycle in range(rounds):
        await timed("round trip", cycle)
    for cycle in range(kills):
        await timed("20 ms solve, alone", BURN + cycle)
    for cycle in range(kills):
        outcome, took_ms = await solve(solver, HANG + cycle, 0.05)
        assert isinstance(outcome, Overrun)
        times.setdefault("past the deadline", []).append(took_ms - 50.0)
        killed = CLOCK.wall()
        assert isinstance(await timed("first answer of the standby", cycle), Plan)
        for _ in range(5):
            await timed("20 ms solve, beside a build", BURN + cycle)
        await solver.wait_ready(60.0, workers=2)
        times.setdefault("replacement, 500 ms of it building", []).append(
            (CLOCK.wall() - killed) * 1e3
        )
    await solver.close()


async def probe_lag(lags: list[float]) -> None:
    while True:
        before = CLOCK.wall()
        await asyncio.sleep(TICK_S)
        lags.append((CLOCK.wall() - before - TICK_S) * 1e3)


async def run(rounds: int, kills: int) -> dict[str, list[float]]:
    times: dict[str, list[float]] = {}
    lags: list[float] = []
    async with asyncio.TaskGroup() as group:
        lag = group.create_task(probe_lag(lags))
        await measure(rounds, kills, times)
        lag.cancel()
    return {**times, "event loop lag": lags}


def at(values: list[float], share: float) -> float:
    return sorted(values)[min(len(values) - 1, int(share * len(values)))]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--rounds", type=int, default=200)
    parser.add_argument("--kills", type=int, default=20)
    arguments = parser.parse_args()
    # The worker imports this very file for its brain.
    os.environ["PYTHONPATH"] = str(Path(__file__).parent)
    for name, values in asyncio.run(run(arguments.rounds, arguments.kills)).items():
        p50, p95, p99 = (at(values, share) for share in (0.50, 0.95, 0.99))
        print(f"{name:36s} p50 {p50:7.2f}  p95 {p95:7.2f}  p99 {p99:7.2f}  max {max(values):7.2f}")


if __name__ == "__main__":
    main()
