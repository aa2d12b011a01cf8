"""What a plan must pass. Each test spoils a plan that passes in one way."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.cost import CvTarget, cost_of
from edgectl.cycle.vetting import hard_excess, vet_plan, vet_targets
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import Plan, PlanRequest
from edgectl.testing.toy import REFLUX, TRAY


def findings(case: Any, plan: Plan, request: PlanRequest | None = None) -> tuple[str, ...]:
    return vet_plan(plan, request or case.request, case.policies).findings


def test_an_honest_plan_passes_and_its_cost_is_ours(case: Any) -> None:
    vetting = vet_plan(case.plan, case.request, case.policies)
    assert vetting.passed
    assert vetting.cost_with is not None
    assert vetting.cost_without is not None
    assert vetting.cost_with.total == pytest.approx(case.plan.cost_with)
    assert vetting.cost_without.total == pytest.approx(case.plan.cost_without)
    assert vetting.cost_with.total < vetting.cost_without.total


def test_the_answer_to_another_question_is_refused(case: Any) -> None:
    assert "cycle-0" in findings(case, replace(case.plan, request_id="cycle-0"))[0]
    assert findings(case, replace(case.plan, cycle=7))


def test_moves_must_be_those_that_were_asked_for(case: Any) -> None:
    assert findings(case, replace(case.plan, moves=case.plan.moves[:1]))
    assert findings(case, replace(case.plan, predictions=case.plan.predictions[:1]))


@pytest.mark.parametrize("number", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("place", ["first", "position", "destination"])
def test_no_move_may_be_anything_but_a_number(case: Any, place: str, number: float) -> None:
    assert findings(case, case.with_move(REFLUX, **{place: number}))


@pytest.mark.parametrize("number", [math.nan, math.inf, 0.0, -1.0])
@pytest.mark.parametrize("path", ["with_moves", "without_moves", "taken_alone"])
def test_no_prediction_may_be_anything_but_positive_and_finite(
    case: Any, path: str, number: float
) -> None:
    found = case.prediction("BOTTOMS")
    if path == "taken_alone":
        spoiled: Any = {**found.taken_alone, TRAY: (number, *found.taken_alone[TRAY][1:])}
    else:
        spoiled = (number, *getattr(found, path)[1:])
    assert findings(case, case.with_prediction("BOTTOMS", **{path: spoiled}))


def test_lengths_must_agree(case: Any) -> None:
    short = case.prediction("BOTTOMS").with_moves[:-1]
    assert "10 values" in findings(case, case.with_prediction("BOTTOMS", with_moves=short))[0]
    assert findings(case, case.with_prediction("BOTTOMS", taken_alone={}))
    assert findings(case, case.with_move(TRAY, path=(99.0,)))


def test_the_time_grid_must_rise(case: Any) -> None:
    for times in ((), (1.0,) * 11, (0.0, *case.plan.times_min[1:]), (math.nan,) * 11):
        assert findings(case, replace(case.plan, times_min=times))


def test_costs_that_are_not_numbers_or_not_true_are_refused(case: Any) -> None:
    assert findings(case, replace(case.plan, cost_with=math.nan))
    assert "is said to be" in findings(case, replace(case.plan, cost_with=1.0))[0]
    assert findings(case, replace(case.plan, cost_without=case.plan.cost_without + 5.0))


def test_huge_but_finite_predictions_are_refused_without_an_exception(case: Any) -> None:
    huge = (1e308,) * len(case.plan.times_min)
    assert findings(case, case.with_prediction("BOTTOMS", with_moves=huge))
    assert findings(case, case.with_move(REFLUX, path=huge))


def test_a_plan_starts_where_the_plant_stands(case: Any) -> None:
    told = findings(case, case.with_move(REFLUX, position=8000.0))
    assert any("planned from 8000" in finding for finding in told)


def test_limits_increments_and_the_largest_move(case: Any) -> None:
    assert "outside" in findings(case, case.with_move(REFLUX, first=9520.0))[0]
    assert "steps of 20" in findings(case, case.with_move(REFLUX, first=8890.5))[0]
    assert "200 are allowed" in findings(case, case.with_move(REFLUX, first=8780.0))[0]


@pytest.mark.parametrize(
    ("service", "first", "refused"),
    [
        (Service.FIXED, 8900.0, True),
        (Service.FIXED, 9000.0, False),
        (Service.RAISE_ONLY, 8900.0, True),
        (Service.RAISE_ONLY, 9100.0, False),
        (Service.LOWER_ONLY, 9100.0, True),
        (Service.LOWER_ONLY, 8900.0, False),
    ],
)
def test_moves_out_of_service_stay(
    case: Any, service: Service, first: float, refused: bool
) -> None:
    positions = tuple(
        replace(at, service=service, reason="test") if at.mv == REFLUX else at
        for at in case.request.positions
    )
    request = replace(case.request, positions=positions)
    told = findings(case, case.with_move(REFLUX, first=first), request)
    assert any("would move" in finding for finding in told) == refused


def test_a_hard_limit_that_only_the_moves_break_is_refused_unless_it_is_named(case: Any) -> None:
    broken = (700.0,) * len(case.plan.times_min)
    plan = case.with_prediction("BOTTOMS", with_moves=broken)
    assert any("BOTTOMS would break its limit of 500" in f for f in findings(case, plan))
    named = replace(plan, gives_way=("BOTTOMS",))
    assert not any("would break" in f for f in findings(case, named))


def test_a_hard_limit_broken_anyhow_does_not_forbid_the_cure(case: Any) -> None:
    long = len(case.plan.times_min)
    plan = case.with_prediction(
        "BOTTOMS", with_moves=(600.0,) + (400.0,) * (long - 1), without_moves=(600.0,) * long
    )
    assert not any("would break" in finding for finding in findings(case, plan))


def test_planned_limits_may_be_tighter_never_wider(case: Any) -> None:
    def with_high(high: float | None) -> Plan:
        cvs = tuple(
            replace(found, high=high) if found.cv == "BOTTOMS" else found
            for found in case.plan.estimate.cvs
        )
        plan: Plan = replace(case.plan, estimate=replace(case.plan.estimate, cvs=cvs))
        return plan

    assert any("wider" in finding for finding in findings(case, with_high(400.0)))
    assert any("wider" in finding for finding in findings(case, with_high(None)))
    assert not any("wider" in finding for finding in findings(case, with_high(300.0)))


def test_a_plan_worse_than_doing_nothing_is_refused(case: Any) -> None:
    found = case.prediction("BOTTOMS")
    worse = tuple(1.3 * value for value in found.without_moves)
    told = findings(case, case.with_prediction("BOTTOMS", with_moves=worse))
    assert any("doing nothing costs" in finding for finding in told)


def test_hard_excess_is_measured_in_the_planning_coordinate(case: Any) -> None:
    policy = case.policies.cvs["BOTTOMS"]
    assert hard_excess(policy, (250.0, 1000.0)) == pytest.approx(math.log(2.0))
    assert hard_excess(policy, (250.0,)) == pytest.approx(-math.log(2.0))
    both = replace(policy, hard_low=100.0)
    assert hard_excess(both, (50.0,)) == pytest.approx(math.log(2.0))


def test_the_cost_by_hand(case: Any) -> None:
    """Two intervals of 10 and 30 min, worked out on paper."""
    cv, mv = case.policies.cvs["BOTTOMS"], case.policies.moves[REFLUX]
    cost = cost_of(
        (10.0, 40.0),
        [(cv, CvTarget(None, 350.0, 150.0), (150.0, 350.0 * math.e))],
        [(mv, 8000.0, (8000.0, 8100.0))],
    )
    away = math.log(350.0 * math.e / 150.0)
    assert cost.setpoints["BOTTOMS"] == pytest.approx(0.75 * away**2)
    assert cost.limits["BOTTOMS"] == pytest.approx(2.0 + 20.0)
    assert cost.price == pytest.approx(0.15 * (0.25 * 80.0 + 0.75 * 81.0))
    assert cost.moves == pytest.approx(0.2)
    assert cost.total == pytest.approx(
        cost.setpoints["BOTTOMS"] + cost.limits["BOTTOMS"] + cost.price + cost.moves
    )


# -- the very values that are published -------------------------------------------------


def vet(case: Any, target: float, *, new: bool = True, minutes: float | None = None) -> bool:
    since = {} if minutes is None else {REFLUX: minutes}
    return not vet_targets(
        {REFLUX: target}, {REFLUX}, {REFLUX} if new else (), since, case.positions, case.policies
    )


def test_published_targets_keep_limits_steps_reach_and_rate(case: Any) -> None:
    assert vet(case, 8800.0)
    assert not vet(case, 8780.0)
    assert not vet(case, 8810.5)
    assert not vet(case, math.nan)
    assert vet(case, 9200.0)
    assert not vet(case, 9600.0)
    # 100 kg/h per minute since the last suggestion for this move.
    assert not vet(case, 8800.0, minutes=1.0)
    assert vet(case, 8900.0, minutes=1.0)
    assert vet(case, 8800.0, minutes=2.0)


def test_a_standing_target_may_be_one_increment_farther(case: Any) -> None:
    assert vet(case, 8780.0, new=False)
    assert not vet(case, 8760.0, new=False)


def test_a_target_for_a_move_that_stands_nowhere_is_refused(case: Any) -> None:
    nowhere = MovePosition(REFLUX, None, Service.FREE, 6500.0, 9500.0, "in_service")
    assert vet_targets({REFLUX: 8800.0}, {REFLUX}, (), {}, {REFLUX: nowhere}, case.policies)
