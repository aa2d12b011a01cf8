"""The story and the wander."""

from __future__ import annotations

import statistics
from itertools import pairwise

import pytest

from sim_server.disturbances import Conditions, Disturbances, Story, Wander


def conditions(seed: int, story: Story, minutes: int = 240) -> list[Conditions]:
    source = Disturbances(seed, story)
    return [source.next(float(second)) for second in range(minutes * 60)]


@pytest.fixture(scope="module")
def told() -> tuple[list[Conditions], list[Conditions]]:
    return conditions(2, Story.DEFAULT), conditions(2, Story.CALM)


@pytest.mark.parametrize(
    ("minute", "flow", "methanol", "temperature_k"),
    [
        (10, 0.0, 0.0, 0.0),
        (19, 0.0, 0.0, 0.0),
        (24, 0.08, 0.0, 0.0),
        (59, 0.08, 0.0, 0.0),
        (64, 0.08, 0.025, 0.0),
        (104, 0.08, 0.025, -8.0),
        (144, 0.08, 0.0, -8.0),
        (164, 0.0, 0.0, -8.0),
        (239, 0.0, 0.0, -8.0),
    ],
)
def test_the_default_story(
    told: tuple[list[Conditions], list[Conditions]],
    minute: int,
    flow: float,
    methanol: float,
    temperature_k: float,
) -> None:
    # The calm story has the same wander: the difference is the story alone.
    story, calm = told[0][minute * 60], told[1][minute * 60]
    assert story.feed_setpoint_factor == pytest.approx(1.0 + flow)
    assert story.feed_wander_factor == calm.feed_wander_factor
    methanol_shift = story.feed_methanol_shift_wt - calm.feed_methanol_shift_wt
    assert methanol_shift == pytest.approx(methanol, abs=1e-12)
    temperature_shift = story.feed_temperature_shift_k - calm.feed_temperature_shift_k
    assert temperature_shift == pytest.approx(temperature_k, abs=1e-9)


def test_edges_are_smooth(told: tuple[list[Conditions], list[Conditions]]) -> None:
    factors = [c.feed_setpoint_factor for c in told[0]]
    assert max(abs(b - a) for a, b in pairwise(factors)) < 0.001


@pytest.mark.parametrize("seed", range(1, 11))
def test_efficiency_falls_by_two_to_three_points_in_four_hours(seed: int) -> None:
    source = Disturbances(seed, Story.DEFAULT)
    assert source.next(0.0).efficiency_shift == 0.0
    assert -0.03 <= source.next(4.0 * 3600.0).efficiency_shift <= -0.02
    assert source.next(8.0 * 3600.0) is not None
    assert source.next(8.0 * 3600.0).efficiency_shift >= -0.03


def test_seeds_differ_and_repeat() -> None:
    assert conditions(1, Story.CALM, 5) == conditions(1, Story.CALM, 5)
    assert conditions(1, Story.CALM, 5) != conditions(2, Story.CALM, 5)


def test_the_wander_settles_to_its_standard_deviation() -> None:
    wander = Wander(7, "test", sd=2.0, time_constant_s=20.0)
    values = [wander.next() for _ in range(60_000)]
    assert statistics.stdev(values) == pytest.approx(2.0, rel=0.1)
    assert statistics.fmean(values) == pytest.approx(0.0, abs=0.2)
