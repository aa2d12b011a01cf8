"""One loop and one valve: control, limits, bumpless changes."""

from __future__ import annotations

import pytest

from sim_server.loops import Loop, Valve
from sim_server.signals import Mode


def loop(**changes: float) -> Loop:
    return Loop("XIC-1", gain=2.0, reset_s=20.0, setpoint=50.0, output=40.0, **changes)


def test_no_error_no_move() -> None:
    controller = loop()
    assert [controller.scan(50.0) for _ in range(10)] == [40.0] * 10


def test_proportional_and_integral_action() -> None:
    controller = loop()
    # An error of 1: 2 % at once, and 2/20 % more each second.
    assert controller.scan(49.0) == pytest.approx(42.1)
    assert controller.scan(49.0) == pytest.approx(42.2)


def test_it_controls_a_lagging_process_to_its_setpoint() -> None:
    controller, pv = loop(), 40.0
    for _ in range(600):
        pv += (controller.scan(pv) - pv) / 30.0
    assert pv == pytest.approx(50.0, abs=0.01)


def test_the_output_does_not_wind_up() -> None:
    controller = loop()
    for _ in range(1000):
        controller.scan(0.0)
    assert controller.output == 100.0
    # The error turns: the output leaves its limit at once, not a thousand seconds later.
    assert controller.scan(51.0) < 100.0


def test_a_held_slave_stops_the_integral_in_one_direction() -> None:
    controller = loop()
    up = [controller.scan(49.0, hold_high=True) for _ in range(5)]
    assert up == [pytest.approx(42.0)] * 5
    down = [controller.scan(51.0, hold_high=True) for _ in range(2)]
    assert down[1] < down[0]


def test_manual_holds_and_automatic_returns_without_a_bump() -> None:
    controller = loop()
    controller.mode = Mode.MANUAL
    controller.output = 63.0
    assert controller.scan(47.0) == 63.0
    controller.mode = Mode.AUTOMATIC
    # Only the integral of one second has moved it.
    assert controller.scan(47.0) == pytest.approx(63.0 + 2.0 * 3.0 / 20.0)


def test_following_a_slave_is_bumpless_too() -> None:
    controller = loop()
    controller.scan(50.0)
    controller.follow(75.0)
    assert controller.scan(50.0) == pytest.approx(75.0)


def test_a_reverse_loop_opens_when_its_level_rises() -> None:
    controller = Loop("LIC-1", gain=-2.0, reset_s=600.0, setpoint=50.0, output=40.0)
    assert controller.scan(55.0) > 49.9


def test_the_valve_sticks_until_the_demand_is_far_enough() -> None:
    valve = Valve(full_flow=1000.0, position=50.0, stiction=0.5)
    for _ in range(60):
        valve.move(50.4)
    assert valve.flow == pytest.approx(500.0)
    for _ in range(60):
        valve.move(50.6)
    assert valve.flow == pytest.approx(506.0, abs=0.01)


def test_the_valve_stops_at_its_end_stop_and_is_freed() -> None:
    valve = Valve(full_flow=1000.0, position=50.0)
    valve.high = 47.0
    for _ in range(60):
        valve.move(90.0)
    assert valve.flow == pytest.approx(470.0, abs=0.01)
    valve.high = 100.0
    for _ in range(60):
        valve.move(90.0)
    assert valve.flow == pytest.approx(900.0, abs=0.01)
