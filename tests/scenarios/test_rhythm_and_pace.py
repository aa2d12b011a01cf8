"""The rhythm of cycles and the pace of suggestions, over hours and a day of virtual time."""

from __future__ import annotations

import asyncio
import itertools
import math
from dataclasses import replace

import pytest

from edgectl.cycle.policies import Policies
from edgectl.records.entries import EntryKind
from edgectl.records.readings import TagSnapshot
from edgectl.testing.faults import Fault, Script
from edgectl.testing.memory_ports import MemorySource
from edgectl.testing.oracle import problems
from edgectl.testing.story import Played, play
from edgectl.testing.toy import ToyPlant

REFLUX, TRAY = "FIC-2103", "TIC-2107"


def far_from_the_best(plant: ToyPlant) -> None:
    plant.setpoints |= {REFLUX: 9400.0, TRAY: 98.0}


def suggestion_times(played: Played) -> list[float]:
    return [
        report.record.made_at
        for report in played.reports
        if any(move.changed for move in report.advice.moves)
    ]


def test_a_day_of_cycles_keeps_every_invariant_and_the_products_inside(policies: Policies) -> None:
    inside = []

    def disturb(cycle: int, plant: ToyPlant) -> None:
        if cycle % 700 == 100:
            plant.push["BOTTOMS"] = 0.9 if plant.push["BOTTOMS"] == 0.0 else 0.0
        bottoms, distillate = (math.exp(plant.logs[cv]) for cv in ("BOTTOMS", "DISTILLATE"))
        inside.append(bottoms < 500.0 and distillate < 0.5)

    # A minute between cycles: a day of them in a few seconds.
    slower = replace(policies, cycle=replace(policies.cycle, period_s=60.0, validity_s=180.0))
    cycles = round(86_400.0 / slower.cycle.period_s)
    played = play(slower, cycles, prepare=far_from_the_best, each_cycle=disturb)
    assert len(played.reports) == cycles
    assert problems(played) == []
    assert all(report.advice.valid for report in played.reports[3:])
    times = suggestion_times(played)
    assert len(times) > 20
    for at in times:
        assert sum(1 for other in times if at <= other < at + 3600.0) <= 6
    assert sum(inside) / len(inside) > 0.95
    first, last = played.reports[0].record, played.reports[-1].record
    assert last.made_at - first.made_at == pytest.approx((cycles - 1) * slower.cycle.period_s)


def test_suggestions_keep_their_distance_and_are_worth_a_hand(policies: Policies) -> None:
    played = play(policies, 400, prepare=far_from_the_best)
    times = suggestion_times(played)
    assert times
    gaps = [b - a for a, b in itertools.pairwise(times)]
    assert min(gaps) >= policies.advice.act_within_s
    urgent = [gap for gap in gaps if gap < policies.advice.interval_s]
    assert len(urgent) <= 2
    for report in played.reports:
        planned = {move.mv: move for move in report.record.planned}
        for move in report.advice.moves:
            if move.changed:
                plan, policy = planned[move.mv], policies.moves[move.mv]
                assert abs(plan.destination - plan.position) >= policy.worthwhile_move
                assert move.target == plan.first


def test_what_was_taken_is_on_record_and_stays(policies: Policies) -> None:
    played = play(policies, 60, prepare=far_from_the_best)
    outcomes = [f.outcome for r in played.reports for f in r.record.follow_ups]
    assert {"pending", "taken"} <= set(outcomes)
    assert played.crew.actions
    for report in played.reports[4:]:
        for move in report.advice.moves:
            if move.reason == "taken":
                position = report.record.positions[move.mv].position
                assert position == pytest.approx(move.target)


@pytest.mark.parametrize(
    ("crew", "expected"), [("ignores", "ignored"), ("opposes", "opposed"), ("part", "part_taken")]
)
def test_what_the_operator_did_instead_is_on_record(
    policies: Policies, crew: str, expected: str
) -> None:
    played = play(policies, 80, crew=crew, prepare=far_from_the_best)
    outcomes = {f.outcome for r in played.reports for f in r.record.follow_ups}
    assert expected in outcomes
    # Recorded, never nagged about: no event, no hold.
    assert not played.events
    assert all(report.advice.valid for report in played.reports[3:])
    assert problems(played) == []


