"""What is written down of a cycle: the decision record, entries, and one log line."""

from __future__ import annotations

from typing import Any, assert_never

from edgectl.cycle.positions import Validated
from edgectl.cycle.state import Decision, LoopState
from edgectl.records.advice import Advice
from edgectl.records.cycle_record import (
    ClosingRecord,
    DecisionRecord,
    DeliveryRecord,
    EventRecord,
    LoopLag,
    OpeningRecord,
    PhaseTimings,
    Provenance,
    WithdrawalRecord,
)
from edgectl.records.encoding import to_json
from edgectl.records.entries import Entry, EntryKind
from edgectl.records.plan import (
    BadInputs,
    NoData,
    NoPlan,
    Outcome,
    Overrun,
    Plan,
    SolverWarming,
    WorkerLost,
)
from edgectl.records.readings import TagSnapshot
from edgectl.runtime.schedule import Tick

Record = (
    ClosingRecord | DecisionRecord | DeliveryRecord | EventRecord | OpeningRecord | WithdrawalRecord
)


def entry(kind: EntryKind, cycle: int | None, at: float, record: Record) -> Entry:
    """One row to be, from its record."""
    body = to_json(record)
    assert isinstance(body, dict)
    return Entry(kind, cycle, at, body)


def decision_record(
    tick: Tick,
    snapshot: TagSnapshot | None,
    state: LoopState,
    validated: Validated | None,
    outcome: Outcome,
    decision: Decision,
    budget_s: float,
    timings: PhaseTimings,
    lag: LoopLag,
    provenance: Provenance,
) -> DecisionRecord:
    """Everything one cycle saw, thought and decided."""
    word, detail = told(outcome)
    plan = outcome if isinstance(outcome, Plan) else None
    asked = outcome if isinstance(outcome, Plan | NoPlan) else None
    measurements = None if validated is None else validated.measurements
    vetting = decision.vetting
    costs = (None, None) if vetting is None else (vetting.cost_with, vetting.cost_without)
    return DecisionRecord(
        cycle=tick.cycle,
        made_at=tick.now,
        skipped_cycles=tick.skipped,
        readings=() if snapshot is None else snapshot.readings,
        source_problem=outcome.why if isinstance(outcome, NoData) else None,
        measurements={} if measurements is None else measurements.values,
        positions={} if measurements is None else measurements.positions,
        limits=() if validated is None else validated.limits,
        memory_in=state.memory,
        outcome=word,
        outcome_detail=detail,
        estimate=None if asked is None else asked.estimate,
        times_min=() if plan is None else plan.times_min,
        planned=() if plan is None else plan.moves,
        predictions=() if plan is None else plan.predictions,
        cost_with=None if plan is None else plan.cost_with,
        cost_without=None if plan is None else plan.cost_without,
        gives_way=() if plan is None else plan.gives_way,
        vetting=() if vetting is None else vetting.findings,
        follow_ups=decision.follow_ups,
        advice=decision.advice,
        statistics=None if asked is None else asked.statistics,
        budget_ms=round(1e3 * budget_s, 3),
        timings=timings,
        loop_lag=lag,
        provenance=provenance,
        memory_at=state.memory_at,
        recomputed_cost_with=None if costs[0] is None else costs[0].total,
        recomputed_cost_without=None if costs[1] is None else costs[1].total,
    )


def told(outcome: Outcome) -> tuple[str, str]:
    """The outcome's word and detail as the journal keeps them."""
    match outcome:
        case Plan():
            return "plan", outcome.statistics.status
        case NoPlan():
            return "no_plan", f"{outcome.reason}: {outcome.sentence}"
        case Overrun():
            killed = "worker killed" if outcome.killed else "worker not killed"
            return "overrun", f"not within {outcome.budget_s:.3f} s, {killed}"
        case WorkerLost():
            return "worker_lost", outcome.why
        case SolverWarming():
            return "solver_warming", outcome.why
        case BadInputs():
            return "bad_inputs", ", ".join(outcome.tags)
        case NoData():
            return "no_data", outcome.why
        case _:
            assert_never(outcome)


def log_fields(record: DecisionRecord, advice: Advice, delivered: DeliveryRecord) -> dict[str, Any]:
    """The one line that a cycle logs."""
    return {
        "cycle": record.cycle,
        "plant_time": round(record.made_at, 3),
        "standing": advice.standing.value,
        "reason": advice.reason,
        "valid": delivered.delivery.valid,
        "outcome": record.outcome,
        "vetting": list(record.vetting),
        "targets": {move.mv: move.target for move in advice.moves},
        "changed": [move.mv for move in advice.moves if move.changed],
        "skipped_cycles": record.skipped_cycles,
        "late_ms": record.timings.late_ms,
        "read_ms": record.timings.read_ms,
        "solve_ms": record.timings.solve_ms,
        "budget_ms": record.budget_ms,
        "decide_ms": record.timings.decide_ms,
        "journal_ms": delivered.journal_ms,
        "publish_ms": delivered.publish_ms,
        "lag_max_ms": record.loop_lag.max_ms,
        "decision_seq": delivered.decision_seq,
        "published": delivered.delivery.complete,
    }
