"""The drills on virtual time: what an operator sees while something is wrong, and after."""

from __future__ import annotations

import pytest

from edgectl.cycle.policies import Policies
from edgectl.records.advice import Advice, Standing
from edgectl.testing.faults import Fault
from edgectl.testing.oracle import problems
from edgectl.testing.story import ASKS, Played, play
from edgectl.testing.toy import ToyPlant

REFLUX, TRAY = "FIC-2103", "TIC-2107"


def too_much_reflux(plant: ToyPlant) -> None:
    """A start from which there is something to suggest."""
    plant.setpoints |= {REFLUX: 9000.0, TRAY: 100.0}


def targets(advice: Advice) -> dict[str, float | None]:
    return {move.mv: move.target for move in advice.moves}


def reasons(advice: Advice) -> dict[str, str]:
    return {move.mv: move.reason for move in advice.moves}


def standings(played: Played, begin: int, end: int) -> list[str]:
    return [played.report(cycle).advice.standing.value for cycle in range(begin, end)]


def assert_bumpless(played: Played, cycle: int) -> None:
    """Back in advice, no target is farther from the plant than one move."""
    report = played.report(cycle)
    assert report.advice.valid
    for move in report.advice.moves:
        position = report.record.positions[move.mv].position
        assert move.target is not None
        assert position is not None
        assert abs(move.target - position) <= played.policies.moves[move.mv].max_move


def test_a_slow_solver_holds_the_last_move_and_the_next_cycle_starts_on_time(
    policies: Policies,
) -> None:
    played = play(policies, 30, [Fault("overrun", 12, 3)], prepare=too_much_reflux)
    before = played.report(11)
    for cycle in (12, 13, 14):
        report = played.report(cycle)
        assert report.record.outcome == "overrun"
        assert report.advice.standing is Standing.HOLDING
        assert report.advice.reason == "over_budget"
        assert not report.delivery.valid
        assert targets(report.advice) == targets(before.advice)
        assert report.advice.made_at == before.advice.made_at
        assert report.advice.confirmed_cycle == 11
        # The plan was cut off at its budget; the next cycle is not late for it.
        assert report.record.timings.solve_ms == pytest.approx(20_000.0)
        assert played.report(cycle + 1).record.timings.late_ms == 0.0
        assert played.report(cycle + 1).record.skipped_cycles == 0
    assert [move.changed for move in played.report(12).advice.moves] == [False, False]
    assert played.report(15).advice.standing is Standing.ADVISING
    assert_bumpless(played, 15)
    # The heartbeat goes on: the cycle read, decided, journalled and published.
    assert played.report(14).heartbeat == before.heartbeat + 3
    assert problems(played) == []


def test_a_bad_required_tag_holds_at_once_then_silences_then_recovers_within_three_cycles(
    policies: Policies,
) -> None:
    limit = policies.cycle.hold_limit
    played = play(policies, 40, [Fault("bad", 12, limit + 4, "TI-2107")], prepare=too_much_reflux)
    first = played.report(12).advice
    assert first.standing is Standing.HOLDING
    assert first.reason == "input_bad"
    assert "TI-2107" in first.sentence
    assert standings(played, 12, 12 + limit) == ["holding"] * limit
    assert standings(played, 12 + limit, 12 + limit + 4) == ["silent"] * 4
    clears_at = 12 + limit + 4
    assert "advising" in standings(played, clears_at, clears_at + 3)
    assert_bumpless(played, clears_at)
    # Nothing was asked of the solver without its inputs.
    asked = {request.cycle for request in played.solver.asked}
    assert asked.isdisjoint(range(12, clears_at))
    assert problems(played) == []


def test_a_server_that_drops_stops_the_heartbeat_and_comes_back_the_same_way(
    policies: Policies,
) -> None:
    faults = [Fault("unreachable", 12, 14), Fault("slow_publish", 12, 14)]
    played = play(policies, 40, faults, prepare=too_much_reflux)
    beats = [played.report(cycle).heartbeat for cycle in range(11, 26)]
    assert len(set(beats)) == 1
    assert played.report(12).advice.reason == "plant_unreachable"
    assert played.report(12).record.outcome == "no_data"
    assert standings(played, 12, 22) == ["holding"] * 10
    assert standings(played, 22, 26) == ["silent"] * 4
    assert played.report(26).advice.standing is Standing.ADVISING
    assert played.report(26).heartbeat == beats[0] + 1
    assert_bumpless(played, 26)
    assert problems(played) == []