def test_an_ignored_suggestion_stands_unchanged_while_the_plan_wants_the_same(
    policies: Policies,
) -> None:
    played = play(policies, 60, crew="ignores", prepare=far_from_the_best)
    made = {r.advice.made_at for r in played.reports[5:] if r.advice.made_at is not None}
    assert len(made) <= 2


def test_a_late_start_skips_whole_periods_and_never_bursts(policies: Policies) -> None:
    played = play(policies, 20, speed=1.0, each_cycle=None)
    assert [report.record.skipped_cycles for report in played.reports] == [0] * 20

    # The journal takes three periods: as slow as its waits allow, the cycle is still over in time.
    slow = replace(policies, cycle=replace(policies.cycle, journal_wait_s=90.0))
    played = play(slow, 12, [Fault("slow_journal", 6, 2)])
    late = [report.record.timings.late_ms for report in played.reports]
    assert max(late) <= 0.2 * 30_000.0
    starts = [report.record.made_at for report in played.reports]
    for a, b in itertools.pairwise(starts):
        assert b - a >= 0.8 * policies.cycle.period_s


def test_a_source_that_blocks_for_three_periods_costs_three_cycles(
    policies: Policies, monkeypatch: pytest.MonkeyPatch
) -> None:
    read = MemorySource.read

    async def stuck(self: MemorySource, cycle: int, timeout_s: float) -> TagSnapshot:
        if cycle == 7:
            # A port that breaks its promise: the schedule must cope all the same.
            await asyncio.sleep(100.0)
        return await read(self, cycle, timeout_s)

    monkeypatch.setattr(MemorySource, "read", stuck)
    played = play(policies, 12)
    skipped = {r.record.cycle: r.record.skipped_cycles for r in played.reports}
    assert skipped[8] == 3
    assert sum(skipped.values()) == 3
    starts = [report.record.made_at for report in played.reports]
    grid = [(at - starts[0]) / 30.0 for at in starts]
    assert grid == pytest.approx([round(g) for g in grid], abs=1e-6)


def test_the_same_seed_gives_the_same_journal(policies: Policies) -> None:
    story = [Fault("overrun", 8, 2), Fault("restart", 14), Fault("nan", 20, 3, "TI-2107")]
    one, two, other = (
        play(policies, 40, story, seed=seed, prepare=far_from_the_best) for seed in (5, 5, 6)
    )
    assert [row.entry for row in one.journal.rows] == [row.entry for row in two.journal.rows]
    assert [row.entry for row in one.journal.rows] != [row.entry for row in other.journal.rows]


def test_a_restart_goes_on_from_the_memory_and_warms_up(policies: Policies) -> None:
    played = play(policies, 40, [Fault("restart", 15)], prepare=far_from_the_best)
    openings = played.journal.bodies(EntryKind.OPENED)
    assert openings[0]["restored"] == "cold: no decision before this one"
    assert openings[1]["restored"].startswith("memory of cycle 1")
    start = played.starts[1]
    assert played.report(start).record.memory_in
    assert [played.report(c).advice.standing.value for c in range(start, start + 4)] == [
        "starting", "starting", "starting", "advising",
    ]  # fmt: skip
    # The results that were used before are not used again.
    assert not played.report(start).record.measurements["AI-2116"].is_new
    assert problems(played) == []


def test_an_opening_that_the_journal_refused_is_written_when_it_takes_entries(
    policies: Policies,
) -> None:
    played = play(policies, 12, [Fault("restart", 4), Fault("failing_journal", 4, 3)])
    openings = [row.seq for row in played.journal.rows if row.entry.kind is EntryKind.OPENED]
    assert len(openings) == 2
    assert problems(played) == []


def test_a_run_that_ends_withdraws_and_says_so(policies: Policies) -> None:
    played = play(policies, 6)
    assert played.sink.nodes["valid"] is False
    assert played.sink.nodes["reason"] == "finished"
    kinds = [row.entry.kind for row in played.journal.rows[-2:]]
    assert kinds == [EntryKind.WITHDRAWAL, EntryKind.CLOSED]
    closing = played.journal.bodies(EntryKind.CLOSED)[0]
    assert (closing["reason"], closing["cycles"]) == ("finished", 6)


def test_a_script_knows_when_it_is_over() -> None:
    assert Script([Fault("overrun", 3, 4), Fault("lost", 5)]).over_at == 7
    assert Script().over_at == 1
