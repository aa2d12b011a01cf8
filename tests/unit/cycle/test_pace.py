"""When a person is asked for a hand."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.pace import Choice, PaceState, as_it_stands, choose, outside_reach
from edgectl.cycle.suggestion import Suggestion
from edgectl.cycle.vetting import worsened_hard_limits
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import Plan
from edgectl.testing.toy import REFLUX, TRAY

NOW = 1_767_592_800.0
QUIET = {"tray": (98.0, 98.0)}
"""The tray is not to be moved."""


def pick(
    case: Any,
    plan: Plan,
    state: PaceState | None = None,
    *,
    positions: dict[str, MovePosition] | None = None,
    now: float = NOW,
) -> Choice:
    return choose(state or PaceState(), plan, positions or case.positions, now, case.policies)


def at(case: Any, mv: str, **changes: Any) -> dict[str, MovePosition]:
    positions: dict[str, MovePosition] = dict(case.positions)
    positions[mv] = replace(positions[mv], **changes)
    return positions


def asked_for(target: float, *, before: float = 9000.0, **changes: Any) -> PaceState:
    """A suggestion for the reflux made ten minutes ago."""
    made = Suggestion(REFLUX, target, NOW - 600.0, before, True, "economics", "lower", "cheaper")
    return PaceState(
        suggestions={REFLUX: replace(made, **changes)},
        asked_at=(NOW - 600.0,),
        last_step={REFLUX: (NOW - 600.0, target - before)},
    )


def test_a_worthwhile_destination_asks_for_the_first_move(case: Any) -> None:
    choice = pick(case, case.planned(reflux=(8960.0, 8890.0), **QUIET))
    assert choice.new == {REFLUX}
    assert choice.targets == {REFLUX: 8960.0, TRAY: 98.0}


def test_a_destination_that_is_not_worth_a_hand_asks_for_nothing(case: Any) -> None:
    choice = pick(case, case.planned(reflux=(8960.0, 8930.0), **QUIET))
    assert not choice.asks
    assert choice.targets[REFLUX] == 9000.0


def test_small_first_moves_do_not_deadlock(case: Any) -> None:
    assert pick(case, case.planned(reflux=(8980.0, 8900.0), **QUIET)).new == {REFLUX}


def test_not_before_the_interval_is_over(case: Any) -> None:
    plan = case.planned(reflux=(8960.0, 8800.0), **QUIET)
    interval_s = case.policies.advice.interval_s
    early = PaceState(asked_at=(NOW - interval_s + 1.0,))
    assert not pick(case, plan, early).new
    assert pick(case, plan, PaceState(asked_at=(NOW - interval_s,))).new


def test_an_imminent_violation_that_the_moves_prevent_does_not_wait_for_the_interval(
    case: Any,
) -> None:
    plan = case.planned(reflux=(8960.0, 8800.0), **QUIET)
    long = len(plan.times_min)
    urgent = replace(
        plan,
        predictions=tuple(
            replace(p, without_moves=(600.0,) * long, with_moves=(420.0,) * long,
                    taken_alone={REFLUX: (420.0,) * long, TRAY: (600.0,) * long})
            if p.cv == "BOTTOMS" else p
            for p in plan.predictions
        ),
    )  # fmt: skip
    act_within_s = case.policies.advice.act_within_s
    assert pick(case, urgent, PaceState(asked_at=(NOW - act_within_s,))).new
    assert not pick(case, urgent, PaceState(asked_at=(NOW - act_within_s + 1.0,))).new
    assert not pick(case, plan, PaceState(asked_at=(NOW - act_within_s,))).new
    # The last suggestion of the hour is kept for this; beyond it nothing is asked.
    hour = tuple(NOW - 3000.0 + 400.0 * k for k in range(5))
    assert pick(case, urgent, PaceState(asked_at=hour)).new
    assert not pick(case, plan, PaceState(asked_at=hour)).new
    assert not pick(case, urgent, PaceState(asked_at=(*hour, NOW - 350.0))).new


def test_suggestions_of_more_than_an_hour_ago_do_not_count(case: Any) -> None:
    plan = case.planned(reflux=(8960.0, 8800.0), **QUIET)
    old = PaceState(asked_at=tuple(NOW - 3700.0 - k for k in range(6)))
    assert pick(case, plan, old).new


def test_the_way_back_takes_twice_the_reason(case: Any) -> None:
    taken = asked_for(9000.0, before=8900.0, outcome="taken")
    back = case.planned(reflux=(8960.0, 8890.0), **QUIET)
    assert not pick(case, back, taken).new
    far_back = case.planned(reflux=(8960.0, 8830.0), **QUIET)
    assert pick(case, far_back, taken).new
    on = case.planned(reflux=(9040.0, 9110.0), **QUIET)
    assert pick(case, on, taken).new


def test_an_open_suggestion_stands_while_the_plan_points_there(case: Any) -> None:
    state = asked_for(8900.0, outcome="ignored")
    choice = pick(case, case.planned(reflux=(8920.0, 8850.0), **QUIET), state)
    assert choice.targets[REFLUX] == 8900.0
    assert choice.asks == {REFLUX}
    assert not choice.new, "40 kg/h of difference are not worth another hand"


def test_an_open_suggestion_is_renewed_when_the_plan_wants_much_more(case: Any) -> None:
    state = asked_for(8900.0, outcome="ignored")
    choice = pick(case, case.planned(reflux=(8800.0, 8600.0), **QUIET), state)
    assert choice.new == {REFLUX}
    assert choice.targets[REFLUX] == 8800.0


def test_an_open_suggestion_that_the_plan_no_longer_wants_becomes_the_present_position(
    case: Any,
) -> None:
    state = replace(asked_for(8900.0, outcome="ignored"), asked_at=(NOW - 60.0,))
    choice = pick(case, case.planned(reflux=(9040.0, 9100.0), **QUIET), state)
    assert not choice.asks
    assert choice.targets[REFLUX] == 9000.0


def test_when_the_operator_went_elsewhere_the_plan_starts_from_there(case: Any) -> None:
    state = replace(asked_for(8900.0, outcome="opposed"), asked_at=(NOW - 60.0,))
    positions = at(case, REFLUX, position=9300.0)
    plan = replace(
        case.planned(reflux=(9200.0, 9000.0), **QUIET),
        moves=tuple(
            replace(m, position=9300.0, first=9200.0, destination=9000.0) if m.mv == REFLUX else m
            for m in case.planned(**QUIET).moves
        ),
    )
    choice = pick(case, plan, state, positions=positions)
    # 8,900 is now 400 away: more than anyone may be asked for at once.
    assert choice.targets[REFLUX] == 9300.0
    assert not choice.asks


def test_what_stands_at_the_board_follows_a_setpoint_that_somebody_moved(case: Any) -> None:
    closed = Suggestion(TRAY, 98.0, NOW - 60.0, 98.0, False, "no_change", "", "leave")
    state = PaceState(suggestions={TRAY: closed}, asked_at=(NOW - 60.0,))
    moved = at(case, TRAY, position=98.3)
    choice = pick(
        case, case.planned(reflux=(9000.0, 9000.0), tray=(98.3, 98.3)), state, positions=moved
    )
    assert choice.targets[TRAY] == pytest.approx(98.3)


def test_a_taken_suggestion_stays_until_the_plant_wanders_off(case: Any) -> None:
    state = replace(asked_for(9000.0, before=8900.0, outcome="taken"), asked_at=(NOW - 60.0,))
    still = case.planned(reflux=(9000.0, 9000.0), **QUIET)
    assert pick(case, still, state).targets[REFLUX] == 9000.0
    near = pick(case, still, state, positions=at(case, REFLUX, position=9079.0))
    assert near.targets[REFLUX] == 9000.0
    away = pick(case, still, state, positions=at(case, REFLUX, position=9091.0))
    assert away.targets[REFLUX] == 9100.0
    assert not away.asks


@pytest.mark.parametrize(
    ("service", "first", "asks"),
    [
        (Service.FIXED, 8900.0, False),
        (Service.RAISE_ONLY, 8900.0, False),
        (Service.LOWER_ONLY, 8900.0, True),
        (Service.RAISE_ONLY, 9100.0, True),
    ],
)
def test_nothing_is_asked_that_the_loop_cannot_do(
    case: Any, service: Service, first: float, asks: bool
) -> None:
    plan = case.planned(reflux=(first, first), **QUIET)
    choice = pick(case, plan, positions=at(case, REFLUX, service=service))
    assert bool(choice.asks) == asks


def test_an_open_suggestion_falls_when_its_loop_goes_to_manual(case: Any) -> None:
    state = asked_for(8900.0)
    plan = case.planned(reflux=(8900.0, 8900.0), **QUIET)
    positions = at(case, REFLUX, service=Service.FIXED, reason="loop_in_manual")
    choice = pick(case, plan, state, positions=positions)
    assert (choice.targets[REFLUX], choice.asks) == (9000.0, frozenset())


def alone(case: Any, plan: Plan, **paths: float) -> Plan:
    """BOTTOMS constant over the horizon: with both, without, and with each alone."""
    long = len(plan.times_min)
    flat = {name: (value,) * long for name, value in paths.items()}
    predictions = tuple(
        replace(
            p,
            with_moves=flat["both"],
            without_moves=flat["none"],
            taken_alone={REFLUX: flat["reflux"], TRAY: flat["tray"]},
        )
        if p.cv == "BOTTOMS"
        else replace(
            p, with_moves=p.without_moves, taken_alone=dict.fromkeys(p.taken_alone, p.without_moves)
        )
        for p in plan.predictions
    )
    return replace(plan, predictions=predictions)


BOTH = {"reflux": (8900.0, 8800.0), "tray": (98.8, 99.0)}


def test_moves_that_are_safe_alone_need_no_order(case: Any) -> None:
    plan = alone(case, case.planned(**BOTH), both=200.0, none=300.0, reflux=320.0, tray=180.0)
    choice = pick(case, plan)
    assert choice.new == {REFLUX, TRAY}
    assert not choice.unlike


def test_a_move_that_alone_would_break_a_hard_limit_comes_second(case: Any) -> None:
    plan = alone(case, case.planned(**BOTH), both=400.0, none=300.0, reflux=700.0, tray=200.0)
    assert pick(case, plan).unlike == {REFLUX}


def test_moves_that_break_a_limit_alone_belong_together(case: Any) -> None:
    plan = alone(case, case.planned(**BOTH), both=400.0, none=300.0, reflux=700.0, tray=700.0)
    assert pick(case, plan).unlike == {REFLUX, TRAY}


def test_a_small_move_goes_along_when_the_other_is_not_safe_without_it(case: Any) -> None:
    small = {"reflux": (8900.0, 8800.0), "tray": (98.1, 98.2)}
    safe = alone(case, case.planned(**small), both=400.0, none=300.0, reflux=420.0, tray=200.0)
    assert pick(case, safe).new == {REFLUX}
    unsafe = alone(case, case.planned(**small), both=400.0, none=300.0, reflux=700.0, tray=200.0)
    assert pick(case, unsafe).new == {REFLUX, TRAY}


def test_nothing_is_asked_when_no_part_of_the_plan_is_safe(case: Any) -> None:
    small = {"reflux": (8900.0, 8800.0), "tray": (98.0, 98.0)}
    plan = alone(case, case.planned(**small), both=700.0, none=300.0, reflux=700.0, tray=300.0)
    choice = pick(case, plan)
    assert not choice.asks
    assert choice.targets[REFLUX] == 9000.0


@pytest.mark.parametrize(
    ("position", "expected"),
    [(8005.0, 8000.0), (8011.0, 8020.0), (6400.0, 6500.0), (9600.0, 9500.0)],
)
def test_a_position_as_a_target_can_be_entered_and_lies_inside(
    case: Any, position: float, expected: float
) -> None:
    place = replace(case.positions[REFLUX], position=position)
    assert as_it_stands(place, case.policies.moves[REFLUX]) == expected


def test_a_plant_far_outside_its_limits_is_not_led_back_in_one_jump(case: Any) -> None:
    assert outside_reach(at(case, REFLUX, position=6350.0), case.policies) is None
    assert outside_reach(at(case, REFLUX, position=6250.0), case.policies) == REFLUX
    manual = at(case, REFLUX, position=6250.0, service=Service.FIXED)
    assert outside_reach(manual, case.policies) is None


def test_nothing_is_asked_while_the_base_layer_moves_the_mv(case: Any) -> None:
    plan = case.planned(reflux=(8960.0, 8800.0), **QUIET)
    assert not pick(case, plan, positions=at(case, REFLUX, drift=90.0)).new
    assert not pick(case, plan, positions=at(case, REFLUX, drift=-90.0)).new
    assert pick(case, plan, positions=at(case, REFLUX, drift=70.0)).new


def test_nobody_is_asked_to_walk_through_the_limit_of_a_dropped_cv(case: Any) -> None:
    planned = case.planned(reflux=(8900.0, 8800.0), **QUIET)
    plan = alone(case, planned, both=700.0, none=300.0, reflux=700.0, tray=300.0)
    cvs = tuple(replace(e, state="dropped") if e.cv == "BOTTOMS" else e for e in plan.estimate.cvs)
    plan = replace(plan, estimate=replace(plan.estimate, cvs=cvs))
    paths = {p.cv: p.with_moves for p in plan.predictions}
    assert not list(worsened_hard_limits(plan, case.policies, paths)), "no reason to hold"
    assert not pick(case, plan).asks