def test_a_plant_that_is_not_as_described_is_silent_at_once(policies: Policies) -> None:
    played = play(policies, 30, [Fault("not_as_described", 10, 2)], prepare=too_much_reflux)
    assert standings(played, 9, 13) == ["advising", "silent", "silent", "advising"]
    assert played.report(10).advice.reason == "plant_mismatch"
    assert problems(played) == []


def test_a_frozen_analyser_is_named_and_never_silences(policies: Policies) -> None:
    played = play(policies, 200, [Fault("frozen", 30, 160, "AI-2116")], prepare=too_much_reflux)
    frozen = [r for r in played.reports if r.record.measurements["AI-2116"].verdict == "frozen"]
    assert frozen, "three equal results in a row were never seen"
    # Three results of ten minutes: 60 cycles, and not many more.
    assert 30 < frozen[0].record.cycle <= 30 + 3 * 20 + 20
    for report in frozen:
        assert report.advice.valid
        assert any("AI-2116" in notice for notice in report.advice.notices)
        assert not report.record.measurements["AI-2116"].is_new
    assert all(report.advice.valid for report in played.reports[3:])
    after = played.reports[-1]
    assert after.record.measurements["AI-2116"].usable or after.record.cycle < 190 + 20
    raised = [e for e in played.events if e.subject == "AI-2116" and e.raised]
    assert [e.severity for e in raised] == ["maintenance_required"]


@pytest.mark.parametrize(
    ("kind", "reason"), [("manual", "loop_in_manual"), ("valve_end", "output_saturated")]
)
def test_only_the_move_whose_loop_is_out_of_service_is_withheld(
    policies: Policies, kind: str, reason: str
) -> None:
    def both_products_impure(plant: ToyPlant) -> None:
        # More reflux would be asked for, and a warmer tray.
        plant.setpoints |= {REFLUX: 7700.0, TRAY: 98.0}
        plant.push |= {"BOTTOMS": 0.5, "DISTILLATE": 0.5}

    played = play(policies, 45, [Fault(kind, 12, 15, REFLUX)], prepare=both_products_impure)
    begin = 12 if kind == "manual" else 14
    for cycle in range(begin, 27):
        report = played.report(cycle)
        assert report.advice.valid, report.advice.sentence
        assert reasons(report.advice)[REFLUX] == reason
        assert not any(move.changed for move in report.advice.moves if move.mv == REFLUX)
        assert any(REFLUX in notice for notice in report.advice.notices)
    # The other one goes on being suggested.
    asked = [r for r in played.reports[begin:26] if reasons(r.advice)[TRAY] in ASKS]
    assert asked
    assert reasons(played.report(27).advice)[REFLUX] != reason
    assert_bumpless(played, 27)
    withheld = [e.raised for e in played.events if e.event == "move_withheld"]
    assert withheld == [True, False]
    assert problems(played) == []


def test_the_operators_switch_silences_at_once_and_returns_without_a_jump(
    policies: Policies,
) -> None:
    def operator_moves_meanwhile(cycle: int, plant: ToyPlant) -> None:
        if cycle == 14:
            plant.setpoints |= {REFLUX: 8200.0}

    played = play(
        policies,
        40,
        [Fault("switch_off", 12, 6)],
        prepare=too_much_reflux,
        each_cycle=operator_moves_meanwhile,
    )
    before = played.report(11).advice
    for cycle in range(12, 18):
        advice = played.report(cycle).advice
        assert advice.standing is Standing.SILENT
        assert advice.reason == "operator_off"
        assert targets(advice) == targets(before)
    # The model kept tracking: the solver was asked all the same.
    assert {12, 17} <= {request.cycle for request in played.solver.asked}
    back = played.report(18)
    assert back.advice.standing is Standing.ADVISING
    assert_bumpless(played, 18)
    assert abs((targets(back.advice)[REFLUX] or 0.0) - 8200.0) <= 200.0
    assert problems(played) == []


