"""Pure-component correlations against CoolProp's reference equations (sources in the data file).

The plant's packaged coefficients are the ones tested, so that a slip in the data
file shows here too.
"""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from edgectl.properties.density import liquid_density_mol_m3
from edgectl.properties.enthalpy import heat_of_vaporisation_j_mol
from edgectl.properties.vapour_pressure import Antoine, antoine_pa
from sim_server.plant_data import load_plant_data

DATA = Path(__file__).parent / "data" / "pure_methanol_water.csv"
ROWS = tuple(csv.DictReader(DATA.read_text(encoding="utf-8").splitlines()))
COMPONENTS = dict(zip(("methanol", "water"), load_plant_data().components, strict=True))

# Poling, Prausnitz & O'Connell, Properties of Gases and Liquids, 5th ed. (2001), App. A,
# as carried in chemicals 1.5.2: published coefficients through the same function.
POLING = {
    "methanol": Antoine(10.20277, 1580.08, -33.65, 262.59, 356.0),
    "water": Antoine(10.11564, 1687.537, -42.98, 273.2, 473.2),
}


def rows(quantity: str) -> list[pytest.param]:
    return [
        pytest.param(
            row["component"], float(row["temperature_k"]), float(row["value"]), id=row["id"]
        )
        for row in ROWS
        if row["quantity"] == quantity
    ]


@pytest.mark.parametrize(("component", "temperature_k", "expected_pa"), rows("vapour_pressure"))
def test_vapour_pressure(component: str, temperature_k: float, expected_pa: float) -> None:
    fit, published = COMPONENTS[component].antoine, POLING[component]
    covering = [p for p in (fit, published) if p.low_k <= temperature_k <= p.high_k]
    assert covering
    for parameters in covering:
        # The published pairs are good to 0.5 %, the own fits to 0.03 %.
        tolerance = 0.0005 if parameters is fit else 0.005
        assert antoine_pa(math, parameters, temperature_k) == pytest.approx(
            expected_pa, rel=tolerance
        )


@pytest.mark.parametrize(("component", "temperature_k", "expected"), rows("heat_of_vaporisation"))
def test_heat_of_vaporisation(component: str, temperature_k: float, expected: float) -> None:
    parameters = COMPONENTS[component].heat_of_vaporisation
    value = heat_of_vaporisation_j_mol(math, parameters, temperature_k)
    assert value == pytest.approx(expected, rel=0.01)


@pytest.mark.parametrize(("component", "temperature_k", "expected"), rows("liquid_density"))
def test_liquid_density(component: str, temperature_k: float, expected: float) -> None:
    value = liquid_density_mol_m3(COMPONENTS[component].liquid_density, temperature_k)
    assert value == pytest.approx(expected, rel=0.003)
