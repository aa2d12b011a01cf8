"""Boiling points and vapour compositions of methanol/water at 101.325 kPa.

Against Perry's Handbook, Table 13-1 (see the data file). The tolerances were set
after the deviations were known: they catch regressions, they do not prove accuracy.
The controller's Wilson pair was fitted to this table's x-y column, so only the
temperatures are independent evidence for it; the plant's NRTL pair was not.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import pytest

from edgectl.properties.activity import Wilson, nrtl_ln_gamma, wilson_lambdas, wilson_ln_gamma
from edgectl.properties.vapour_pressure import antoine_pa
from sim_server.plant_data import load_plant_data

PRESSURE_PA = 101325.0
PLANT = load_plant_data()
WILSON = Wilson((40.73, 18.07), ((0.0, 509.4), (2015.12, 0.0)))
LnGamma = Callable[[float, float], tuple[float, float]]


def table() -> list[tuple[float, float, float]]:
    path = Path(__file__).parent / "data" / "vle_methanol_water_101kpa.csv"
    lines = [line for line in path.read_text(encoding="utf-8").splitlines() if line[0] != "#"]
    points = [tuple(float(cell) for cell in line.split(",")) for line in lines[1:]]
    return [(x, y, t) for x, y, t in points]


def by_wilson(x: float, temperature_k: float) -> tuple[float, float]:
    first, second = wilson_ln_gamma(math, wilson_lambdas(math, WILSON, temperature_k), (x, 1.0 - x))
    return first, second


def by_nrtl(x: float, temperature_k: float) -> tuple[float, float]:
    first, second = nrtl_ln_gamma(math, PLANT.nrtl, temperature_k, (x, 1.0 - x))
    return first, second


def partial_pressures(x: float, temperature_k: float, ln_gamma: LnGamma) -> tuple[float, float]:
    methanol, water = PLANT.components
    gamma = ln_gamma(x, temperature_k)
    return (
        x * math.exp(gamma[0]) * antoine_pa(math, methanol.antoine, temperature_k),
        (1.0 - x) * math.exp(gamma[1]) * antoine_pa(math, water.antoine, temperature_k),
    )


def bubble_point(x: float, ln_gamma: LnGamma) -> tuple[float, float]:
    """Temperature [K] and vapour mole fraction [-], by bisection."""
    low, high = 320.0, 390.0
    while high - low > 1e-9:
        middle = 0.5 * (low + high)
        if sum(partial_pressures(x, middle, ln_gamma)) < PRESSURE_PA:
            low = middle
        else:
            high = middle
    return low, partial_pressures(x, low, ln_gamma)[0] / PRESSURE_PA


@pytest.mark.parametrize("ln_gamma", [by_wilson, by_nrtl])
@pytest.mark.parametrize(("x", "y", "temperature_degc"), table())
def test_every_point(ln_gamma: LnGamma, x: float, y: float, temperature_degc: float) -> None:
    temperature_k, vapour = bubble_point(x, ln_gamma)
    assert vapour == pytest.approx(y, abs=0.015)
    assert temperature_k - 273.15 == pytest.approx(temperature_degc, abs=0.9)


@pytest.mark.parametrize(
    ("ln_gamma", "mean_dy", "mean_dt_k"), [(by_wilson, 0.0033, 0.14), (by_nrtl, 0.0035, 0.25)]
)
def test_mean_deviation(ln_gamma: LnGamma, mean_dy: float, mean_dt_k: float) -> None:
    points = table()
    found = [bubble_point(x, ln_gamma) for x, _, _ in points]
    vapour = [abs(f[1] - y) for (x, y, _), f in zip(points, found, strict=True) if 0.0 < x < 1.0]
    boiling = [abs(f[0] - 273.15 - t) for (_, _, t), f in zip(points, found, strict=True)]
    assert sum(vapour) / len(vapour) < mean_dy
    assert sum(boiling) / len(boiling) < mean_dt_k
