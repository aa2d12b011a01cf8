"""Heat of vaporisation, heat capacities and their integrals for pure components."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

from edgectl.properties.mathematics import GAS_CONSTANT_J_MOL_K, Mathematics

REFERENCE_K: Final = 298.15
"""Where liquid and ideal-gas enthalpies are zero."""


@dataclass(frozen=True, slots=True)
class HeatOfVaporisation:
    """DIPPR equation 106: c1 (1-Tr)^(c2 + c3 Tr + c4 Tr^2) J/mol with Tr = T/critical_k.

    `critical_k` is the one the coefficients were fitted with.
    """

    c1: float
    c2: float
    c3: float
    c4: float
    critical_k: float


@dataclass(frozen=True, slots=True)
class HeatCapacity:
    """Polynomial in T/K, lowest power first; J/mol/K, or multiples of R for an ideal gas."""

    coefficients: tuple[float, ...]


def heat_of_vaporisation_j_mol(
    xp: Mathematics, parameters: HeatOfVaporisation, temperature_k: Any
) -> Any:
    """Molar heat of vaporisation at saturation.

    Parameters
    ----------
    xp : Mathematics
        Module that offers `exp`, `log`, `sqrt` for the argument's kind [-].
    parameters : HeatOfVaporisation
        Coefficients of DIPPR equation 106 and their critical temperature.
    temperature_k : float, array or symbol, any shape
        Temperature [K], from the triple point to just below `parameters.critical_k`.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Heat of vaporisation [J/mol].

    References
    ----------
    Perry's Chemical Engineers' Handbook, 8th ed. (2008), Table 2-150.
    """
    tr = temperature_k / parameters.critical_k
    exponent: Any = parameters.c2
    if parameters.c3 != 0.0 or parameters.c4 != 0.0:
        exponent = parameters.c2 + tr * (parameters.c3 + tr * parameters.c4)
    return parameters.c1 * xp.exp(exponent * xp.log(1.0 - tr))


def liquid_cp_j_mol_k(parameters: HeatCapacity, temperature_k: Any) -> Any:
    """Molar heat capacity of the saturated liquid.

    Parameters
    ----------
    parameters : HeatCapacity
        Polynomial coefficients, lowest power first.
    temperature_k : float, array or symbol, any shape
        Temperature [K], inside the range of the fit.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Heat capacity [J/mol/K].

    References
    ----------
    A polynomial; the source belongs to the coefficients in the data file
    (methanol, water: own fits to CoolProp 8.0.0, 293-393 K).
    """
    return _polynomial(parameters.coefficients, temperature_k)


def liquid_enthalpy_j_mol(parameters: HeatCapacity, temperature_k: Any) -> Any:
    """Molar enthalpy of the liquid above 298.15 K, pressure effect neglected.

    Parameters
    ----------
    parameters : HeatCapacity
        Polynomial coefficients of the liquid heat capacity, lowest power first.
    temperature_k : float, array or symbol, any shape
        Temperature [K], inside the range of the fit.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Enthalpy [J/mol].

    References
    ----------
    The heat-capacity polynomial integrated term by term from 298.15 K.
    """
    return _integral(parameters.coefficients, temperature_k)


def ideal_gas_cp_j_mol_k(parameters: HeatCapacity, temperature_k: Any) -> Any:
    """Molar heat capacity of the ideal gas.

    Parameters
    ----------
    parameters : HeatCapacity
        Coefficients of cp/R, lowest power first.
    temperature_k : float, array or symbol, any shape
        Temperature [K], 50 to 1000 K for the handbook's coefficients.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Heat capacity [J/mol/K].

    References
    ----------
    B. E. Poling, J. M. Prausnitz, J. P. O'Connell, The Properties of Gases and
    Liquids, 5th ed. (2001), Appendix A.
    """
    return GAS_CONSTANT_J_MOL_K * _polynomial(parameters.coefficients, temperature_k)


def ideal_gas_enthalpy_j_mol(parameters: HeatCapacity, temperature_k: Any) -> Any:
    """Molar enthalpy of the ideal gas above 298.15 K.

    Parameters
    ----------
    parameters : HeatCapacity
        Coefficients of cp/R, lowest power first.
    temperature_k : float, array or symbol, any shape
        Temperature [K], 50 to 1000 K for the handbook's coefficients.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Enthalpy [J/mol].

    References
    ----------
    The polynomial of Poling et al. (2001), Appendix A, integrated from 298.15 K.
    """
    return GAS_CONSTANT_J_MOL_K * _integral(parameters.coefficients, temperature_k)


def _polynomial(coefficients: tuple[float, ...], t: Any) -> Any:
    total: Any = coefficients[-1]
    for coefficient in reversed(coefficients[:-1]):
        total = total * t + coefficient
    return total


def _integral(coefficients: tuple[float, ...], t: Any) -> Any:
    primitive = (0.0, *(c / (k + 1.0) for k, c in enumerate(coefficients)))
    return _polynomial(primitive, t) - _polynomial(primitive, REFERENCE_K)
