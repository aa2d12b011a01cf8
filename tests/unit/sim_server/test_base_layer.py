"""The plant's loops, seen as the board sees them: through the plant's signals."""

from __future__ import annotations

import math

import pytest

from sim_server.plant import SimulatedPlant
from sim_server.signals import Mode


@pytest.fixture
def plant() -> SimulatedPlant:
    return SimulatedPlant(seed=3, story="calm")


def value(plant: SimulatedPlant, name: str) -> float:
    return plant.signals[name].value


def mean(plant: SimulatedPlant, name: str, seconds: int = 60) -> float:
    total = 0.0
    for _ in range(seconds):
        plant.advance(plant.time_s + 1.0)
        total += value(plant, name)
    return total / seconds


def test_loops_start_as_on_a_normal_shift(plant: SimulatedPlant) -> None:
    assert value(plant, "FIC-2103.MODE") == Mode.CASCADE
    assert value(plant, "FIC-2104.MODE") == Mode.CASCADE
    assert value(plant, "TIC-2107.MODE") == Mode.AUTOMATIC
    assert value(plant, "TIC-2107.SP") == 102.0
    assert value(plant, "FFIC-2103.SP") == 0.461
    assert value(plant, "FIC-2103.SP") == pytest.approx(0.461 * 18000.0, rel=1e-6)


def test_in_cascade_the_ratio_rules_and_reflux_follows_the_feed() -> None:
    plant = SimulatedPlant(seed=3, story="feed-cut")
    plant.advance(550.0)
    before = value(plant, "FIC-2103.SP")
    plant.advance(3000.0)
    assert value(plant, "FFIC-2103.SP") == 0.461
    assert value(plant, "FIC-2103.SP") / before == pytest.approx(0.75, abs=0.005)
    assert mean(plant, "FFIC-2103.PV") == pytest.approx(0.461, abs=0.002)


def test_the_ratio_follows_the_filtered_feed_in_five_minutes() -> None:
    plant = SimulatedPlant(seed=3, story="feed-cut")
    plant.advance(600.0)
    base = value(plant, "FIC-2103.SP")
    # The cut is spread over 150 s: an edge through a 300 s lag is 63 % done about 375 s later.
    plant.advance(975.0)
    done = (base - value(plant, "FIC-2103.SP")) / (0.25 * base)
    assert done == pytest.approx(1.0 - math.exp(-1.0), abs=0.05)


def test_a_reflux_setpoint_in_cascade_means_this_flow_now() -> None:
    plant = SimulatedPlant(seed=3, story="feed-cut")
    plant.advance(120.0)
    plant.write("FIC-2103.SP", 7800.0)
    assert value(plant, "FIC-2103.SP") == 7800.0
    assert value(plant, "FIC-2103.MODE") == Mode.CASCADE
    assert value(plant, "FFIC-2103.SP") == pytest.approx(7800.0 / 18000.0, rel=0.003)
    assert mean(plant, "FIC-2103.PV", 240) == pytest.approx(7800.0, rel=0.01)
    # Later the feed falls by a quarter, and so does reflux.
    plant.advance(3000.0)
    assert value(plant, "FIC-2103.SP") == pytest.approx(0.75 * 7800.0, rel=0.01)


def test_in_automatic_the_reflux_setpoint_is_held() -> None:
    plant = SimulatedPlant(seed=3, story="feed-cut")
    plant.write("FIC-2103.MODE", Mode.AUTOMATIC)
    plant.write("FIC-2103.SP", 8000.0)
    plant.advance(2400.0)
    assert value(plant, "FIC-2103.SP") == 8000.0
    # The station follows, so that the return to cascade is bumpless.
    assert value(plant, "FFIC-2103.SP") == pytest.approx(8000.0 / 13500.0, rel=0.01)
    plant.write("FIC-2103.MODE", Mode.CASCADE)
    plant.advance(2401.0)
    assert value(plant, "FIC-2103.SP") == pytest.approx(8000.0, rel=1e-3)


def test_the_station_takes_no_setpoint_while_it_follows(plant: SimulatedPlant) -> None:
    plant.write("FFIC-2103.SP", 0.45)
    plant.write("FIC-2103.MODE", Mode.AUTOMATIC)
    with pytest.raises(ValueError, match="not in cascade"):
        plant.write("FFIC-2103.SP", 0.46)


