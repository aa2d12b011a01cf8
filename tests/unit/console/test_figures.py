"""What the invented shift adds up to."""

from __future__ import annotations

import math
import statistics
from dataclasses import replace
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.console.figures import (
    loop_lag_ms,
    made_moves,
    overruns,
    percentile,
    pooled_p99_ms,
    refused_plans,
    solve_times_ms,
    spells,
    standing_counts,
    stretches,
    summary,
    unused_tags,
    uptake,
)
from edgectl.console.history import History
from edgectl.console.morning import tags_answer
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import LoopLag


def test_percentiles_are_those_of_the_standard_library() -> None:
    values = [float(v * v % 97) for v in range(50)]
    cuts = statistics.quantiles(values, n=100, method="inclusive")
    assert [percentile(values, share / 100) for share in (1, 50, 95, 99)] == pytest.approx(
        [cuts[0], cuts[49], cuts[94], cuts[98]]
    )
    assert percentile([], 0.5) is None
    assert percentile([3.0, float("nan")], 0.99) == 3.0


def test_standings_add_up_to_the_cycles(shift: History) -> None:
    counts = standing_counts(shift.decisions)
    assert sum(counts.values()) == len(shift.decisions) == 480
    assert (counts["starting"], counts["holding"], counts["silent"]) == (3, 12, 6)


def test_spells_cover_the_shift_without_gap(shift: History) -> None:
    found = spells(shift.decisions)
    assert [s.standing.value for s in found] == [
        "starting",
        "advising",
        "holding",
        "advising",
        "holding",
        "silent",
        "advising",
    ]
    assert all(a.end == b.begin for a, b in pairwise(found))
    assert sum(spell.cycles for spell in found) == 480
    assert found[4].reason == "input_bad"
    assert found[4].end - found[4].begin == 300.0


def test_an_overrun_shows_what_was_held(shift: History) -> None:
    found = overruns(shift.decisions)
    assert [held.record.cycle for held in found] == [150, 151]
    assert dict(found[0].held) == {"FIC-2103": 7940.0, "TIC-2107": 101.5}
    assert found[0].record.advice.standing is Standing.HOLDING


def test_moves_carry_what_became_of_them(shift: History) -> None:
    moves = made_moves(shift.decisions)
    by_outcome = {word: sum(m.outcome == word for m in moves) for word in ("taken", "ignored")}
    assert by_outcome == {"taken": 8, "ignored": 4}
    assert all(m.now == m.target for m in moves if m.outcome == "taken")
    shares = uptake(moves)
    assert shares is not None
    assert shares["taken"] == pytest.approx(8 / 12)
    assert sum(shares.values()) == pytest.approx(1.0)


def test_uptake_counts_settled_suggestions_only(shift: History) -> None:
    moves = made_moves(shift.decisions)
    assert uptake([replace(move, outcome="pending") for move in moves]) is None


def test_unused_tags_say_why_and_whether_still(shift: History) -> None:
    found = {tag.tag: tag for tag in unused_tags(shift.decisions)}
    assert (found["TI-2107"].cycles, found["TI-2107"].why) == (16, "bad_quality")
    assert not found["TI-2107"].unused_now
    assert (found["AI-2116"].why, found["AI-2116"].unused_now) == ("frozen", True)
    assert set(found) == {"TI-2107", "AI-2116"}


def test_solve_times_leave_out_cycles_that_asked_for_nothing(shift: History) -> None:
    assert len(solve_times_ms(shift.decisions)) == 480 - 16
    assert max(solve_times_ms(shift.decisions)) == 2000.0


def test_a_refused_plan_is_found(shift: History) -> None:
    assert [decision.cycle for decision in refused_plans(shift.decisions)] == [300]


def test_summary_of_an_empty_journal_has_the_same_keys(shift: History) -> None:
    assert list(summary(History())) == list(summary(shift))
    assert loop_lag_ms([]) == {"p99": None, "max": None}


def test_overheads_and_sizes_come_from_the_deliveries(shift: History) -> None:
    found = summary(shift)
    assert found["cycle_overhead_ms"] == {"p50": 29.3, "p95": 29.3}
    assert found["record_bytes"] == 21000


def test_a_stretch_joins_spells_of_one_standing_and_names_all_reasons(shift: History) -> None:
    found = spells(shift.decisions)
    other = replace(found[4], reason="over_budget", begin=found[4].end, end=found[4].end + 60.0)
    joined = stretches([*found[3:5], other, replace(other, end=other.end + 30.0), *found[5:]])
    assert [s.standing.value for s in joined] == ["advising", "holding", "silent", "advising"]
    assert joined[1].reason == "input_bad, over_budget"
    assert (joined[1].begin, joined[1].end) == (found[4].begin, other.end + 30.0)
    assert joined[1].cycles == 30


@given(st.lists(st.lists(st.floats(0.0, 200.0), min_size=1, max_size=300), min_size=1, max_size=30))
def test_the_pooled_p99_is_never_below_the_true_one(cycles: list[list[float]]) -> None:
    bound = pooled_p99_ms([lag_of(samples) for samples in cycles])
    pooled = sorted(sample for samples in cycles for sample in samples)
    assert bound is not None
    assert bound >= pooled[math.ceil(0.99 * len(pooled)) - 1]
    assert bound <= pooled[-1]


def test_two_late_samples_among_many_are_not_the_p99() -> None:
    quiet, late = [4.0] * 28, [4.0] * 27 + [70.0]
    assert pooled_p99_ms([lag_of(quiet)] * 58 + [lag_of(late)] * 2) == 4.0


def lag_of(samples: list[float]) -> LoopLag:
    ranked = sorted(samples)
    p90, p99 = (ranked[math.ceil(share * len(ranked)) - 1] for share in (0.90, 0.99))
    return LoopLag(p99, ranked[-1], p90, len(ranked))


def test_cycles_without_a_plant_are_not_called_usable(shift: History) -> None:
    first, second = shift.decisions[3:5]
    history = History(decisions=[first, replace(second, outcome="no_data", measurements={})])
    assert tags_answer(history) == (
        "The plant could not be read in 1 cycle. Every tag was usable in every cycle that read it."
    )
