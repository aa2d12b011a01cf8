"""What is said, word for word."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.sentences import action, amount, notices, why_moves
from edgectl.cycle.vetting import vet_plan
from edgectl.records.measurements import Service, Verdict
from edgectl.testing.toy import REFLUX, TRAY


@pytest.mark.parametrize(
    ("value", "unit", "step", "words"),
    [
        (7900.0, "kg/h", 20.0, "7,900 kg/h"),
        (102.5, "degC", 0.1, "102.5 °C"),
        (480.4, "wt ppm", None, "480 wt ppm"),
        (0.3118, "wt %", None, "0.312 wt %"),
        (12.34, "-", None, "12.3"),
        (0.0, "kg/h", None, "0 kg/h"),
        (1.0, "", 1.0, "1"),
        (2.25, "", 0.25, "2.2"),
    ],
)
def test_amounts(value: float, unit: str, step: float | None, words: str) -> None:
    assert amount(value, unit, step) == words


def test_an_action_names_what_where_from_and_to(case: Any) -> None:
    assert action(case.policies.moves[REFLUX], 7900.0, 8100.0) == (
        "raise reflux flow FIC-2103 from 7,900 to 8,100 kg/h"
    )
    assert action(case.policies.moves[TRAY], 102.0, 101.5) == (
        "lower tray 30 temperature setpoint TIC-2107 from 102.0 to 101.5 °C"
    )


def because(case: Any, with_moves: float, without: float) -> tuple[str, str]:
    """The reason when BOTTOMS is flat at these values."""
    long = len(case.plan.times_min)
    plan = case.with_prediction(
        "BOTTOMS", with_moves=(with_moves,) * long, without_moves=(without,) * long
    )
    vetting = vet_plan(plan, case.request, case.policies)
    return why_moves(plan, vetting, case.request.limits, case.policies)


def test_a_limit_that_would_be_broken_is_the_reason(case: Any) -> None:
    assert because(case, 310.0, 480.0) == (
        "limit_reached",
        "bottoms methanol would otherwise reach 480 wt ppm in 2 min (limit 350); with the move 310",
    )


def test_otherwise_the_setpoint_or_the_price(case: Any) -> None:
    free = replace(case.policies.moves[REFLUX], price=0.0)
    policies = replace(case.policies, moves={**case.policies.moves, REFLUX: free})
    reason, clause = because(replace(case, policies=policies), 155.0, 340.0)
    assert reason == "setpoint"
    assert clause == (
        "bottoms methanol comes nearer to its target of 150 wt ppm: 155 instead of 340 in 2.0 h"
    )
    assert because(case, 150.0, 150.0)[0] == "economics"


def test_a_dead_analyser_is_named_with_what_follows_from_it(case: Any) -> None:
    values = dict(case.measurements.values)
    values["AI-2116"] = replace(values["AI-2116"], verdict=Verdict.FROZEN)
    measurements = replace(case.measurements, values=values)
    head = "AI-2116 (bottoms methanol, on-line gas chromatograph) repeats its result"

    def told(state: str, high: float | None) -> str:
        cvs = tuple(
            replace(e, state=state, high=high) if e.cv == "BOTTOMS" else e
            for e in case.plan.estimate.cvs
        )
        plan = replace(case.plan, estimate=replace(case.plan.estimate, cvs=cvs), gives_way=())
        (notice,) = notices(measurements, plan, case.policies)
        assert notice.startswith(head)
        return notice

    assert told("live", 350.0).endswith("its last good result is kept.")
    assert told("ageing", 298.0).endswith("its limit is tightened to 298 wt ppm.")
    assert told("dropped", 350.0).endswith("left out of the plan until it comes back.")


def test_a_withheld_move_and_a_limit_that_gives_way_are_named(case: Any) -> None:
    positions = dict(case.positions)
    positions[REFLUX] = replace(positions[REFLUX], service=Service.FIXED, reason="loop_in_manual")
    measurements = replace(case.measurements, positions=positions)
    told = notices(measurements, replace(case.plan, gives_way=("DISTILLATE",)), case.policies)
    assert told == (
        "FIC-2103 (reflux flow) is not moved: its loop does not follow its setpoint (manual).",
        "Not all limits can be kept: that of distillate water (DISTILLATE) gives way.",
    )


def test_a_valve_at_one_end_forbids_only_that_way(case: Any) -> None:
    def told(service: Service) -> tuple[str, ...]:
        found = replace(case.positions[REFLUX], service=service, reason="output_saturated")
        positions = {**case.positions, REFLUX: found}
        return notices(replace(case.measurements, positions=positions), None, case.policies)

    head = "FIC-2103 (reflux flow)"
    assert told(Service.LOWER_ONLY) == (f"{head} is not raised: its valve is at its end.",)
    assert told(Service.RAISE_ONLY) == (f"{head} is not lowered: its valve is at its end.",)
