"""The plant as its server and its crew see it."""

from __future__ import annotations

import math
from collections.abc import Mapping

import pytest

from edgectl.records.units import UNITS
from sim_server.plant import SimulatedPlant
from sim_server.signals import Mode, Plant

ADDITIVE = {
    "TI-2107.PV": "tray30_temp_degc",
    "TI-2102.PV": "feed_temp_degc",
    "LIC-2113.PV": "drum_level_pct",
    "PDI-2112.PV": "column_dp_kpa",
    "PIC-2111.PV": "drum_pressure_kpa",
}
PROPORTIONAL = {
    "FIC-2101.PV": "feed_kg_h",
    "FIC-2103.PV": "reflux_kg_h",
    "FIC-2104.PV": "steam_kg_h",
    "FIC-2105.PV": "distillate_kg_h",
}
OUTSIDE = ("feed_kg_h", "feed_methanol_wt_pct", "feed_temp_degc", "drum_pressure_kpa")


def errors(plant: Plant) -> list[float]:
    """What noise and drift alone add to the readings now."""
    signals, true = plant.signals, plant.true_values()
    added = [signals[name].value - true[key] for name, key in ADDITIVE.items()]
    return added + [signals[name].value / true[key] for name, key in PROPORTIONAL.items()]


def test_it_is_a_plant() -> None:
    plant: Plant = SimulatedPlant(1)
    assert plant.time_s == 0.0


def test_every_signal_has_a_known_unit_and_starts_in_range() -> None:
    plant = SimulatedPlant(1)
    specs = {spec.name: spec for spec in plant.specs}
    assert len(specs) == len(plant.specs)
    assert specs.keys() == plant.signals.keys()
    for name, spec in specs.items():
        assert spec.unit in UNITS
        assert spec.low <= plant.signals[name].value <= spec.high
        assert plant.signals[name].source_time_s <= 0.0
    assert specs["PIC-2111.PV"].description.endswith("absolute")
    assert specs["FIC-2103.MODE"].integer


def test_every_loop_shows_pv_sp_op_and_mode() -> None:
    names = {spec.name for spec in SimulatedPlant(1).specs}
    loops = {name.removesuffix(".MODE") for name in names if name.endswith(".MODE")}
    assert len(loops) == 10
    for loop in loops:
        assert {f"{loop}.{item}" for item in ("PV", "SP", "OP", "MODE")} <= names
    assert {"AI-2115.PV", "AI-2116.PV", "XA-2117.PV", "TI-2107.PV"} <= names


def test_the_board_may_write_loops_and_nothing_else() -> None:
    writable = {spec.name for spec in SimulatedPlant(1).specs if spec.board_writable}
    assert {"FIC-2103.SP", "FIC-2103.MODE", "TIC-2107.SP", "FFIC-2103.SP"} <= writable
    assert not any(name.endswith(".PV") or name.startswith("FIC-2101") for name in writable)


def test_it_advances_in_whole_plant_seconds() -> None:
    plant = SimulatedPlant(1)
    plant.advance(2.9)
    assert plant.time_s == 2.0
    assert plant.signals["TI-2107.PV"].source_time_s == 2.0
    plant.advance(1.0)
    assert plant.time_s == 2.0


def test_the_same_seed_gives_the_same_plant() -> None:
    one, two, other = SimulatedPlant(7), SimulatedPlant(7), SimulatedPlant(8)
    for plant in (one, two, other):
        plant.advance(300.0)
    # However the time was cut into pieces.
    three = SimulatedPlant(7)
    for until in range(0, 301, 7):
        three.advance(float(until))
    three.advance(300.0)
    assert dict(one.signals) == dict(two.signals) == dict(three.signals)
    assert one.true_values() == two.true_values()
    assert dict(one.signals) != dict(other.signals)


def test_noise_and_disturbances_do_not_depend_on_what_the_board_does() -> None:
    left_alone, handled = SimulatedPlant(11), SimulatedPlant(11)
    histories: list[dict[int, float]] = [{}, {}]
    results: list[dict[float, float]] = [{}, {}]
    for second in range(10, 2401, 10):
        if second == 60:
            handled.write("TIC-2107.SP", 98.0)
            handled.write("FIC-2103.SP", 7400.0)
        if second == 900:
            handled.write("FIC-2104.MODE", Mode.MANUAL)
            handled.write("FIC-2104.OP", 68.0)
        for plant, history, result in zip((left_alone, handled), histories, results, strict=True):
            plant.advance(float(second))
            signal = plant.signals["AI-2116.PV"]
            result[signal.source_time_s] = signal.value
            history[second] = plant.true_values()["bottoms_methanol_wt_ppm"]
        if second % 100 == 0:
            assert errors(left_alone) == pytest.approx(errors(handled), abs=1e-9)
            first, second_true = left_alone.true_values(), handled.true_values()
            assert [first[key] for key in OUTSIDE] == [second_true[key] for key in OUTSIDE]
    # The plants themselves went different ways.
    assert handled.true_values()["tray30_temp_degc"] < 99.5
    assert results[0].keys() == results[1].keys()
    for time_s in results[0]:
        draws = [
            noise_of_analyser(history, result[time_s], time_s)
            for history, result in zip(histories, results, strict=True)
        ]
        assert draws[0] == pytest.approx(draws[1], abs=0.2)


def noise_of_analyser(history: Mapping[int, float], shown: float, time_s: float) -> float:
    """The standard normal number behind a result: 690 s dead time, 2 % and 5 ppm."""
    sample_s = max(10, round((time_s - 690.0) / 10.0) * 10)
    true = history[sample_s]
    return (shown - true) / (5.0 + 0.02 * true)


def test_nothing_breaks_when_everything_goes_wrong() -> None:
    plant = SimulatedPlant(2, story="feed-cut")
    plant.write("FIC-2104.MODE", Mode.MANUAL)
    plant.write("FIC-2104.OP", 0.0)
    plant.write("FIC-2105.MODE", Mode.MANUAL)
    plant.write("FIC-2105.OP", 100.0)
    plant.advance(2400.0)
    check_sane(plant)
    true = plant.true_values()
    # No steam: the drum runs empty and its pumps lose suction.
    assert true["reboiler_duty_kw"] < 1.0
    assert true["drum_level_pct"] < 3.0
    plant.write("FIC-2104.OP", 100.0)
    plant.write("FIC-2106.MODE", Mode.MANUAL)
    plant.write("FIC-2106.OP", 100.0)
    plant.advance(4800.0)
    check_sane(plant)


def check_sane(plant: SimulatedPlant) -> None:
    specs = {spec.name: spec for spec in plant.specs}
    for name, signal in plant.signals.items():
        assert math.isfinite(signal.value), name
        assert specs[name].low <= signal.value <= specs[name].high, name
    assert all(math.isfinite(value) for value in plant.true_values().values())


def test_one_hour_of_the_default_story_stays_within_specification() -> None:
    plant = SimulatedPlant(1)
    for until in range(60, 3601, 60):
        plant.advance(float(until))
        true = plant.true_values()
        assert true["bottoms_methanol_wt_ppm"] < 500.0
        assert true["distillate_water_wt_pct"] < 0.5
        assert true["flooding_max"] < 0.85
    assert true["feed_kg_h"] == pytest.approx(1.08 * 18000.0, rel=0.02)
