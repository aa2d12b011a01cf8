"""What one cycle tells the people, outcome by outcome."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.decide import GIVEN_UP_AFTER, before_asking, decide, held_instead
from edgectl.cycle.positions import Seen, Validated
from edgectl.cycle.standing import StandingState
from edgectl.cycle.state import Decision, LoopState
from edgectl.records.advice import Standing
from edgectl.records.plan import (
    BadInputs,
    NoData,
    NoPlan,
    Outcome,
    Overrun,
    SolverWarming,
    WorkerLost,
)
from edgectl.testing.toy import REFLUX

NOW = 1_767_592_800.0
WARM = LoopState(standing=StandingState(Standing.ADVISING, good_cycles=3))


def validated(case: Any, **changes: Any) -> Validated:
    return Validated(replace(case.measurements, **changes), case.request.limits, Seen())


def run(case: Any, state: LoopState, outcome: Outcome, **changes: Any) -> Decision:
    found = None if isinstance(outcome, NoData) else validated(case, **changes)
    request = None if isinstance(outcome, NoData | BadInputs) else case.request
    return decide(state, found, request, outcome, 1, NOW, case.policies)


def test_a_vetted_plan_is_advice(case: Any) -> None:
    decision = run(case, WARM, case.plan)
    advice = decision.advice
    assert advice.standing is Standing.ADVISING
    assert advice.valid
    assert advice.valid_until == NOW + case.policies.cycle.validity_s
    assert (advice.made_at, advice.confirmed_cycle) == (NOW, 1)
    assert any(move.changed for move in advice.moves)
    assert advice.sentence.endswith(".")
    assert decision.state.memory == case.plan.estimate.memory
    assert decision.state.memory_at == NOW


def test_unchanged_values_keep_made_at_and_confirmed_cycle_moves_on(case: Any) -> None:
    first = run(case, WARM, case.plan)
    request = replace(case.request, request_id="cycle-2", cycle=2)
    plan = replace(case.plan, request_id="cycle-2", cycle=2)
    second = decide(
        first.state, validated(case), request, plan, 2, NOW + 30.0, case.policies
    ).advice
    assert second.valid
    assert (second.made_at, second.confirmed_cycle) == (NOW, 2)
    assert [m.target for m in second.moves] == [m.target for m in first.advice.moves]
    assert not any(move.changed for move in second.moves)
    assert second.sentence == first.advice.sentence


OUTCOMES = [
    (NoPlan("cycle-1", "infeasible", "no way", None, None), "no_plan", Standing.HOLDING),
    (Overrun(20.0, killed=True), "over_budget", Standing.HOLDING),
    (WorkerLost("signal 9"), "worker_lost", Standing.HOLDING),
    (SolverWarming("building"), "solver_warming", Standing.HOLDING),
    (NoData("refused", mismatch=False), "plant_unreachable", Standing.HOLDING),
    (NoData("unit", mismatch=True), "plant_mismatch", Standing.SILENT),
]


@pytest.mark.parametrize(
    ("outcome", "reason", "standing"), OUTCOMES, ids=lambda part: getattr(part, "why", None)
)
def test_what_is_no_plan_repeats_the_values_not_valid(
    case: Any, outcome: Outcome, reason: str, standing: Standing
) -> None:
    before = run(case, WARM, case.plan)
    advice = run(case, before.state, outcome).advice
    assert (advice.standing, advice.reason, advice.valid) == (standing, reason, False)
    assert [m.target for m in advice.moves] == [m.target for m in before.advice.moves]
    assert not any(move.changed for move in advice.moves)
    assert advice.made_at == before.advice.made_at
    assert advice.valid_until == NOW


def test_bad_inputs_name_the_tag_and_why(case: Any) -> None:
    values = dict(case.measurements.values)
    values["TI-2107"] = replace(values["TI-2107"], verdict="bad_quality")
    decision = run(
        case, WARM, BadInputs(("TI-2107",)), values=values, missing_required=("TI-2107",)
    )
    assert decision.advice.reason == "input_bad"
    assert "TI-2107 (tray 30 temperature) has bad quality" in decision.advice.sentence


def test_a_refused_plan_holds_and_its_finding_is_kept(case: Any) -> None:
    decision = run(case, WARM, case.with_move(REFLUX, first=1e6))
    assert decision.advice.reason == "failed_vetting"
    assert decision.vetting is not None
    assert decision.vetting.findings
    assert not decision.advice.valid


@pytest.mark.parametrize("word", ["model_mismatch", "bias_at_clip"])
def test_a_plans_own_doubts_hold(case: Any, word: str) -> None:
    plan = replace(case.plan, estimate=replace(case.plan.estimate, warnings=(word,)))
    assert run(case, WARM, plan).advice.reason == word


def test_an_unknown_warning_does_not_hold(case: Any) -> None:
    plan = replace(case.plan, estimate=replace(case.plan.estimate, warnings=("curious",)))
    assert run(case, WARM, plan).advice.valid


def test_the_switch_wins_over_everything(case: Any) -> None:
    for outcome in (case.plan, Overrun(20.0, killed=True), BadInputs(())):
        advice = run(case, WARM, outcome, advice_wanted=False).advice
        assert (advice.standing, advice.reason) == (Standing.SILENT, "operator_off")


def test_a_plan_in_silence_by_the_switch_still_feeds_the_memory(case: Any) -> None:
    decision = run(case, WARM, case.plan, advice_wanted=False)
    assert decision.state.memory == case.plan.estimate.memory


def test_nothing_is_valid_during_the_warm_up_and_no_target_stands(case: Any) -> None:
    advice = run(case, LoopState(), case.plan).advice
    assert (advice.standing, advice.reason) == (Standing.STARTING, "warm_up")
    assert [move.target for move in advice.moves] == [None, None]


@pytest.mark.parametrize("spoil", ["id", "infinite", "huge", "shape"])
def test_the_memory_of_a_strange_answer_is_not_kept(case: Any, spoil: str) -> None:
    memories = {"infinite": {"model": (float("inf"),)}, "huge": {"model": (0.0,) * 30_000}}
    plan = case.plan
    if spoil in memories:
        plan = replace(plan, estimate=replace(plan.estimate, memory=memories[spoil]))
    if spoil == "id":
        plan = replace(plan, request_id="cycle-0")
    if spoil == "shape":
        plan = replace(plan, times_min=())
    state = run(case, WARM, plan).state
    assert state.memory == {}
    assert state.unanswered == 1


def test_a_memory_that_is_too_old_or_of_no_use_is_given_up(case: Any) -> None:
    fresh = replace(WARM, memory={"model": (1.0,)}, memory_at=NOW)
    assert before_asking(fresh, NOW + 900.0, case.policies) is fresh
    for state, now in (
        (fresh, NOW + 901.0),
        (fresh, NOW - 1.0),
        (replace(fresh, unanswered=GIVEN_UP_AFTER), NOW + 30.0),
    ):
        given_up = before_asking(state, now, case.policies)
        assert given_up.memory == {}
        assert given_up.standing == StandingState(Standing.STARTING, 0, 0)
    assert before_asking(WARM, NOW, case.policies) is WARM, "nothing to give up"


def test_held_instead_keeps_what_was_learned_and_not_what_was_suggested(case: Any) -> None:
    decision = run(case, WARM, case.plan)
    state, advice = held_instead(
        WARM, decision, "not_journalled", "the disk is full", NOW, case.policies
    )
    assert (advice.standing, advice.valid) == (Standing.HOLDING, False)
    assert [move.target for move in advice.moves] == [None, None], "nothing stood there before"
    assert state.memory == case.plan.estimate.memory
    assert state.pace == WARM.pace
    assert state.advice is advice


def test_after_silence_nothing_of_before_stands(case: Any) -> None:
    asked = run(case, WARM, case.plan).state
    # The operator has gone elsewhere meanwhile, and the pace allows no new suggestion yet.
    silent = replace(asked, standing=StandingState(Standing.SILENT, good_cycles=3))
    request = replace(case.request, request_id="cycle-2", cycle=2)
    plan = replace(case.plan, request_id="cycle-2", cycle=2)
    back = decide(silent, validated(case), request, plan, 2, NOW + 30.0, case.policies).advice
    assert back.valid
    assert {move.reason for move in back.moves} == {"no_change"}
    assert [move.target for move in back.moves] == [9000.0, 98.0]