def test_switched_off_from_the_start_still_warms_up_when_it_is_switched_on(
    policies: Policies,
) -> None:
    played = play(policies, 12, [Fault("switch_off", 1, 2)])
    assert standings(played, 1, 8) == ["silent"] * 2 + ["starting"] * 3 + ["advising"] * 2


@pytest.mark.parametrize("kind", ["slow_journal", "failing_journal"])
def test_a_decision_that_is_not_on_record_is_never_valid(policies: Policies, kind: str) -> None:
    played = play(policies, 30, [Fault(kind, 12, 3)], prepare=too_much_reflux)
    before = played.report(11).advice
    for cycle in (12, 13, 14):
        report = played.report(cycle)
        assert report.receipt is None
        assert report.advice.reason == "not_journalled"
        assert not report.delivery.valid
        assert targets(report.advice) == targets(before)
        assert report.heartbeat == played.report(11).heartbeat
    assert played.report(15).advice.valid
    raised = [(e.event, e.raised) for e in played.events if e.event == "not_journalled"]
    # The event waits until the journal takes it.
    assert raised == [("not_journalled", True), ("not_journalled", False)]
    assert problems(played) == []


@pytest.mark.parametrize("kind", ["partial_publish", "refused_publish", "slow_publish"])
def test_a_publishing_that_fails_is_withdrawn_and_on_record(policies: Policies, kind: str) -> None:
    played = play(policies, 25, [Fault(kind, 12, 2)], prepare=too_much_reflux)
    for cycle in (12, 13):
        report = played.report(cycle)
        assert not report.delivery.valid
        assert report.advice.standing is Standing.HOLDING
        assert report.advice.reason == "not_published"
        assert report.heartbeat == played.report(11).heartbeat
    withdrawn = [row for row in played.journal.rows if row.entry.kind == "withdrawal"]
    assert [row.entry.cycle for row in withdrawn] == [12, 13, None]
    assert played.report(14).advice.valid
    assert problems(played) == []


def test_a_spike_is_bridged_and_a_step_that_stays_is_believed(policies: Policies) -> None:
    def jumps(cycle: int, plant: ToyPlant) -> None:
        # The tray's measured value follows its setpoint: 25 degC in half a minute is too fast.
        if cycle in (10, 20):
            plant.setpoints[TRAY] += 25.0
        if cycle == 11:
            plant.setpoints[TRAY] -= 25.0

    played = play(policies, 40, each_cycle=jumps, crew="ignores")
    spike = played.report(11).record.measurements["TI-2107"]
    assert spike.verdict == "too_fast"
    assert spike.value == pytest.approx(101.0, abs=0.5)
    # 25 degC are too fast for 30 s and for 60 s, and not for 90 s.
    verdicts = [played.report(c).record.measurements["TI-2107"].verdict for c in range(21, 26)]
    assert verdicts == ["too_fast"] * 2 + ["used"] * 3


def test_uncertain_required_inputs_hold_and_optional_ones_do_not(policies: Policies) -> None:
    faults = [Fault("uncertain", 10, 2, "TI-2107"), Fault("uncertain", 15, 2, "TI-2109")]
    played = play(policies, 25, faults)
    assert standings(played, 9, 13) == ["advising", "holding", "holding", "advising"]
    assert standings(played, 14, 18) == ["advising"] * 4
    assert played.report(15).record.measurements["TI-2109"].note == "uncertain"


def test_a_substitute_is_used_and_said(policies: Policies) -> None:
    played = play(policies, 15, [Fault("bad", 8, 3, "TI-2102")])
    report = played.report(8)
    assert report.advice.valid
    found = report.record.measurements["TI-2102"]
    assert (found.value, found.verdict, found.note) == (65.0, "bad_quality", "substituted")
    assert any("65.0 °C is used instead" in notice for notice in report.advice.notices)
