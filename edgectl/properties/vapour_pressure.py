"""Vapour pressure of pure components."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

from edgectl.properties.mathematics import Mathematics

LN_10: Final = 2.302585092994046


@dataclass(frozen=True, slots=True)
class Antoine:
    """Parameters of log10(p/Pa) = a - b/(T/K + c), valid from `low_k` to `high_k`."""

    a: float
    b: float
    c: float
    low_k: float
    high_k: float


def antoine_pa(xp: Mathematics, parameters: Antoine, temperature_k: Any) -> Any:
    """Vapour pressure by the Antoine equation.

    Parameters
    ----------
    xp : Mathematics
        Module that offers `exp`, `log`, `sqrt` for the argument's kind [-].
    parameters : Antoine
        Coefficients for base 10, pascal and kelvin.
    temperature_k : float, array or symbol, any shape
        Temperature [K]; the fit holds from `parameters.low_k` to `parameters.high_k`.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Vapour pressure [Pa].

    References
    ----------
    C. Antoine, Comptes Rendus 107 (1888) 681-684.
    """
    exponent = parameters.a - parameters.b / (temperature_k + parameters.c)
    return xp.exp(LN_10 * exponent)


def antoine_slope_1_k(parameters: Antoine, temperature_k: Any) -> Any:
    """Relative slope of the Antoine vapour pressure, d ln p / dT.

    Parameters
    ----------
    parameters : Antoine
        Coefficients for base 10, pascal and kelvin.
    temperature_k : float, array or symbol, any shape
        Temperature [K]; the fit holds from `parameters.low_k` to `parameters.high_k`.

    Returns
    -------
    float, array or symbol, shape of `temperature_k`
        Relative slope [1/K].

    References
    ----------
    C. Antoine, Comptes Rendus 107 (1888) 681-684, differentiated.
    """
    shifted_k = temperature_k + parameters.c
    return LN_10 * parameters.b / (shifted_k * shifted_k)
