"""How fast a rehearsal may run."""

from __future__ import annotations

import pytest

from edgectl.console.pace import FASTEST, pace_for


def test_a_quick_machine_runs_an_hour_at_the_largest_speed() -> None:
    pace = pace_for(slowest_ms=20.0, period_s=30.0, wall_s=80.0)
    assert (pace.speed, pace.cycles, pace.remark) == (FASTEST, 120, "")
    assert pace.plant_s == 3600.0


@pytest.mark.parametrize("slowest_ms", [150.0, 280.0, 333.0, 1900.0, 25_000.0])
def test_the_slowest_solve_fits_twice_into_the_enforced_budget(slowest_ms: float) -> None:
    pace = pace_for(slowest_ms, 30.0, 80.0)
    budget_ms = 1e3 * 0.8 * 30.0 / pace.speed
    assert budget_ms >= 2.0 * slowest_ms - 1e-6


def test_a_slow_machine_simulates_less_and_says_so() -> None:
    pace = pace_for(slowest_ms=1000.0, period_s=30.0, wall_s=80.0)
    assert pace.speed == 12.0
    assert pace.plant_s / pace.speed <= 80.0
    assert pace.cycles == 32
    assert "16 of the usual 60 minutes" in pace.remark


def test_whoever_says_how_long_gets_it() -> None:
    pace = pace_for(slowest_ms=1000.0, period_s=30.0, wall_s=80.0, hours=4.0)
    assert (pace.cycles, pace.remark) == (480, "")


def test_whoever_says_how_fast_gets_it_unmeasured() -> None:
    pace = pace_for(slowest_ms=None, period_s=30.0, wall_s=80.0, hours=0.2, speed=33.0)
    assert (pace.speed, pace.cycles) == (33.0, 24)


def test_there_is_always_a_cycle() -> None:
    assert pace_for(None, 30.0, 80.0, 1e-6, 1.0).cycles == 1
    assert pace_for(slowest_ms=60_000.0, period_s=30.0, wall_s=-5.0).cycles == 1
