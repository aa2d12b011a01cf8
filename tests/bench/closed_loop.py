"""The production loop against the simulated column in one process, as fast as it solves.

    python tests/bench/closed_loop.py [--seeds 5] [--hours 4] [--crew follows] [--set KEY=VALUE ...]

Everything is real but the wires: the runtime's loop, the planner, the plant, the
watchdog and the crew; tags, advice and journal are kept in memory and the clock
waits for the solver. For tuning, because it is several times faster than a rehearsal over
OPC UA (`tests/bench/default_story.py`), which is what counts. `--set` changes
the site file, e.g. `--set mv.FIC-2103.price=0.3`. A report, not a gate.
"""

from __future__ import annotations

import argparse
import asyncio
import io
import json
import logging
import tempfile
import time
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TextIO, cast

import structlog

from edgectl.cycle.state import LoopState
from edgectl.optimisation.planner import build_brain
from edgectl.records.advice import Advice, Delivery
from edgectl.records.cycle_record import Provenance
from edgectl.records.entries import Entry, Receipt
from edgectl.records.plan import PlanRequest, SolveOutcome
from edgectl.records.readings import Reading, TagSnapshot
from edgectl.runtime.lag import LagProbe
from edgectl.runtime.loop import CycleReport, Loop, Ports
from edgectl.runtime.policies import policies_from
from edgectl.runtime.schedule import Tick
from edgectl.settings.site import Site
from sim_server.crew import Crew, CrewMode
from sim_server.faults import Drill, DrillName
from sim_server.plant import SimulatedPlant
from sim_server.scoring import TruthFile, read_truth, score
from sim_server.simulation import Simulation
from sim_server.watchdog import AdviceWatchdog
from sim_server.writelog import WriteLog

START = 1_800_000_000.0
EXAMPLE = Path(__file__).resolve().parents[2] / "deploy/examples/methanol_water.toml"


@dataclass
class PatientClock:
    """Plant time moves only when the bench says so."""

    now: float = START
    speed: float = 1.0

    def plant_time(self) -> float:
        return self.now

    def wall(self) -> float:
        return time.monotonic()

    async def sleep_until(self, plant_time: float) -> None:
        raise AssertionError("nothing waits here")


@dataclass
class Rig:
    """Plant, memory ports and planner of one run."""

    site: Site
    brain: Any
    clock: PatientClock
    simulation: Simulation
    solve_ms: list[float] = field(default_factory=list)
    iterations: list[int] = field(default_factory=list)
    seq: int = 0

    async def read(self, cycle: int, timeout_s: float) -> TagSnapshot:
        signals = self.simulation.signals
        readings = []
        for name, tag in self.site.tags.items():
            node = tag.node.partition("s=")[2]
            if node == "HS-2120.advice_on":
                on = float(self.simulation.board.advice_on)
                readings.append(Reading(name, on, 0, self.clock.now, self.clock.now))
                continue
            signal = signals[node]
            stamp = START + signal.source_time_s
            readings.append(Reading(name, signal.value, signal.status, stamp, self.clock.now))
        return TagSnapshot(cycle, self.clock.now, tuple(readings))

    async def publish(self, advice: Advice, heartbeat: int, timeout_s: float) -> Delivery:
        board, now = self.simulation.board, self.clock.now
        for move in advice.moves:
            if move.target is not None:
                board.write(f"ADV.{move.mv}.target", float(move.target), now)
            board.write(f"ADV.{move.mv}.reason", move.reason, now)
        if advice.made_at is not None:
            board.write("ADV.made_at", datetime.fromtimestamp(advice.made_at, UTC), now)
        board.write("ADV.valid_until", datetime.fromtimestamp(advice.valid_until, UTC), now)
        board.write("ADV.heartbeat", heartbeat, now)
        board.write("ADV.valid", advice.valid, now)
        self.simulation.judge()
        return Delivery(advice.cycle, advice.valid, True, (), None)

    async def withdraw(self, reason: str, sentence: str, timeout_s: float) -> Delivery:
        raise AssertionError("a bench run is not stopped in the middle")

    async def append(self, entry: Entry, timeout_s: float) -> Receipt:
        self.seq += 1
        return Receipt(self.seq, "", 0, 0.0)

    async def solve(self, request: PlanRequest, deadline: float) -> SolveOutcome:
        begun = time.monotonic()
        answer: SolveOutcome = self.brain.answer(request)
        self.solve_ms.append(1e3 * (time.monotonic() - begun))
        statistics = getattr(answer, "statistics", None)
        if statistics is not None:
            self.iterations.append(statistics.iterations)
        return answer


