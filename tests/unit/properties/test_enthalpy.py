"""Integrals belong to their heat capacities."""

from __future__ import annotations

import pytest

from edgectl.properties.enthalpy import (
    REFERENCE_K,
    HeatCapacity,
    ideal_gas_cp_j_mol_k,
    ideal_gas_enthalpy_j_mol,
    liquid_cp_j_mol_k,
    liquid_enthalpy_j_mol,
)

WATER = HeatCapacity((91.3966165, -0.103546751, 0.000166585729))
STEAM = HeatCapacity((4.395, -0.004186, 1.405e-05, -1.564e-08, 6.32e-12))


@pytest.mark.parametrize("temperature_k", [300.0, 340.0, 385.0])
def test_the_slope_of_the_enthalpy_is_the_heat_capacity(temperature_k: float) -> None:
    above, below = temperature_k + 0.01, temperature_k - 0.01
    slope = (liquid_enthalpy_j_mol(WATER, above) - liquid_enthalpy_j_mol(WATER, below)) / 0.02
    assert slope == pytest.approx(liquid_cp_j_mol_k(WATER, temperature_k), rel=1e-7)
    slope = (ideal_gas_enthalpy_j_mol(STEAM, above) - ideal_gas_enthalpy_j_mol(STEAM, below)) / 0.02
    assert slope == pytest.approx(ideal_gas_cp_j_mol_k(STEAM, temperature_k), rel=1e-7)


def test_the_reference_temperature_has_no_enthalpy() -> None:
    assert liquid_enthalpy_j_mol(WATER, REFERENCE_K) == 0.0


def test_steam_at_room_temperature() -> None:
    # 33.6 J/mol/K for the ideal gas at 298 K (from memory, any steam table).
    assert ideal_gas_cp_j_mol_k(STEAM, 298.15) == pytest.approx(33.6, abs=0.1)
