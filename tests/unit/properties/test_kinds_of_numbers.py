"""One function for plain floats, arrays and CasADi symbols: all three must agree."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import casadi as ca
import numpy as np
import pytest

from edgectl.properties.activity import Nrtl, Wilson, nrtl_ln_gamma, wilson_lambdas, wilson_ln_gamma
from edgectl.properties.density import (
    LiquidDensity,
    ideal_vapour_density_mol_m3,
    mixture_liquid_density_mol_m3,
)
from edgectl.properties.enthalpy import (
    HeatCapacity,
    HeatOfVaporisation,
    heat_of_vaporisation_j_mol,
    ideal_gas_enthalpy_j_mol,
    liquid_enthalpy_j_mol,
)
from edgectl.properties.surface_tension import surface_tension_n_m
from edgectl.properties.vapour_pressure import Antoine, antoine_pa, antoine_slope_1_k

ANTOINE = Antoine(10.1, 1550.0, -37.0, 300.0, 400.0)
DIPPR = HeatOfVaporisation(52053.0, 0.3199, -0.212, 0.25795, 647.096)
SIMPLE_DIPPR = HeatOfVaporisation(50451.0, 0.33594, 0.0, 0.0, 512.5)
CP = HeatCapacity((113.0, -0.4, 0.001))
DENSITIES = (LiquidDensity(28730.0, -0.3, -0.046), LiquidDensity(46452.0, 76.0, -0.157))
WILSON2 = Wilson((40.7, 18.1), ((0.0, 509.0), (2015.0, 0.0)))
WILSON3 = Wilson((40.7, 58.7, 18.1), ((0.0, 50.0, 509.0), (70.0, 0.0, 900.0), (2015.0, 30.0, 0.0)))
NRTL2 = Nrtl(((0.0, -1062.0), (3536.0, 0.0)), ((0.0, 0.3), (0.3, 0.0)))
NRTL3 = Nrtl(
    ((0.0, 100.0, -1062.0), (200.0, 0.0, 50.0), (3536.0, -70.0, 0.0)),
    ((0.0, 0.3, 0.3), (0.3, 0.0, 0.2), (0.3, 0.2, 0.0)),
)

Formula = Callable[[Any, Any, Any], Any]
FORMULAS: dict[str, Formula] = {
    "antoine": lambda xp, t, x: antoine_pa(xp, ANTOINE, t),
    "antoine slope": lambda xp, t, x: antoine_slope_1_k(ANTOINE, t),
    "heat of vaporisation": lambda xp, t, x: heat_of_vaporisation_j_mol(xp, DIPPR, t),
    "simple heat of vaporisation": lambda xp, t, x: heat_of_vaporisation_j_mol(xp, SIMPLE_DIPPR, t),
    "liquid enthalpy": lambda xp, t, x: liquid_enthalpy_j_mol(CP, t),
    "gas enthalpy": lambda xp, t, x: ideal_gas_enthalpy_j_mol(CP, t),
    "liquid density": lambda xp, t, x: mixture_liquid_density_mol_m3(DENSITIES, t, (x, 1.0 - x)),
    "vapour density": lambda xp, t, x: ideal_vapour_density_mol_m3(1e5, t),
    "surface tension": lambda xp, t, x: surface_tension_n_m((0.018, 0.058), (x, 1.0 - x)),
    "wilson": lambda xp, t, x: wilson_ln_gamma(xp, wilson_lambdas(xp, WILSON2, t), (x, 1.0 - x))[0],
    "wilson 3": lambda xp, t, x: wilson_ln_gamma(
        xp, wilson_lambdas(xp, WILSON3, t), (0.5 * x, 0.5 * x, 1.0 - x)
    )[1],
    "nrtl": lambda xp, t, x: nrtl_ln_gamma(xp, NRTL2, t, (x, 1.0 - x))[1],
    "nrtl 3": lambda xp, t, x: nrtl_ln_gamma(xp, NRTL3, t, (0.5 * x, 0.5 * x, 1.0 - x))[2],
}


@pytest.mark.parametrize("formula", FORMULAS.values(), ids=FORMULAS.keys())
def test_floats_arrays_and_symbols_agree(formula: Formula) -> None:
    temperatures = np.array([330.0, 350.0, 380.0])
    fractions = np.array([0.001, 0.4, 0.97])
    by_array = np.broadcast_to(formula(np, temperatures, fractions), (3,))
    by_float = [formula(math, t, x) for t, x in zip(temperatures, fractions, strict=True)]
    t, x = ca.SX.sym("t"), ca.SX.sym("x")
    symbolic = ca.Function("f", [t, x], [formula(ca, t, x)])
    by_symbol = [float(symbolic(t, x)) for t, x in zip(temperatures, fractions, strict=True)]
    assert by_array == pytest.approx(np.array(by_float), rel=1e-12)
    assert by_array == pytest.approx(np.array(by_symbol), rel=1e-12)
