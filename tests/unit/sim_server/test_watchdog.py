"""The plant's watchdog for advice."""

from __future__ import annotations

from dataclasses import replace

import pytest

from sim_server.watchdog import AdviceSeen, AdviceWatchdog

ALIVE = AdviceSeen(valid=True, valid_until=1e6, heartbeat=8, wanted=True)


@pytest.fixture
def watchdog() -> AdviceWatchdog:
    """A watchdog that has just seen the heartbeat move, at 100 s."""
    watchdog = AdviceWatchdog(period_s=30.0)
    watchdog.usable(90.0, replace(ALIVE, heartbeat=7))
    assert watchdog.usable(100.0, ALIVE)
    return watchdog


def test_a_heartbeat_found_at_the_first_look_proves_nothing() -> None:
    watchdog = AdviceWatchdog()
    assert not watchdog.usable(0.0, ALIVE)
    assert watchdog.usable(1.0, replace(ALIVE, heartbeat=9))


@pytest.mark.parametrize(("now", "usable"), [(190.0, True), (190.1, False), (1e5, False)])
def test_three_periods_without_a_heartbeat_are_the_end(
    watchdog: AdviceWatchdog, now: float, usable: bool
) -> None:
    assert watchdog.usable(now, ALIVE) is usable


def test_a_heartbeat_that_comes_back_counts_again_even_from_zero(
    watchdog: AdviceWatchdog,
) -> None:
    assert not watchdog.usable(500.0, ALIVE)
    assert watchdog.usable(501.0, replace(ALIVE, heartbeat=0))


@pytest.mark.parametrize(
    "seen",
    [
        replace(ALIVE, valid=False),
        replace(ALIVE, wanted=False),
        replace(ALIVE, valid_until=None),
        replace(ALIVE, valid_until=109.9),
        replace(ALIVE, valid_until=float("nan")),
    ],
)
def test_any_other_doubt_is_enough(watchdog: AdviceWatchdog, seen: AdviceSeen) -> None:
    assert watchdog.usable(110.0, ALIVE)
    assert not watchdog.usable(110.0, seen)
    assert watchdog.usable(110.0, ALIVE)
