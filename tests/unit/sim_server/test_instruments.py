"""Transmitters and analysers on their own."""

from __future__ import annotations

import statistics
from itertools import pairwise

import pytest

from sim_server.instruments import Analyser, Drift, Transmitter
from sim_server.plant_data import AnalyserData, InstrumentData, load_plant_data
from sim_server.signals import Signal

DATA = load_plant_data()
ANALYSERS = {entry.tag: entry for entry in DATA.analysers}
INSTRUMENTS = {entry.tag: entry for entry in DATA.instruments}


@pytest.mark.parametrize("seed", range(1, 21))
def test_drift_stays_inside_its_bound_and_moves(seed: int) -> None:
    drift = Drift(seed, "TI-1", bound=0.1)
    values = [drift.at(60.0 * minute) for minute in range(24 * 60)]
    assert max(abs(value) for value in values) <= 0.1
    assert len(set(values)) > 100


def test_flow_meters_keep_within_three_per_mille_and_thermometers_within_a_tenth() -> None:
    assert all(i.relative_drift <= 0.003 for i in DATA.instruments if i.unit == "kg/h")
    assert all(i.drift <= 0.1 for i in DATA.instruments if i.unit == "degC")


@pytest.mark.parametrize("tag", ["FIC-2101", "TI-2107"])
def test_noise_has_the_size_of_the_data(tag: str) -> None:
    data = INSTRUMENTS[tag]
    transmitter = Transmitter(5, data)
    true = 0.7 * data.high
    readings = [transmitter.read(true, 0.0) for _ in range(4000)]
    expected = data.noise + data.relative_noise * true
    assert statistics.stdev(readings) == pytest.approx(expected, rel=0.05)
    bound = data.drift + data.relative_drift * true
    assert abs(statistics.fmean(readings) - true) < bound + 4.0 * expected / 4000**0.5


def test_readings_stay_in_range() -> None:
    data = InstrumentData("LIC-1", "level", 0.0, 100.0, "%", noise=5.0)
    transmitter = Transmitter(1, data)
    readings = [transmitter.read(99.0, 0.0) for _ in range(200)]
    assert max(readings) == 100.0


def results(analyser: Analyser, seconds: int) -> list[Signal]:
    """Every new result while the true value is the plant time itself."""
    seen = [analyser.result]
    for time_s in range(1, seconds + 1):
        analyser.advance(float(time_s), time_s)
        if analyser.result is not seen[-1]:
            assert analyser.result.source_time_s == time_s
            seen.append(analyser.result)
    return seen


@pytest.mark.parametrize("seed", [1, 2, 3])
@pytest.mark.parametrize(
    ("tag", "cycle_s", "delay_s"), [("AI-2115", 360, 420), ("AI-2116", 600, 690)]
)
def test_one_result_per_cycle_of_a_sample_one_delay_old(
    seed: int, tag: str, cycle_s: int, delay_s: int
) -> None:
    data = ANALYSERS[tag]
    noiseless = AnalyserData(
        tag, data.description, 0.0, 1e6, data.unit, 0.0, 0.0, data.cycle_s, data.delay_s
    )
    seen = results(Analyser(seed, noiseless, steady_value=-0.0), 7200)
    assert -cycle_s < seen[0].source_time_s <= 0
    times = [signal.source_time_s for signal in seen]
    assert {b - a for a, b in pairwise(times)} == {cycle_s}
    for signal in seen:
        sample_s = signal.source_time_s - delay_s
        assert signal.value == max(0.0, sample_s)


def test_results_before_the_first_sample_show_the_steady_value() -> None:
    analyser = Analyser(1, ANALYSERS["AI-2116"], steady_value=119.0)
    first = analyser.result
    assert first.value == pytest.approx(119.0, abs=5.0 * (5.0 + 0.02 * 119.0))
    analyser.advance(4000.0, 1)
    assert analyser.result.value < 200.0


def test_the_laboratory_comes_late_and_says_so() -> None:
    data = ANALYSERS["XA-2117"]
    for seed in range(1, 11):
        seen = results(Analyser(seed, data, steady_value=100.0), 24 * 3600)
        assert seen[0].source_time_s < 0.0
        samples = [7200.0, 7200.0 + 28800.0, 7200.0 + 57600.0]
        assert len(seen) == 4
        for sample_s, signal in zip(samples, seen[1:], strict=True):
            assert 2700.0 <= signal.source_time_s - sample_s <= 5400.0
            truth = min(sample_s, data.high)
            assert signal.value == pytest.approx(truth, rel=0.2)


def test_noise_of_an_analyser_depends_on_the_seed_alone() -> None:
    data = ANALYSERS["AI-2116"]
    one, two = Analyser(4, data, 100.0), Analyser(4, data, 100.0)
    other = Analyser(5, data, 100.0)
    for time_s in range(1, 3000):
        one.advance(100.0, time_s)
        two.advance(100.0, time_s)
        other.advance(100.0, time_s)
        assert one.result == two.result
    assert one.result != other.result
