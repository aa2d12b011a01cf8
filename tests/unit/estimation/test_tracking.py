"""The model follows the measured tray; each bias follows its analyser."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from edgectl.estimation.dynamics import steady_drive
from edgectl.estimation.tracking import (
    Bias,
    BiasSettings,
    History,
    ModelTracker,
    PlantInputs,
    corrected,
    pack,
    unpack,
)
from edgectl.optimisation.planner import Planner

SETTINGS = BiasSettings(
    filter_gain=0.4, innovation_clip=0.4, max_age_s=10800.0, fresh_for_s=2190.0, tighten_per_h=0.15
)
INPUTS = PlantInputs(
    feed_kg_h=18000.0,
    feed_temp_degc=65.0,
    reflux_kg_h=8000.0,
    distillate_kg_h=6860.0,
    tray_temp_degc=99.0,
    top_pressure_kpa=105.0,
    column_dp_kpa=28.5,
    distillate_light=0.9965,
)


@pytest.fixture
def tracker(planner: Planner) -> ModelTracker:
    return planner._parts.estimator.tracker


def tray(tracker: ModelTracker, point: np.ndarray) -> float:
    return float(tracker.looped.tray_temp_k(point)) - 273.15


def test_the_operating_point_stays_where_it_is(tracker: ModelTracker) -> None:
    looped = tracker.looped
    point = looped.steady_point
    points = looped.advance(
        point[looped.state_at], np.tile(point, 2), steady_drive(looped, 100.0, 1 / 6), 0.5
    )
    assert points[looped.size :] == pytest.approx(point, rel=1e-8, abs=1e-8)


def test_one_long_step_and_many_short_ones_agree(tracker: ModelTracker) -> None:
    looped = tracker.looped
    drive = replace(steady_drive(looped, 100.0, 1 / 6), reflux_kmol_h=255.0)
    start = looped.steady_point
    long = looped.advance(start[looped.state_at], np.tile(start, 2), drive, 1 / 60)[looped.size :]
    point = start
    for _ in range(20):
        step = looped.advance(point[looped.state_at], np.tile(point, 2), drive, 1 / 1200)
        point = step[looped.size :]
    assert np.max(np.abs(long - point) / looped.scale) < 2e-3
    assert tray(tracker, long) == pytest.approx(tray(tracker, point), abs=0.02)


def test_a_cold_start_settles_on_the_measured_tray(tracker: ModelTracker) -> None:
    state = tracker.start(INPUTS, 0.0)
    assert tray(tracker, state.point) == pytest.approx(99.0, abs=0.05)


def test_the_model_follows_a_tray_that_moves(tracker: ModelTracker) -> None:
    state = tracker.start(INPUTS, 0.0)
    for cycle in range(1, 31):
        warmer = replace(INPUTS, tray_temp_degc=101.0)
        state = tracker.update(state, warmer, 30.0 * cycle)
    assert tray(tracker, state.point) == pytest.approx(101.0, abs=0.3)
    assert not tracker.mismatched(state)


def test_a_tray_that_cannot_be_followed_is_a_mismatch(tracker: ModelTracker) -> None:
    state = tracker.start(INPUTS, 0.0)
    for cycle in range(1, 60):
        state = tracker.update(state, replace(INPUTS, tray_temp_degc=125.0), 30.0 * cycle)
    assert tracker.mismatched(state)
    assert math.isfinite(tray(tracker, state.point))


def test_feed_composition_follows_the_balance(tracker: ModelTracker) -> None:
    state = tracker.start(INPUTS, 0.0)
    richer = replace(INPUTS, distillate_kg_h=INPUTS.distillate_kg_h * 1.05)
    for cycle in range(1, 121):
        state = tracker.update(state, richer, 30.0 * cycle)
    expected = richer.distillate_kg_h * 0.9965 / 18000.0
    assert state.feed_light == pytest.approx(expected, abs=2e-3)


def test_a_result_is_compared_with_the_model_at_its_sample_time() -> None:
    history = History([], {})
    for minute in range(20):
        history.append(60.0 * minute, {"B": 0.1 * minute})
    assert history.at("B", 330.0) == pytest.approx(0.55)
    bias = corrected(Bias(0.0, 0.0), SETTINGS, 330.0, 0.75, history.at("B", 330.0), False)
    assert bias.value == pytest.approx(0.4 * 0.2)
    assert bias.sample_time == 330.0


def test_each_result_is_used_once_and_never_out_of_order() -> None:
    once = corrected(Bias(0.1, 500.0), SETTINGS, 500.0, 3.0, 0.0, False)
    late = corrected(Bias(0.1, 500.0), SETTINGS, 400.0, 3.0, 0.0, False)
    assert once == late == Bias(0.1, 500.0)


def test_an_innovation_is_clipped_but_the_first_result_sets_the_bias() -> None:
    assert corrected(Bias(0.0, 0.0), SETTINGS, 1.0, 9.0, 0.0, False).value == pytest.approx(0.16)
    assert corrected(Bias(0.0, None), SETTINGS, 1.0, 0.9, 0.0, False).value == pytest.approx(0.9)


def test_a_first_result_beyond_all_expectation_is_not_taken_at_its_word() -> None:
    bias = corrected(Bias(0.0, None), SETTINGS, 1.0, 5.0, 0.0, False)
    assert bias.value == pytest.approx(0.16)
    assert bias.clipped == 1


def test_results_beyond_belief_are_counted_in_a_row() -> None:
    bias = Bias(0.0, 0.0)
    for sample in (1.0, 2.0, 3.0):
        bias = corrected(bias, SETTINGS, sample, 9.0, 0.0, False)
    assert bias.clipped == 3
    assert corrected(bias, SETTINGS, 4.0, bias.value, 0.0, False).clipped == 0


def test_at_most_never_raises_a_bias() -> None:
    below = corrected(Bias(0.0, 0.0), SETTINGS, 1.0, 0.3, 0.0, True)
    above = corrected(Bias(0.0, 0.0), SETTINGS, 1.0, -0.3, 0.0, True)
    assert below.value == 0.0
    assert above.value == pytest.approx(-0.12)


def test_what_is_not_a_number_never_enters_a_bias() -> None:
    before = Bias(0.1, 0.0)
    assert corrected(before, SETTINGS, 1.0, 0.3, math.nan, False) == before
    assert corrected(Bias(0.0, None), SETTINGS, 1.0, math.nan, 0.3, True) == Bias(0.0, None)


def test_a_dead_analyser_ages_tightens_and_is_dropped() -> None:
    bias = Bias(0.2, 0.0)
    words = [bias.state(SETTINGS, now) for now in (1000.0, 3600.0, 10801.0)]
    assert words == ["live", "ageing", "dropped"]
    assert bias.tightening(SETTINGS, 1000.0) == 1.0
    assert bias.tightening(SETTINGS, 7200.0) == pytest.approx(0.7)


def test_memory_is_carried_without_loss(tracker: ModelTracker) -> None:
    state = tracker.start(INPUTS, 10.0)
    history = History([], {})
    history.append(10.0, {"B": 1.5, "D": -1.0})
    biases = {"B": Bias(0.1, 5.0, 2), "D": Bias(0.0, None)}
    again, biases_again, history_again = unpack(pack(state, biases, history), ["B", "D"])
    assert np.array_equal(again.point, state.point)
    assert replace(again, point=state.point) == state
    assert biases_again == biases
    assert history_again.rows == history.rows


def test_a_memory_of_another_version_is_refused(tracker: ModelTracker) -> None:
    packed = pack(tracker.start(INPUTS, 10.0), {}, History([], {}))
    with pytest.raises(ValueError, match="another version"):
        unpack({**packed, "tracked": packed["tracked"][:-1]}, [])
