"""One cycle, top to bottom. Open this file first.

read -> validate -> estimate + plan -> vet and decide -> journal -> publish.

Expected failures of the edges become outcomes, conditions and holds. Bugs are
not caught here: the supervisor stops, the service starts anew, and the plant
stays on its last move.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from typing import Final

import structlog

from edgectl.cycle.decide import before_asking, decide, held_instead
from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import Validated, validate
from edgectl.cycle.state import Condition, Decision, LoopState
from edgectl.ports import (
    AdviceSink,
    Clock,
    CycleJournal,
    NotJournalledError,
    PlanSolver,
    PlantMismatchError,
    PlantUnreachableError,
    TagSource,
)
from edgectl.records.advice import Advice, Delivery
from edgectl.records.cycle_record import (
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    PhaseTimings,
    Provenance,
    WithdrawalRecord,
)
from edgectl.records.entries import EntryKind, Receipt
from edgectl.records.plan import BadInputs, NoData, Outcome, PlanRequest
from edgectl.records.readings import TagSnapshot
from edgectl.runtime.bookkeeping import decision_record, entry, log_fields
from edgectl.runtime.events import EventBook
from edgectl.runtime.lag import LagProbe
from edgectl.runtime.schedule import SOFT_SHARE, Deadlines, Tick

MOST_WAITING_EVENTS: Final = 64
HEARTBEAT_MODULUS: Final = 2**31


@dataclass(frozen=True, slots=True)
class Ports:
    """The edges. Without a sink nothing is published: cycles are planned and journalled."""

    source: TagSource
    sink: AdviceSink | None
    journal: CycleJournal
    solver: PlanSolver
    clock: Clock


@dataclass(frozen=True, slots=True)
class CycleReport:
    """What came of one cycle, for whoever watches."""

    record: DecisionRecord
    advice: Advice
    """As published: a hold when the decision was not durable in time."""
    delivery: Delivery
    receipt: Receipt | None
    heartbeat: int
    progressed: bool
    """Read, decided, journalled and published: the heartbeat moved."""


class Loop:
    """Runs cycles one at a time and carries their state."""

    def __init__(
        self,
        ports: Ports,
        policies: Policies,
        provenance: Provenance,
        state: LoopState,
        lag: LagProbe,
    ) -> None:
        self._ports = ports
        self._policies = policies
        self._provenance = provenance
        self._lag = lag
        self._events = EventBook()
        self._waiting: deque[EventRecord] = deque(maxlen=MOST_WAITING_EVENTS)
        self._record_bytes = 0
        self._log = structlog.get_logger("edgectl.cycle")
        self.state = state
        self.heartbeat = 0

    async def run_cycle(self, tick: Tick) -> CycleReport:
        """One cycle. Its state takes effect when it is over: a cancelled cycle never was."""
        wall, policies = self._ports.clock.wall, self._policies
        deadlines = Deadlines.of(tick, policies.cycle, self._ports.clock.speed)
        state = before_asking(self.state, tick.now, policies)

        snapshot, no_data = await self._read(tick, deadlines)
        read_at = wall()
        validated = None if snapshot is None else validate(snapshot, state.seen, policies)
        validated_at = wall()
        budget_s = deadlines.solve_timeout_s(validated_at)
        request = _request(tick, state, validated, budget_s)
        outcome = await self._ask(request, validated, no_data, validated_at + budget_s)
        solved_at = wall()
        decision = decide(state, validated, request, outcome, tick.cycle, tick.now, policies)
        decided_at = wall()

        timings = PhaseTimings(
            late_ms=_ms(tick.late_s),
            read_ms=_ms(read_at - tick.begun_wall),
            validate_ms=_ms(validated_at - read_at),
            solve_ms=_ms(solved_at - validated_at),
            decide_ms=_ms(decided_at - solved_at),
        )
        record = decision_record(
            tick, snapshot, state, validated, outcome, decision, budget_s, timings,
            self._lag.take(), self._provenance,
        )  # fmt: skip
        receipt = await self._journal(record, deadlines)
        journalled_at = wall()
        after, advice = self._what_stands(state, decision, receipt, tick)
        beat = self._next_beat(moves_on=snapshot is not None and receipt is not None)
        delivery = await self._publish(advice, beat, deadlines)
        stands = self._ports.sink is None or (delivery.valid and delivery.complete)
        if advice.valid and not stands:
            after, advice = held_instead(
                state, decision, "not_published", f"publishing failed: {delivery.problem}",
                tick.now, policies,
            )  # fmt: skip
        progressed = snapshot is not None and receipt is not None and delivery.complete
        if progressed:
            self.heartbeat = beat
        self.state = after

        conditions = (*decision.conditions, *_edge_conditions(receipt, delivery))
        delivered = DeliveryRecord(
            delivery=delivery,
            decision_seq=None if receipt is None else receipt.seq,
            journal_ms=_ms(journalled_at - decided_at),
            publish_ms=_ms(wall() - journalled_at),
            previous_record_bytes=self._record_bytes,
        )
        await self._write_down(tick, delivered, advice, conditions, deadlines)
        self._record_bytes = self._record_bytes if receipt is None else receipt.record_bytes
        self._log.info("cycle", **log_fields(record, advice, delivered))
        return CycleReport(record, advice, delivery, receipt, self.heartbeat, progressed)

    # ------------------------------------------------------------ the edges, one by one

    async def _read(
        self, tick: Tick, deadlines: Deadlines
    ) -> tuple[TagSnapshot | None, NoData | None]:
        try:
            timeout_s = deadlines.read_timeout_s(self._ports.clock.wall())
            return await self._ports.source.read(tick.cycle, timeout_s), None
        except PlantUnreachableError as error:
            return None, NoData(str(error), mismatch=False)
        except PlantMismatchError as error:
            return None, NoData(str(error), mismatch=True)

    async def _ask(
        self,
        request: PlanRequest | None,
        validated: Validated | None,
        no_data: NoData | None,
        deadline: float,
    ) -> Outcome:
        if no_data is not None:
            return no_data
        assert validated is not None
        if request is None:
            return BadInputs(validated.measurements.missing_required)
        return await self._ports.solver.solve(request, deadline)

    async def _journal(self, record: DecisionRecord, deadlines: Deadlines) -> Receipt | None:
        made = entry(EntryKind.DECISION, record.cycle, record.made_at, record)
        timeout_s = deadlines.journal_timeout_s(self._ports.clock.wall())
        try:
            return await self._ports.journal.append(made, timeout_s)
        except NotJournalledError as error:
            self._log.warning("not_journalled", cycle=record.cycle, why=str(error))
            return None

    def _what_stands(
        self, before: LoopState, decision: Decision, receipt: Receipt | None, tick: Tick
    ) -> tuple[LoopState, Advice]:
        """The decision, or a hold when it would be valid and is not on record."""
        if receipt is not None or not decision.advice.valid:
            return decision.state, decision.advice
        why = "the decision could not be recorded in time"
        return held_instead(before, decision, "not_journalled", why, tick.now, self._policies)

    def _next_beat(self, *, moves_on: bool) -> int:
        return (self.heartbeat + 1) % HEARTBEAT_MODULUS if moves_on else self.heartbeat

    async def _publish(self, advice: Advice, beat: int, deadlines: Deadlines) -> Delivery:
        if self._ports.sink is None:
            return Delivery(advice.cycle, False, True, (), "no advisory section: not published")
        timeout_s = deadlines.publish_timeout_s(self._ports.clock.wall())
        return await self._ports.sink.publish(advice, beat, timeout_s)

    async def _write_down(
        self,
        tick: Tick,
        delivered: DeliveryRecord,
        advice: Advice,
        conditions: tuple[Condition, ...],
        deadlines: Deadlines,
    ) -> None:
        """The delivery, a withdrawal if there was one, and events, chained behind the decision."""
        made: list[tuple[EntryKind, DeliveryRecord | WithdrawalRecord | EventRecord]] = [
            (EntryKind.DELIVERY, delivered)
        ]
        if advice.reason == "not_published":
            withdrawal = WithdrawalRecord(
                advice.reason, advice.sentence, delivered.delivery, advice.moves
            )
            made.append((EntryKind.WITHDRAWAL, withdrawal))
        self._waiting.extend(self._events.update(conditions))
        made += [(EntryKind.EVENT, event) for event in self._waiting]
        for kind, record in made:
            timeout_s = deadlines.entry_timeout_s(self._ports.clock.wall())
            try:
                await self._ports.journal.append(
                    entry(kind, tick.cycle, tick.now, record), timeout_s
                )
            except NotJournalledError as error:
                # Events wait for the next cycle; the rest would come too late to mean anything.
                self._log.warning("entry_lost", cycle=tick.cycle, kind=kind, why=str(error))
                return
            if kind is EntryKind.EVENT:
                self._waiting.popleft()


def _request(
    tick: Tick, state: LoopState, validated: Validated | None, budget_s: float
) -> PlanRequest | None:
    """What the worker is asked; None when what it needs is not there."""
    if validated is None or not validated.measurements.complete:
        return None
    measurements = validated.measurements
    return PlanRequest(
        request_id=f"cycle-{tick.cycle}",
        cycle=tick.cycle,
        made_at=tick.now,
        elapsed_s=0.0 if state.memory_at is None else tick.now - state.memory_at,
        soft_deadline_s=SOFT_SHARE * budget_s,
        measurements=tuple(measurements.values.values()),
        positions=tuple(measurements.positions.values()),
        limits=validated.limits,
        memory=state.memory,
    )


def _edge_conditions(receipt: Receipt | None, delivery: Delivery) -> list[Condition]:
    found = []
    if receipt is None:
        words = "Decisions are not recorded in time: advice is not valid without a record."
        found.append(Condition("not_journalled", "", "failure", words))
    if not delivery.complete:
        words = f"Advice could not be published: {delivery.problem}."
        found.append(Condition("not_published", "", "failure", words))
    return found


def _ms(seconds: float) -> float:
    return round(1e3 * seconds, 3)