def test_in_manual_the_valve_is_held_and_the_setpoint_follows(plant: SimulatedPlant) -> None:
    plant.advance(60.0)
    plant.write("FIC-2103.MODE", Mode.MANUAL)
    plant.write("FIC-2103.OP", 50.0)
    plant.advance(180.0)
    assert value(plant, "FIC-2103.OP") == 50.0
    assert plant.true_values()["reflux_kg_h"] == pytest.approx(7500.0, rel=0.001)
    assert value(plant, "FIC-2103.SP") == pytest.approx(7500.0, rel=0.015)
    plant.write("FIC-2103.MODE", Mode.CASCADE)
    assert mean(plant, "FIC-2103.PV", 30) == pytest.approx(7500.0, rel=0.01)


def test_the_tray_loop_moves_steam_and_reaches_its_setpoint(plant: SimulatedPlant) -> None:
    plant.advance(10.0)
    steam = value(plant, "FIC-2104.SP")
    plant.write("TIC-2107.SP", 99.0)
    plant.advance(11.0)
    # 100 kW/K at 2133 kJ/kg: 3 K down is 506 kg/h of steam at once, give or take the noise.
    assert value(plant, "FIC-2104.SP") - steam == pytest.approx(-3.0 * 168.8, abs=80.0)
    plant.advance(3600.0)
    assert plant.true_values()["tray30_temp_degc"] == pytest.approx(99.0, abs=0.6)


def test_steam_in_automatic_leaves_the_tray_loop_following(plant: SimulatedPlant) -> None:
    plant.advance(60.0)
    plant.write("FIC-2104.MODE", Mode.AUTOMATIC)
    plant.write("FIC-2104.SP", 9000.0)
    plant.advance(200.0)
    assert value(plant, "TIC-2107.OP") == pytest.approx(75.0, abs=1e-9)
    plant.write("FIC-2104.MODE", Mode.CASCADE)
    plant.advance(201.0)
    # Only the noise between two scans of the thermometer, 100 kW/K, is left of a bump.
    assert value(plant, "FIC-2104.SP") == pytest.approx(9000.0, abs=80.0)


def test_levels_hold_through_a_feed_cut() -> None:
    plant = SimulatedPlant(seed=3, story="feed-cut")
    plant.advance(4800.0)
    true = plant.true_values()
    assert true["feed_kg_h"] == pytest.approx(13500.0, rel=0.02)
    assert true["drum_level_pct"] == pytest.approx(50.0, abs=6.0)
    assert true["sump_level_pct"] == pytest.approx(50.0, abs=6.0)
    assert true["distillate_kg_h"] + true["bottoms_kg_h"] == pytest.approx(13500.0, rel=0.05)


def test_a_stuck_steam_valve_shows_and_does_not_wind_up_the_master(plant: SimulatedPlant) -> None:
    plant.advance(60.0)
    opening = value(plant, "FIC-2104.OP")
    plant.limit_valve("FIC-2104", opening - 6.0)
    plant.advance(1500.0)
    assert value(plant, "FIC-2104.OP") == 100.0
    assert mean(plant, "FIC-2104.PV", 30) < value(plant, "FIC-2104.SP") - 200.0
    # What is left above the opening at the start is proportional action alone: 1.406 %/K.
    proportional = 1.406 * (102.0 - value(plant, "TIC-2107.PV"))
    assert proportional > 10.0
    assert value(plant, "TIC-2107.OP") - proportional == pytest.approx(opening, abs=2.5)
    plant.limit_valve("FIC-2104", None)
    plant.advance(1500.0 + 3000.0)
    assert plant.true_values()["tray30_temp_degc"] == pytest.approx(102.0, abs=1.0)


@pytest.mark.parametrize(
    ("name", "wrong", "reason"),
    [
        ("FIC-2101.SP", 17000.0, "not a signal that the board may write"),
        ("TI-2107.PV", 100.0, "not a signal that the board may write"),
        ("nonsense", 1.0, "not a signal that the board may write"),
        ("TIC-2107.SP", 300.0, "outside 50 to 130"),
        ("TIC-2107.SP", math.nan, "not a finite number"),
        ("TIC-2107.MODE", 2.0, "not one of 0 manual, 1 automatic"),
        ("FIC-2103.MODE", 0.5, "not one of"),
        ("TIC-2107.OP", 50.0, "not in manual"),
        ("FIC-2104.SP", 8000.0, "its master sets it"),
        ("FFIC-2103.OP", 50.0, "not a signal that the board may write"),
    ],
)
def test_refused_writes_say_why_and_change_nothing(
    plant: SimulatedPlant, name: str, wrong: float, reason: str
) -> None:
    before = dict(plant.signals)
    with pytest.raises(ValueError, match=reason):
        plant.write(name, wrong)
    assert dict(plant.signals) == before
