"""A request in, an estimate and a plan out: a pure function of the request."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest

from edgectl.optimisation.planner import Planner
from edgectl.records.encoding import dumps, loads
from edgectl.records.measurements import Measurement, MovePosition, Service, Verdict
from edgectl.records.plan import EMPTY_MEMORY, CvLimits, NoPlan, Plan, PlanRequest

AT = 1_800_000_000.0
VALUES = {
    "FIC-2101": 18000.0,
    "TI-2102": 65.0,
    "FIC-2103": 8298.0,
    "FIC-2104": 8840.0,
    "FIC-2105": 6855.0,
    "FIC-2106": 11145.0,
    "TI-2107": 102.0,
    "PIC-2111": 105.0,
    "PDI-2112": 28.5,
    "AI-2115": 0.30,
    "AI-2116": 180.0,
}


def measurement(tag: str, value: float, at: float, delay_s: float = 0.0) -> Measurement:
    return Measurement(tag, value, Verdict.USED, at - delay_s, delay_s, True)


def request_at(site: dict[str, Any], at: float = AT, **changes: float) -> PlanRequest:
    values = VALUES | changes
    delays = {tag: site["tags"][tag].get("analyser", {}).get("delay_s", 0.0) for tag in values}
    return PlanRequest(
        request_id=f"r{at}",
        cycle=1,
        made_at=at,
        elapsed_s=0.0,
        soft_deadline_s=math.inf,
        measurements=tuple(measurement(t, v, at, delays[t]) for t, v in values.items()),
        positions=(
            MovePosition("FIC-2103", 8298.0, Service.FREE, 6500.0, 9500.0, "in_service"),
            MovePosition("TIC-2107", 102.0, Service.FREE, 97.0, 104.0, "in_service"),
        ),
        limits=(
            CvLimits("BOTTOMS", None, 350.0, 150.0),
            CvLimits("DISTILLATE", None, 0.4, None),
        ),
        memory=EMPTY_MEMORY,
    )


@pytest.fixture(scope="module")
def first(planner: Planner, site_table: dict[str, Any]) -> Plan:
    plan = planner.answer(request_at(site_table))
    assert isinstance(plan, Plan)
    return plan


def test_a_plan_starts_from_the_plant_and_is_rounded(first: Plan) -> None:
    reflux, tray = first.moves
    assert (reflux.position, tray.position) == (8298.0, 102.0)
    assert reflux.first == 8298.0 or reflux.first % 20.0 == pytest.approx(0.0, abs=1e-6)
    assert len(reflux.path) == len(first.times_min)
    assert abs(reflux.first - 8298.0) <= 200.0 + 1e-6


def test_predictions_differ_with_and_without(first: Plan) -> None:
    bottoms = next(p for p in first.predictions if p.cv == "BOTTOMS")
    assert bottoms.with_moves != bottoms.without_moves
    assert set(bottoms.taken_alone) == {"FIC-2103", "TIC-2107"}
    assert first.cost_with < first.cost_without


def test_the_same_request_gives_the_same_answer(
    planner: Planner, site_table: dict[str, Any], first: Plan
) -> None:
    again = planner.answer(request_at(site_table))
    assert isinstance(again, Plan)
    assert again.moves == first.moves
    assert again.estimate == first.estimate


def test_an_answer_survives_the_wire_and_memory_stays_small(first: Plan) -> None:
    assert loads(Plan, dumps(first)) == first
    assert len(dumps(first.estimate.memory)) < 10_000


def test_memory_carries_the_model_on(
    planner: Planner, site_table: dict[str, Any], first: Plan
) -> None:
    following = replace(request_at(site_table, AT + 30.0), memory=first.estimate.memory)
    second = planner.answer(following)
    assert isinstance(second, Plan)
    cold = planner.answer(request_at(site_table, AT + 30.0))
    assert isinstance(cold, Plan)
    carried = {cv.cv: cv.bias for cv in second.estimate.cvs}
    fresh = {cv.cv: cv.bias for cv in cold.estimate.cvs}
    assert carried["BOTTOMS"] == pytest.approx(fresh["BOTTOMS"], abs=0.3)
    assert len(second.estimate.memory["history_times"]) == 2


def test_a_gap_longer_than_the_site_allows_settles_the_model_afresh(
    planner: Planner, site_table: dict[str, Any], first: Plan
) -> None:
    longest_s = site_table["cycle"]["restore_max_age_s"]
    for gap_s, kept in ((longest_s, 2), (longest_s + 1.0, 1)):
        request = replace(request_at(site_table, AT + gap_s), memory=first.estimate.memory)
        answer = planner.answer(request)
        assert isinstance(answer, Plan)
        assert len(answer.estimate.memory["history_times"]) == kept


def test_an_analyser_that_contradicts_the_model_is_a_warning(
    planner: Planner, site_table: dict[str, Any], first: Plan
) -> None:
    memory, at = first.estimate.memory, AT
    for _ in range(4):
        at += 600.0
        request = replace(request_at(site_table, at, **{"AI-2116": 4900.0}), memory=memory)
        answer = planner.answer(request)
        assert isinstance(answer, Plan)
        memory = answer.estimate.memory
    assert isinstance(answer, Plan)
    assert answer.estimate.warnings == ("bias_at_clip",)
    # It dies and is dropped: what is left out of the plan is no reason to be silent for ever.
    later = replace(request_at(site_table, at + 10_900.0), memory=memory)
    dead = tuple(m for m in later.measurements if m.tag != "AI-2116")
    without = planner.answer(replace(later, measurements=dead))
    assert isinstance(without, Plan)
    assert without.estimate.warnings == ()
    assert {cv.cv: cv.state for cv in without.estimate.cvs}["BOTTOMS"] == "dropped"


def test_an_mv_in_manual_is_a_fixed_input(planner: Planner, site_table: dict[str, Any]) -> None:
    request = request_at(site_table)
    fixed = replace(request.positions[0], service=Service.FIXED, reason="loop_in_manual")
    plan = planner.answer(replace(request, positions=(fixed, request.positions[1])))
    assert isinstance(plan, Plan)
    assert set(plan.moves[0].path) == {8298.0}


@pytest.mark.parametrize("service", [Service.RAISE_ONLY, Service.LOWER_ONLY])
def test_an_mv_at_its_end_moves_one_way_only(
    planner: Planner, site_table: dict[str, Any], service: Service
) -> None:
    request = request_at(site_table)
    one_way = replace(request.positions[0], service=service)
    plan = planner.answer(replace(request, positions=(one_way, request.positions[1])))
    assert isinstance(plan, Plan)
    sign = 1.0 if service is Service.RAISE_ONLY else -1.0
    assert all(sign * (value - 8298.0) >= -1e-6 for value in plan.moves[0].path)


def test_an_mv_outside_its_limits_comes_back_in_steps(
    planner: Planner, site_table: dict[str, Any]
) -> None:
    request = request_at(site_table)
    outside = replace(request.positions[0], high=7700.0)
    plan = planner.answer(replace(request, positions=(outside, request.positions[1])))
    assert isinstance(plan, Plan)
    assert 8298.0 - 200.0 - 1e-6 <= plan.moves[0].first < 8298.0


def test_a_missing_flow_is_an_answer_with_a_reason(
    planner: Planner, site_table: dict[str, Any]
) -> None:
    request = request_at(site_table)
    without = tuple(m for m in request.measurements if m.tag != "FIC-2105")
    answer = planner.answer(replace(request, measurements=without))
    assert isinstance(answer, NoPlan)
    assert answer.reason == "no_estimate"
    assert "FIC-2105" in answer.sentence


def test_a_refused_value_is_not_used_because_it_is_still_there(
    planner: Planner, site_table: dict[str, Any]
) -> None:
    request = request_at(site_table)

    def with_tray(verdict: Verdict) -> PlanRequest:
        return replace(
            request,
            measurements=tuple(
                replace(m, verdict=verdict) if m.tag == "TI-2107" else m
                for m in request.measurements
            ),
        )

    answer = planner.answer(with_tray(Verdict.BAD_QUALITY))
    assert isinstance(answer, NoPlan)
    assert "TI-2107" in answer.sentence
    # One sample that jumped: validation lets the one before it stand in.
    assert isinstance(planner.answer(with_tray(Verdict.TOO_FAST)), Plan)


def test_an_unknown_position_is_an_answer_with_a_reason(
    planner: Planner, site_table: dict[str, Any]
) -> None:
    request = request_at(site_table)
    unknown = replace(request.positions[0], position=None, service=Service.FIXED)
    answer = planner.answer(replace(request, positions=(unknown, request.positions[1])))
    assert isinstance(answer, NoPlan)
    assert answer.reason == "no_plan"
    assert "FIC-2103" in answer.sentence


def test_the_operating_point_is_a_job_and_others_are_refused(planner: Planner) -> None:
    answer = planner.job("operating_point", {})
    assert isinstance(answer, dict)
    assert answer["converged"] is True
    with pytest.raises(ValueError, match="known: operating_point"):
        planner.job("something", {})
