"""The production loop on virtual time: plant, crew, faults, restarts. Same seed, same journal."""

from __future__ import annotations

import asyncio
import contextlib
import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Final

from edgectl.cycle.policies import Policies
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    OpeningRecord,
    Provenance,
)
from edgectl.records.encoding import from_json
from edgectl.records.entries import EntryKind
from edgectl.runtime.lag import LagProbe
from edgectl.runtime.loop import CycleReport, Ports
from edgectl.runtime.restore import restored
from edgectl.runtime.supervise import Runtime
from edgectl.testing.faults import PLANT_FAULTS, RESTART, Fault, Script
from edgectl.testing.memory_ports import MemoryJournal, MemorySink, MemorySolver, MemorySource
from edgectl.testing.toy import ToyPlanner, ToyPlant
from edgectl.testing.virtual_time import VirtualClock, run_virtual

WHO: Final = Provenance("test", "0" * 64, "1" * 64, insecure=True)
ASKS: Final = ("economics", "limit_reached", "setpoint", "only_together")
CREW_DELAY_S: Final = 60.0


@dataclass(slots=True)
class Crew:
    """Looks at the board once a cycle, and acts on what is valid."""

    plant: ToyPlant
    mode: str
    """`follows`, `ignores`, `opposes` or `part`."""
    actions: list[tuple[float, str, float]] = field(default_factory=list)
    _seen: tuple[float | None, float] | None = None

    def look(self, now: float, sink: MemorySink) -> None:
        made_at = sink.nodes.get("made_at")
        usable = sink.nodes.get("valid") and now <= sink.nodes["valid_until"]
        if self.mode == "ignores" or not usable or made_at is None:
            return
        if self._seen is None or self._seen[0] != made_at:
            self._seen = (made_at, now)
        if now - self._seen[1] < CREW_DELAY_S:
            return
        share = {"follows": 1.0, "opposes": -1.0, "part": 0.5}[self.mode]
        for mv, here in self.plant.setpoints.items():
            target = sink.nodes.get(f"{mv}.target")
            if target is None or sink.nodes[f"{mv}.reason"] not in ASKS or target == here:
                continue
            self.plant.setpoints[mv] = here + share * (target - here)
            self.actions.append((now, mv, self.plant.setpoints[mv]))
        if share != 1.0:
            self._seen = (made_at, float("inf"))


@dataclass(slots=True, repr=False)
class Played:
    """What is left of a story: everything the oracle and the tests look at."""

    policies: Policies
    script: Script
    journal: MemoryJournal
    sink: MemorySink
    source: MemorySource
    solver: MemorySolver
    plant: ToyPlant
    crew: Crew
    reports: list[CycleReport] = field(default_factory=list)
    starts: list[int] = field(default_factory=list)
    """First cycle of each start of the runtime."""
    begun_with: list[int] = field(default_factory=list)
    """Length of `reports` at each start. Cycles that never got on record may be run again."""

    rows_at_start: list[int] = field(default_factory=list)
    """Length of the journal at each start."""

    @property
    def runs(self) -> list[list[CycleReport]]:
        """The reports of each start."""
        ends = [*self.begun_with[1:], len(self.reports)]
        return [self.reports[a:b] for a, b in zip(self.begun_with, ends, strict=True)]

    @property
    def decisions(self) -> list[DecisionRecord]:
        return [from_json(DecisionRecord, body) for body in self.journal.bodies(EntryKind.DECISION)]

    @property
    def deliveries(self) -> list[DeliveryRecord]:
        return [from_json(DeliveryRecord, body) for body in self.journal.bodies(EntryKind.DELIVERY)]

    @property
    def events(self) -> list[EventRecord]:
        return [from_json(EventRecord, body) for body in self.journal.bodies(EntryKind.EVENT)]

    def report(self, cycle: int) -> CycleReport:
        return next(report for report in self.reports if report.record.cycle == cycle)


def play(
    policies: Policies,
    cycles: int,
    faults: Sequence[Fault] = (),
    *,
    seed: int = 1,
    crew: str = "follows",
    speed: float = 1.0,
    prepare: Callable[[ToyPlant], None] | None = None,
    each_cycle: Callable[[int, ToyPlant], None] | None = None,
) -> Played:
    """Play so many cycles.

    Parameters
    ----------
    prepare : callable or None
        Changes the plant before the start.
    each_cycle : callable or None
        Called after each cycle with its number and the plant.
    """
    return run_virtual(_play(policies, cycles, faults, seed, crew, speed, prepare, each_cycle))


