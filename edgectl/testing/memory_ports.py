"""The loop's edges in memory. They insist on what the real ones may take for granted."""

from __future__ import annotations

import asyncio
import math
from dataclasses import dataclass, field, replace
from typing import Any, Final

from edgectl.cycle.policies import Policies
from edgectl.ports import (
    Clock,
    NotJournalledError,
    PlantMismatchError,
    PlantUnreachableError,
)
from edgectl.records.advice import Advice, Delivery, ItemStatus
from edgectl.records.encoding import canonical
from edgectl.records.entries import Entry, EntryKind, Receipt
from edgectl.records.plan import (
    NoPlan,
    Overrun,
    Plan,
    PlanRequest,
    SolveOutcome,
    SolverWarming,
    WorkerLost,
)
from edgectl.records.readings import Reading, TagSnapshot
from edgectl.testing.faults import (
    JOURNAL_FAULTS,
    READ_FAULTS,
    SINK_FAULTS,
    SOLVER_FAULTS,
    TAG_FAULTS,
    Script,
    spoiled,
)
from edgectl.testing.toy import ToyPlanner, ToyPlant

BAD_NOT_WRITABLE: Final = 0x803B0000
READ_S: Final = 0.01
SOLVE_S: Final = 0.4
WRITE_S: Final = 0.02
FSYNC_S: Final = 0.005


@dataclass(slots=True)
class MemorySource:
    """Reads the toy plant through the script."""

    plant: ToyPlant
    policies: Policies
    clock: Clock
    script: Script
    read_cycles: set[int] = field(default_factory=set)
    """Cycles whose read succeeded."""
    _last: dict[str, Reading] = field(default_factory=dict)

    async def read(self, cycle: int, timeout_s: float) -> TagSnapshot:
        kind = self.script.first(cycle, READ_FAULTS)
        await asyncio.sleep(timeout_s if kind == "slow_read" else READ_S)
        if kind == "not_as_described":
            raise PlantMismatchError("TI-2107 has another unit")
        if kind is not None:
            raise PlantUnreachableError(f"scripted: {kind}")
        now = self.clock.plant_time()
        self.plant.advance(now)
        readings = []
        for tag in self.policies.tags:
            reading: Reading | None = self.plant.reading(tag)
            for fault in self.script.active(cycle, TAG_FAULTS):
                if fault.subject == tag and reading is not None:
                    reading = spoiled(reading, fault.kind, self._last.get(tag))
            if reading is not None:
                readings.append(reading)
                self._last[tag] = reading
        self.read_cycles.add(cycle)
        return TagSnapshot(cycle, now, tuple(readings))


@dataclass(slots=True)
class MemorySolver:
    """The toy planner, its answers spoiled by the script."""

    planner: ToyPlanner
    policies: Policies
    clock: Clock
    script: Script
    asked: list[PlanRequest] = field(default_factory=list)

    async def solve(self, request: PlanRequest, deadline: float) -> SolveOutcome:
        self.asked.append(request)
        kind = self.script.first(request.cycle, SOLVER_FAULTS)
        left_s = deadline - self.clock.wall()
        if kind == "overrun":
            await asyncio.sleep(left_s)
            return Overrun(left_s, killed=True)
        await asyncio.sleep(min(SOLVE_S, left_s / 2.0))
        if kind == "lost":
            return WorkerLost("scripted: killed by signal 9")
        if kind == "warming":
            return SolverWarming("scripted: no worker is ready")
        plan = self.planner.answer(request)
        if kind == "no_plan":
            return NoPlan(request.request_id, "infeasible", "scripted", None, plan.estimate)
        if kind == "no_estimate":
            return NoPlan(request.request_id, "no_estimate", "scripted", None, None)
        return plan if kind is None else self._spoiled(plan, kind)

    def _spoiled(self, plan: Plan, kind: str) -> Plan:
        move, *others = plan.moves
        policy = self.policies.moves[move.mv]
        match kind:
            case "nan_move":
                return replace(plan, moves=(replace(move, first=math.nan), *others))
            case "outside_limits":
                return replace(plan, moves=(replace(move, first=1e6), *others))
            case "too_far":
                far = move.position - 10.0 * policy.max_move
                return replace(plan, moves=(replace(move, first=far), *others))
            case "nan_prediction":
                first, *rest = plan.predictions
                path = (math.nan, *first.with_moves[1:])
                return replace(plan, predictions=(replace(first, with_moves=path), *rest))
            case "wrong_id":
                return replace(plan, request_id="cycle-0")
            case "false_cost":
                return replace(plan, cost_with=plan.cost_with - 5.0)
            case "infinite_memory":
                memory = {"model": (math.inf, 0.0), "bias": (0.0, 0.0)}
                return replace(plan, estimate=replace(plan.estimate, memory=memory))
            case "mismatch":
                warned = replace(plan.estimate, warnings=("model_mismatch",))
                return replace(plan, estimate=warned)
            case "worse_than_nothing":
                worse = tuple(
                    replace(p, with_moves=tuple(1.6 * v for v in p.with_moves))
                    for p in plan.predictions
                )
                return replace(plan, predictions=worse)
        raise ValueError(f"unknown fault of the solver: {kind!r}")


