"""Vapour-liquid equilibrium of a stage, behind one small interface."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Protocol

from edgectl.properties.activity import Wilson, wilson_lambdas, wilson_ln_gamma
from edgectl.properties.mathematics import Mathematics
from edgectl.properties.vapour_pressure import LN_10, Antoine, antoine_pa


class Equilibrium(Protocol):
    """How a stage's temperature and equilibrium vapour follow from its liquid."""

    def bubble_residual(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        """Zero at the bubble point [-]."""

    def vapour_light(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        """Light mole fraction of the equilibrium vapour [-]."""

    def guess_temp_k(self, light: float, pressure_kpa: float) -> float:
        """A starting temperature [K]."""


@dataclass(frozen=True, slots=True)
class ModifiedRaoult:
    """Ideal vapour, Wilson activity, Antoine vapour pressures.

    References
    ----------
    Wilson, G. M. (1964), J. Am. Chem. Soc. 86, 127-130.
    """

    light: Antoine
    heavy: Antoine
    wilson: Wilson

    def partial_pressures_kpa(self, xp: Mathematics, light: Any, temp_k: Any) -> tuple[Any, Any]:
        """Of the light and the heavy component above the liquid [kPa]."""
        heavy = 1.0 - light
        lambdas = wilson_lambdas(xp, self.wilson, temp_k)
        ln_light, ln_heavy = wilson_ln_gamma(xp, lambdas, (light, heavy))
        return (
            light * xp.exp(ln_light) * antoine_pa(xp, self.light, temp_k) / 1000.0,
            heavy * xp.exp(ln_heavy) * antoine_pa(xp, self.heavy, temp_k) / 1000.0,
        )

    def bubble_residual(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        p_light, p_heavy = self.partial_pressures_kpa(xp, light, temp_k)
        return (p_light + p_heavy) / pressure_kpa - 1.0

    def vapour_light(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        return self.partial_pressures_kpa(xp, light, temp_k)[0] / pressure_kpa

    def guess_temp_k(self, light: float, pressure_kpa: float) -> float:
        """Mole-fraction mean of the pure boiling points [K]."""
        return light * boiling_point_k(self.light, pressure_kpa) + (1.0 - light) * boiling_point_k(
            self.heavy, pressure_kpa
        )


def boiling_point_k(antoine: Antoine, pressure_kpa: float) -> float:
    """Boiling point of a pure component: the Antoine equation solved for T.

    Parameters
    ----------
    antoine : Antoine
        Coefficients.
    pressure_kpa : float
        Absolute pressure [kPa].

    Returns
    -------
    float
        Temperature [K].

    References
    ----------
    C. Antoine, Comptes Rendus 107 (1888) 681-684.
    """
    return antoine.b / (antoine.a - math.log(pressure_kpa * 1e3) / LN_10) - antoine.c


@dataclass(frozen=True, slots=True)
class RelativeVolatility:
    """Constant relative volatility; the temperature is a mere label.

    References
    ----------
    Skogestad, S. (1997), Trans. IChemE 75A, 539-562, eq. 4.
    """

    alpha: float
    label_temp_k: float = 350.0

    def bubble_residual(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        return temp_k / self.label_temp_k - 1.0

    def vapour_light(self, xp: Mathematics, light: Any, temp_k: Any, pressure_kpa: Any) -> Any:
        return self.alpha * light / (1.0 + (self.alpha - 1.0) * light)

    def guess_temp_k(self, light: float, pressure_kpa: float) -> float:
        return self.label_temp_k