async def _play(
    policies: Policies,
    cycles: int,
    faults: Sequence[Fault],
    seed: int,
    crew: str,
    speed: float,
    prepare: Callable[[ToyPlant], None] | None,
    each_cycle: Callable[[int, ToyPlant], None] | None,
) -> Played:
    clock, script = VirtualClock(speed=speed), Script(faults)
    plant = ToyPlant(policies, clock.plant_time(), seed)
    if prepare is not None:
        prepare(plant)
    journal = MemoryJournal(clock, script)
    sink = MemorySink(clock, script, journal, plant)
    source = MemorySource(plant, policies, clock, script)
    solver = MemorySolver(ToyPlanner(policies), policies, clock, script)
    played = Played(policies, script, journal, sink, source, solver, plant, Crew(plant, crew))
    ports = Ports(source, sink, journal, solver, clock)
    kills = sorted(f.begin for f in script.faults if f.kind == RESTART and f.begin < cycles)
    reached = {cycle: asyncio.Event() for cycle in kills}

    def watch(report: CycleReport) -> None:
        played.reports.append(report)
        cycle = report.record.cycle
        _set_plant(plant, script, cycle + 1)
        played.crew.look(clock.plant_time(), sink)
        if each_cycle is not None:
            each_cycle(cycle, plant)
        if cycle in reached:
            reached[cycle].set()

    _set_plant(plant, script, 1)
    kill_after_s = random.Random(seed)
    for kill in kills:
        runtime = _runtime(played, ports, clock, watch)
        # Somewhere between the end of this cycle and the end of the next one.
        later_s = kill_after_s.uniform(0.0, 1.2) * policies.cycle.period_s / speed
        await _run_until_killed(runtime, reached[kill], later_s, played)
    runtime = _runtime(played, ports, clock, watch)
    await runtime.run(max(1, cycles - played.starts[-1] + 1))
    return played


def _runtime(
    played: Played, ports: Ports, clock: VirtualClock, watch: Callable[[CycleReport], None]
) -> Runtime:
    """As a start of the process makes it: from the newest decision in the journal."""
    policies = played.policies
    newest = [row for row in played.journal.rows if row.entry.kind is EntryKind.DECISION][-1:]
    body, seq = (newest[0].entry.body, newest[0].seq) if newest else (None, None)
    begin = restored(body, seq, WHO.model_hash, clock.plant_time(), policies)
    played.starts.append(begin.first_cycle)
    played.begun_with.append(len(played.reports))
    played.rows_at_start.append(len(played.journal.rows))
    opening = OpeningRecord(
        WHO, "toy", "toy", begin.from_seq, begin.words, clock.speed,
        policies.cycle.period_s, policies.cycle.budget_s,
    )  # fmt: skip
    # An hour between samples: on virtual time there is no lag to find.
    return Runtime(ports, policies, opening, begin, (watch,), LagProbe(clock, 3600.0))


async def _run_until_killed(
    runtime: Runtime, reached: asyncio.Event, later_s: float, played: Played
) -> None:
    """As by SIGKILL: nothing is withdrawn, nothing more is written down."""
    # Kept in this frame and awaited below.
    running = asyncio.create_task(runtime.run(), name="runtime to be killed")  # noqa: TID251
    await reached.wait()
    await asyncio.sleep(later_s)
    rows, log, nodes = len(played.journal.rows), len(played.sink.log), dict(played.sink.nodes)
    running.cancel()
    with contextlib.suppress(asyncio.CancelledError):
        await running
    # The orderly end that a cancelled runtime makes did not happen.
    del played.journal.rows[rows:]
    del played.sink.log[log:]
    played.sink.nodes.clear()
    played.sink.nodes |= nodes


def _set_plant(plant: ToyPlant, script: Script, cycle: int) -> None:
    active = {(f.kind, f.subject) for f in script.active(cycle, PLANT_FAULTS)}
    plant.switch = 0.0 if any(kind == "switch_off" for kind, _ in active) else 1.0
    for mv, automatic in (("FIC-2103", 2.0), ("TIC-2107", 1.0)):
        plant.modes[mv] = 0.0 if ("manual", mv) in active else automatic
        plant.outputs[mv] = 100.0 if ("valve_end", mv) in active else 57.0