@dataclass(frozen=True, slots=True)
class Row:
    """One durable entry."""

    seq: int
    entry: Entry
    durable_wall: float


@dataclass(slots=True)
class MemoryJournal:
    """Keeps entries in order; what comes too late is kept all the same."""

    clock: Clock
    script: Script
    rows: list[Row] = field(default_factory=list)
    durable_cycles: set[int] = field(default_factory=set)
    """Cycles whose decision is on record."""
    cycle: int = 0
    """Of the newest decision asked for: the script speaks of cycles."""

    async def append(self, entry: Entry, timeout_s: float) -> Receipt:
        assert timeout_s > 0.0, "the caller gives a budget"
        text = canonical(dict(entry.body))
        if entry.kind is EntryKind.DECISION:
            assert entry.cycle is not None
            self.cycle = entry.cycle
        kind = self.script.first(self.cycle, JOURNAL_FAULTS)
        if kind == "failing_journal":
            await asyncio.sleep(min(FSYNC_S, timeout_s))
            raise NotJournalledError("scripted: no space left on the device")
        if kind == "slow_journal":
            await asyncio.sleep(timeout_s)
            self._keep(entry)
            raise NotJournalledError("scripted: not on the disk in time")
        await asyncio.sleep(min(FSYNC_S, timeout_s))
        row = self._keep(entry)
        return Receipt(row.seq, f"{row.seq:064x}", len(text), 1e3 * FSYNC_S)

    def _keep(self, entry: Entry) -> Row:
        row = Row(len(self.rows) + 1, entry, self.clock.wall())
        self.rows.append(row)
        if entry.kind is EntryKind.DECISION and entry.cycle is not None:
            self.durable_cycles.add(entry.cycle)
        return row

    def bodies(self, kind: EntryKind) -> list[dict[str, Any]]:
        return [dict(row.entry.body) for row in self.rows if row.entry.kind is kind]


@dataclass(frozen=True, slots=True)
class Published:
    """One publishing or withdrawal as the plant's server saw it."""

    wall: float
    plant_time: float
    advice: Advice | None
    """None for a withdrawal."""
    heartbeat: int | None
    delivery: Delivery
    positions: dict[str, float]
    """The plant's setpoints at that instant."""


@dataclass(slots=True)
class MemorySink:
    """The advisory nodes. Refuses, by assertion, what must never reach them."""

    clock: Clock
    script: Script
    journal: MemoryJournal
    plant: ToyPlant
    nodes: dict[str, Any] = field(default_factory=dict)
    log: list[Published] = field(default_factory=list)

    async def publish(self, advice: Advice, heartbeat: int, timeout_s: float) -> Delivery:
        self._insist(advice)
        kind = self.script.first(advice.cycle, SINK_FAULTS)
        delivery = Delivery(advice.cycle, advice.valid, True, (), None)
        if kind == "refused_publish":
            await asyncio.sleep(WRITE_S)
            refused = (ItemStatus("valid", BAD_NOT_WRITABLE),)
            delivery = Delivery(advice.cycle, False, False, refused, "the server refused valid")
            self.nodes["valid"] = False
        elif kind is not None:
            await asyncio.sleep(timeout_s if kind == "slow_publish" else WRITE_S)
            self.nodes["valid"] = False
            self._write_values(advice)
            delivery = Delivery(advice.cycle, False, False, (), f"scripted: {kind}")
        else:
            await asyncio.sleep(min(WRITE_S, timeout_s))
            self._write_values(advice)
            self.nodes |= {
                "valid_until": advice.valid_until,
                "cycle": advice.cycle,
                "heartbeat": heartbeat,
                "valid": advice.valid,
            }
        self._note(advice, heartbeat, delivery)
        return delivery

    async def withdraw(self, reason: str, sentence: str, timeout_s: float) -> Delivery:
        await asyncio.sleep(min(WRITE_S, timeout_s))
        self.nodes |= {"valid": False, "reason": reason, "sentence": sentence}
        delivery = Delivery(int(self.nodes.get("cycle", 0)), False, True, (), None)
        self._note(None, None, delivery)
        return delivery

    def _insist(self, advice: Advice) -> None:
        numbers = [advice.valid_until, *(m.target for m in advice.moves)]
        assert all(n is None or math.isfinite(n) for n in numbers), f"not finite: {advice}"
        if advice.valid:
            assert advice.cycle in self.journal.durable_cycles, (
                "valid advice is published after its record is durable"
            )

    def _write_values(self, advice: Advice) -> None:
        for move in advice.moves:
            if move.target is not None:
                self.nodes[f"{move.mv}.target"] = move.target
            self.nodes[f"{move.mv}.reason"] = move.reason
        self.nodes |= {
            "standing": advice.standing.value,
            "reason": advice.reason,
            "sentence": advice.sentence,
            "made_at": advice.made_at,
        }

    def _note(self, advice: Advice | None, heartbeat: int | None, delivery: Delivery) -> None:
        self.log.append(
            Published(
                self.clock.wall(),
                self.clock.plant_time(),
                advice,
                heartbeat,
                delivery,
                dict(self.plant.setpoints),
            )
        )
