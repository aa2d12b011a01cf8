"""The grid and the deadlines."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.cycle.policies import Policies
from edgectl.runtime.schedule import Deadlines, Grid, Tick, enforced_budget_s

GRID = Grid(1000.0, 30.0)


@pytest.mark.parametrize(
    ("now", "following"),
    [
        (1000.5, 1),
        (1029.0, 1),
        (1030.0, 1),
        (1036.0, 1),
        (1036.1, 2),
        (1060.0, 2),
        (1100.0, 4),
        (1000.0 + 30.0 * 500, 500),
    ],
)
def test_the_next_instant_that_can_still_be_met(now: float, following: int) -> None:
    assert GRID.following(0, now) == following


@given(st.integers(0, 10_000), st.floats(0.0, 1e6))
def test_the_grid_never_goes_back_and_never_bursts(index: int, later_s: float) -> None:
    now = GRID.instant(index) + later_s
    following = GRID.following(index, now)
    assert following > index
    assert GRID.instant(following) >= now - 0.2 * GRID.period_s - 1e-6
    # Not more is skipped than has to be.
    before = GRID.instant(following - 1)
    assert following == index + 1 or before < now - 0.2 * GRID.period_s + 1e-6


def deadlines(policies: Policies, speed: float = 1.0, late_s: float = 0.0) -> Deadlines:
    tick = Tick(cycle=1, now=0.0, begun_wall=100.0 + late_s, late_s=late_s, skipped=0)
    return Deadlines.of(tick, policies.cycle, speed)


def test_at_speed_one_the_site_file_rules(policies: Policies) -> None:
    found = deadlines(policies)
    assert found.read_timeout_s(100.0) == 2.0
    assert found.solve_timeout_s(100.1) == 20.0
    assert found.journal_timeout_s(120.1) == 2.0
    assert found.publish_timeout_s(122.1) == 2.0
    assert enforced_budget_s(policies.cycle, 1.0) == 20.0


def test_at_speed_sixty_the_period_rules(policies: Policies) -> None:
    found = deadlines(policies, speed=60.0)
    assert found.read_timeout_s(100.0) == pytest.approx(0.2)
    assert found.solve_timeout_s(100.02) == pytest.approx(0.38)
    # A quick solve leaves its time to the journal and to publishing.
    assert found.journal_timeout_s(100.1) == pytest.approx(0.35)
    assert found.publish_timeout_s(100.11) == pytest.approx(0.39)
    assert enforced_budget_s(policies.cycle, 60.0) == pytest.approx(0.4)


def test_a_late_cycle_has_less_time_and_never_none(policies: Policies) -> None:
    found = deadlines(policies, speed=60.0, late_s=0.1)
    assert found.solve_timeout_s(100.1) == pytest.approx(0.3)
    assert found.solve_timeout_s(105.0) == pytest.approx(0.01)
    assert found.publish_timeout_s(105.0) == pytest.approx(0.01)
