"""What one cycle tells the people: state, measurements and outcome give state and advice.

What the standings mean for the values at the advisory nodes:

- `advising`: valid. Each target is supported by this cycle's vetted plan; unchanged
  ones keep `made_at`, and `confirmed_cycle` moves on. An MV that nobody is asked to
  move has its present position as target, reason `no_change`, so that no number of
  an earlier run or an earlier hour ever stands there as if it were meant.
- `holding`: the same values as last decided, not valid, with reason and count.
- `silent`: the same values, not valid, nothing suggested.
- `starting`: no advice yet. Targets are None until the first advice.

Coming back from silence forgets what was suggested before it: each plan starts
from where the plant's MVs are.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Final, assert_never

from edgectl.cycle import sentences
from edgectl.cycle.conditions import conditions_of
from edgectl.cycle.pace import PaceState, outside_reach
from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import Validated
from edgectl.cycle.standing import Event, StandingState, after, good_cycle, poor_cycle
from edgectl.cycle.state import Decision, LoopState
from edgectl.cycle.suggest import Suggested, suggest
from edgectl.cycle.suggestion import follow_ups, followed
from edgectl.cycle.vetting import Vetting, vet_plan
from edgectl.records.advice import Advice, Standing, SuggestedMove
from edgectl.records.measurements import Measurements, Verdict
from edgectl.records.plan import (
    EMPTY_MEMORY,
    BadInputs,
    Memory,
    NoData,
    NoPlan,
    Outcome,
    Overrun,
    Plan,
    PlanRequest,
    SolverWarming,
    WorkerLost,
)

GIVEN_UP_AFTER: Final = 5
"""Answers in a row without an estimate, after which the memory is given up."""

LARGEST_MEMORY: Final = 20_000
"""Numbers; it is journalled every cycle."""

_WARNINGS: Final = {
    "model_mismatch": "the model does not follow the plant's temperatures",
    "bias_at_clip": "an analyser and the model differ by more than is believed",
}


@dataclass(frozen=True, slots=True)
class _Judged:
    """Whether a cycle has something to advise from, and why not."""

    plan: Plan | None
    reason: str
    why: str
    vetting: Vetting | None = None
    forbids: bool = False


def decide(
    state: LoopState,
    validated: Validated | None,
    request: PlanRequest | None,
    outcome: Outcome,
    cycle: int,
    now: float,
    policies: Policies,
) -> Decision:
    """One cycle's decision.

    Parameters
    ----------
    state : LoopState
        As the cycle before left it, its memory already checked by `before_asking`.
    validated : Validated or None
        None when the plant could not be read.
    request : PlanRequest or None
        What the worker was asked; None when it was not.
    outcome : Outcome
        What became of it.
    """
    judged = _judge(outcome, request, validated, policies)
    measurements = None if validated is None else validated.measurements
    if measurements is not None and not measurements.advice_wanted:
        off = "the operator's switch for advice is off"
        judged = replace(judged, plan=None, reason="operator_off", why=off, forbids=True)
    state = _remembering(state, validated, request, outcome, judged.vetting, now, policies)
    begun_with = state.pace.suggestions
    suggested, judged = _suggested(state, judged, request, measurements, now, policies)
    if suggested is not None and measurements is not None:
        standing = good_cycle(state.standing, policies.cycle.warm_up_cycles)
        state = replace(state, standing=standing, pace=suggested.pace)
        advice = _advising(state, suggested, measurements, judged.plan, cycle, now, policies)
    else:
        state = replace(state, standing=_standing_without(state.standing, judged, policies))
        told = () if measurements is None else sentences.notices(measurements, None, policies)
        advice = _not_advising(state, judged.reason, judged.why, told, cycle, now, policies)
    positions = {} if measurements is None else measurements.positions
    return Decision(
        state=replace(state, advice=advice),
        advice=advice,
        vetting=judged.vetting,
        follow_ups=follow_ups(begun_with, state.pace.suggestions, positions),
        conditions=conditions_of(measurements, outcome, judged.reason, judged.why, policies),
    )


def before_asking(state: LoopState, now: float, policies: Policies) -> LoopState:
    """The state a request may be made from: a memory too old or unusable is given up.

    A cold start is followed by a warm-up, as after a start of the runtime.
    """
    if not state.memory:
        return state
    age_s = 0.0 if state.memory_at is None else now - state.memory_at
    if 0.0 <= age_s <= policies.cycle.restore_max_age_s and state.unanswered < GIVEN_UP_AFTER:
        return state
    return replace(
        state,
        memory=EMPTY_MEMORY,
        memory_at=None,
        unanswered=0,
        standing=after(state.standing, Event.BEGUN_ANEW),
    )


def held_instead(
    before: LoopState, decision: Decision, reason: str, why: str, now: float, policies: Policies
) -> tuple[LoopState, Advice]:
    """The hold that takes the place of a decision which could not be recorded or published.

    What was learned stays; what was suggested did not happen.
    """
    standing = poor_cycle(before.standing, policies.cycle.hold_limit)
    state = replace(decision.state, standing=standing, pace=before.pace, advice=before.advice)
    advice = decision.advice
    held = _not_advising(state, reason, why, advice.notices, advice.cycle, now, policies)
    return replace(state, advice=held), held


# -- judging ----------------------------------------------------------------------------


def _judge(
    outcome: Outcome,
    request: PlanRequest | None,
    validated: Validated | None,
    policies: Policies,
) -> _Judged:
    match outcome:
        case Plan():
            assert request is not None
            assert validated is not None
            return _judged_plan(outcome, request, validated, policies)
        case NoPlan():
            return _Judged(None, "no_plan", f"there is no plan: {outcome.sentence}")
        case Overrun():
            why = f"the plan was not ready within {outcome.budget_s:.1f} s"
            return _Judged(None, "over_budget", why)
        case WorkerLost():
            return _Judged(None, "worker_lost", f"the solver was lost: {outcome.why}")
        case SolverWarming():
            return _Judged(None, "solver_warming", f"the solver is not ready yet: {outcome.why}")
        case BadInputs():
            assert validated is not None
            measurements = validated.measurements
            return _Judged(
                None,
                _input_reason(measurements),
                sentences.missing_words(measurements, policies),
            )
        case NoData():
            if outcome.mismatch:
                why = f"the plant is not as the site file says: {outcome.why}"
                return _Judged(None, "plant_mismatch", why, forbids=True)
            return _Judged(None, "plant_unreachable", f"the plant cannot be read: {outcome.why}")
        case _:
            assert_never(outcome)


def _judged_plan(
    plan: Plan, request: PlanRequest, validated: Validated, policies: Policies
) -> _Judged:
    vetting = vet_plan(plan, request, policies)
    if not vetting.passed:
        return _Judged(
            None, "failed_vetting", f"the plan was refused: {vetting.findings[0]}", vetting
        )
    for word in plan.estimate.warnings:
        if word in _WARNINGS:
            return _Judged(None, word, _WARNINGS[word], vetting)
    positions = validated.measurements.positions
    if (outside := outside_reach(positions, policies)) is not None:
        at = positions[outside]
        unit = policies.moves[outside].unit
        why = (
            f"{outside} stands at {sentences.amount(at.position or 0.0, unit)}, outside"
            f" {sentences.amount(at.low, '')} to {sentences.amount(at.high, unit)}"
        )
        return _Judged(None, "outside_limits", why, vetting)
    return _Judged(plan, "", "", vetting)


def _input_reason(measurements: Measurements) -> str:
    verdicts = {measurements.values[tag].verdict for tag in measurements.missing_required}
    return "input_stale" if verdicts == {Verdict.INPUT_STALE} else "input_bad"


# -- state ------------------------------------------------------------------------------


def _remembering(
    state: LoopState,
    validated: Validated | None,
    request: PlanRequest | None,
    outcome: Outcome,
    vetting: Vetting | None,
    now: float,
    policies: Policies,
) -> LoopState:
    """The state with what this cycle saw and learned, before anything is suggested."""
    if validated is not None:
        positions = validated.measurements.positions
        suggestions = {
            mv: followed(found, positions[mv], now, policies.moves[mv], policies.advice)
            for mv, found in state.pace.suggestions.items()
        }
        pace = replace(state.pace, suggestions=suggestions)
        state = replace(state, seen=validated.seen, pace=pace)
    if request is not None and isinstance(outcome, Plan | NoPlan):
        memory = _memory_of(outcome, request, vetting)
        if memory is None:
            return replace(state, unanswered=state.unanswered + 1)
        state = replace(state, memory=memory, memory_at=now, unanswered=0)
    return state


def _memory_of(
    outcome: Plan | NoPlan, request: PlanRequest, vetting: Vetting | None
) -> Memory | None:
    """The estimator's memory, unless the answer is not even one to this question."""
    misshapen = vetting is not None and vetting.cost_with is None
    if outcome.request_id != request.request_id or misshapen or outcome.estimate is None:
        return None
    rows = outcome.estimate.memory.values()
    # NaN may mean "none yet" to the estimator; an infinity means that something ran away.
    ran_away = any(math.isinf(number) for row in rows for number in row)
    too_large = sum(len(row) for row in rows) > LARGEST_MEMORY
    return None if ran_away or too_large else outcome.estimate.memory


