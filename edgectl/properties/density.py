"""Molar densities of saturated liquids, their mixtures and the ideal vapour."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from edgectl.properties.mathematics import GAS_CONSTANT_J_MOL_K


@dataclass(frozen=True, slots=True)
class LiquidDensity:
    """Saturated-liquid density c0 + c1 T + c2 T^2 mol/m3, T in K."""

    c0: float
    c1: float
    c2: float


def liquid_density_mol_m3(parameters: LiquidDensity, temperature_k: Any) -> Any:
    """Molar density of a saturated pure liquid.

    Parameters
    ----------
    parameters : LiquidDensity
        Polynomial coefficients.
    temperature_k : float, array or symbol, any shape
        Temperature [K], inside the range of the fit (methanol, water: 293-393 K).

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Molar density [mol/m3].

    References
    ----------
    A polynomial; the source belongs to the coefficients in the data file
    (methanol, water: own fits to CoolProp 8.0.0, largest error 0.08 %).
    """
    t = temperature_k
    return parameters.c0 + t * (parameters.c1 + t * parameters.c2)


def mixture_liquid_density_mol_m3(
    parameters: Sequence[LiquidDensity], temperature_k: Any, x: Sequence[Any]
) -> Any:
    """Molar density of a liquid mixture without excess volume.

    Parameters
    ----------
    parameters : sequence of LiquidDensity, n entries
        Pure-component polynomials.
    temperature_k : float, array or symbol, any shape
        Temperature [K], inside the range of the fits.
    x : sequence of n entries, each of the shape of `temperature_k`
        Liquid mole fractions, summing to one [-].

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Molar density [mol/m3].

    References
    ----------
    Amagat's law of additive volumes; methanol/water shrinks by up to about 3 %
    on mixing (from memory), which is neglected.
    """
    volume: Any = 0.0
    for component, fraction in zip(parameters, x, strict=True):
        volume = volume + fraction / liquid_density_mol_m3(component, temperature_k)
    return 1.0 / volume


def ideal_vapour_density_mol_m3(pressure_pa: Any, temperature_k: Any) -> Any:
    """Molar density of an ideal vapour.

    Parameters
    ----------
    pressure_pa : float, array or symbol, any shape
        Absolute pressure [Pa]; good to a few per cent below about 300 kPa here.
    temperature_k : float, array or symbol, same shape
        Temperature [K].

    Returns
    -------
    float, array or symbol, same shape
        Molar density [mol/m3].

    References
    ----------
    Ideal-gas law.
    """
    return pressure_pa / (GAS_CONSTANT_J_MOL_K * temperature_k)