def changed(content: dict[str, Any], changes: Sequence[str]) -> dict[str, Any]:
    """The site file's tables with `a.b.c=JSON` changes."""
    for change in changes:
        path, _, value = change.partition("=")
        table = content
        *heads, last = path.split(".")
        for head in heads:
            table = table[head]
        table[last] = json.loads(value)
    return content


async def run(seed: int, hours: float, crew: str, changes: Sequence[str], verbose: bool) -> str:
    """One seed's story; returns its line."""
    content = changed(tomllib.loads(EXAMPLE.read_text()), changes)
    site = Site.from_dict(content, "bench")
    brain = build_brain(site.as_dict(), time.monotonic)
    clock = PatientClock()
    plant = SimulatedPlant(seed)
    with tempfile.NamedTemporaryFile("w+", encoding="utf-8", suffix=".csv") as file:
        simulation = Simulation(
            plant,
            Crew(CrewMode(crew), seed),
            Drill(DrillName.NONE),
            AdviceWatchdog(site.cycle.period_s, 3.0),
            clock.plant_time,
            WriteLog(io.StringIO(), lambda: (clock.now, 0.0)),
            TruthFile(cast("TextIO", file), plant.true_values().keys()),
        )
        rig = Rig(site, brain, clock, simulation)
        ports = Ports(rig, rig, rig, rig, clock)
        loop = Loop(
            ports,
            policies_from(site),
            Provenance("bench", "", brain.model_hash, True),
            LoopState(),
            LagProbe(clock),
        )
        asks = 0
        for cycle in range(1, int(hours * 3600 / site.cycle.period_s)):
            until_s = cycle * site.cycle.period_s
            while plant.time_s < until_s:
                simulation.step()
                clock.now = START + plant.time_s
            report = await loop.run_cycle(Tick(cycle, clock.now, clock.wall(), 0.0, 0))
            asks += any(move.changed for move in report.advice.moves)
            if verbose:
                narrate(cycle, report, plant)
        file.flush()
        scored = score(read_truth(Path(file.name)))
    ranked = sorted(rig.solve_ms)
    quality = "  ".join(
        f"{q.name} {100 * q.in_spec_fraction:.1f} % mean {q.mean:.3g}" for q in scored.qualities
    )
    return (
        f"seed {seed}  {scored.energy_kwh_per_t_distillate:.1f} kWh/t  {quality}  "
        f"{asks / hours:.2f} asks/h  {simulation.crew_actions} actions  "
        f"usable {100 * scored.usable_fraction:.0f} %  solve p50 {ranked[len(ranked) // 2]:.0f} "
        f"p99 {ranked[int(0.99 * len(ranked))]:.0f} max {ranked[-1]:.0f} ms  "
        f"iterations max {max(rig.iterations)}"
    )


def narrate(cycle: int, report: CycleReport, plant: SimulatedPlant) -> None:
    """One line per change or tenth minute."""
    advice, true = report.advice, plant.true_values()
    if not (cycle % 20 == 0 or any(move.changed for move in advice.moves)):
        return
    print(
        f"{cycle / 2:6.1f} {advice.standing} {advice.reason}: {advice.sentence[:150]} | true "
        f"{true['bottoms_methanol_wt_ppm']:.0f} ppm {true['distillate_water_wt_pct']:.3f} % "
        f"R {true['reflux_kg_h']:.0f} T30 {true['tray30_temp_degc']:.2f} "
        f"{report.record.vetting} {[m.destination for m in report.record.planned]}",
        flush=True,
    )


def main() -> None:
    """Read the options, run, print."""
    parser = argparse.ArgumentParser(description="The closed loop in one process.")
    parser.add_argument("--seeds", type=int, default=5)
    parser.add_argument("--first", type=int, default=1)
    parser.add_argument("--hours", type=float, default=4.0)
    parser.add_argument("--crew", default="follows")
    parser.add_argument("--set", action="append", default=[], dest="changes")
    parser.add_argument("-v", "--verbose", action="store_true")
    options = parser.parse_args()
    structlog.configure(
        wrapper_class=structlog.make_filtering_bound_logger(logging.WARNING),
    )
    for seed in range(options.first, options.first + options.seeds):
        line = asyncio.run(run(seed, options.hours, options.crew, options.changes, options.verbose))
        print(line, flush=True)


if __name__ == "__main__":
    main()