def _standing_without(
    standing: StandingState, judged: _Judged, policies: Policies
) -> StandingState:
    if judged.forbids:
        return after(standing, Event.FORBIDDEN)
    if judged.plan is not None:
        return good_cycle(standing, policies.cycle.warm_up_cycles)
    return poor_cycle(standing, policies.cycle.hold_limit)


def _suggested(
    state: LoopState,
    judged: _Judged,
    request: PlanRequest | None,
    measurements: Measurements | None,
    now: float,
    policies: Policies,
) -> tuple[Suggested | None, _Judged]:
    """What would stand at the board, vetted; None during the warm-up and without a plan."""
    warming = state.standing.good_cycles < policies.cycle.warm_up_cycles
    if judged.plan is None or judged.vetting is None or warming:
        return None, judged
    assert request is not None
    assert measurements is not None
    found = suggest(
        _pace_to_go_on_from(state),
        judged.plan,
        judged.vetting,
        request,
        measurements.positions,
        now,
        policies,
    )
    if not found.findings:
        return found, judged
    why = f"what would have been suggested was refused: {found.findings[0]}"
    vetting = replace(judged.vetting, findings=found.findings)
    return None, _Judged(None, "failed_vetting", why, vetting)


def _pace_to_go_on_from(state: LoopState) -> PaceState:
    """After silence or a start nothing of what was suggested before it stands."""
    if state.standing.standing in (Standing.ADVISING, Standing.HOLDING):
        return state.pace
    return replace(state.pace, suggestions={})


# -- what is said -----------------------------------------------------------------------


def _advising(
    state: LoopState,
    suggested: Suggested,
    measurements: Measurements,
    plan: Plan | None,
    cycle: int,
    now: float,
    policies: Policies,
) -> Advice:
    asked = [s.made_at for s in suggested.pace.suggestions.values() if s.asks]
    return Advice(
        cycle=cycle,
        standing=state.standing.standing,
        reason=suggested.reason,
        sentence=suggested.sentence,
        valid=True,
        valid_until=now + policies.cycle.validity_s,
        made_at=max(asked, default=None),
        confirmed_cycle=cycle,
        moves=suggested.moves,
        notices=sentences.notices(measurements, plan, policies),
    )


def _not_advising(
    state: LoopState,
    reason: str,
    why: str,
    notices: tuple[str, ...],
    cycle: int,
    now: float,
    policies: Policies,
) -> Advice:
    """The same values as before, not valid."""
    standing, last = state.standing, state.advice
    nothing_yet = "Nothing was suggested yet."
    if last is None:
        moves = tuple(
            SuggestedMove(mv, None, False, None, "starting", nothing_yet) for mv in policies.moves
        )
    else:
        moves = tuple(replace(move, changed=False) for move in last.moves)
    reason = reason or "warm_up"
    why = why or "the first cycles only watch"
    words = {
        Standing.STARTING: f"Starting, {standing.good_cycles} of"
        f" {policies.cycle.warm_up_cycles} good cycles: {why}.",
        Standing.HOLDING: f"Last move held, cycle {standing.holds} of"
        f" {policies.cycle.hold_limit}: {why}.",
        Standing.SILENT: f"Advice withdrawn: {why}.",
    }
    return Advice(
        cycle=cycle,
        standing=standing.standing,
        reason=reason,
        sentence=words[standing.standing],
        valid=False,
        valid_until=now,
        made_at=None if last is None else last.made_at,
        confirmed_cycle=None if last is None else last.confirmed_cycle,
        moves=moves,
        notices=notices,
    )
