"""Liquid-phase activity coefficients: Wilson and NRTL.

Any number of components; the double sums shrink to closed forms for two,
because that is what a column solves hundreds of times per cycle.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from edgectl.properties.mathematics import GAS_CONSTANT_J_MOL_K, Mathematics


@dataclass(frozen=True, slots=True)
class Wilson:
    """Lambda_ij = v_j/v_i exp(-a_ij/(R T)); the diagonal of `energies_j_mol` is zero."""

    volumes_cm3_mol: tuple[float, ...]
    energies_j_mol: tuple[tuple[float, ...], ...]


@dataclass(frozen=True, slots=True)
class Nrtl:
    """tau_ij = b_ij/(R T), G_ij = exp(-alpha_ij tau_ij); both diagonals are zero."""

    energies_j_mol: tuple[tuple[float, ...], ...]
    alphas: tuple[tuple[float, ...], ...]


def wilson_lambdas(
    xp: Mathematics, parameters: Wilson, temperature_k: Any
) -> tuple[tuple[Any, ...], ...]:
    """Temperature-dependent Wilson parameters.

    Parameters
    ----------
    xp : Mathematics
        Module that offers `exp`, `log`, `sqrt` for the argument's kind [-].
    parameters : Wilson
        Molar volumes and energies of n components.
    temperature_k : float, array or symbol, any shape
        Temperature [K].

    Returns
    -------
    tuple of tuples, n x n, each entry of the shape of `temperature_k`
        Lambda_ij [-]; the diagonal is the number 1.

    References
    ----------
    G. M. Wilson, J. Am. Chem. Soc. 86 (1964) 127-130.
    """
    minus_inverse_rt = -1.0 / (GAS_CONSTANT_J_MOL_K * temperature_k)
    v = parameters.volumes_cm3_mol
    return tuple(
        tuple(
            1.0 if i == j else v[j] / v[i] * xp.exp(energy * minus_inverse_rt)
            for j, energy in enumerate(row)
        )
        for i, row in enumerate(parameters.energies_j_mol)
    )


def wilson_ln_gamma(
    xp: Mathematics, lambdas: Sequence[Sequence[Any]], x: Sequence[Any]
) -> tuple[Any, ...]:
    """Logarithms of the activity coefficients by Wilson's equation.

    Parameters
    ----------
    xp : Mathematics
        Module that offers `exp`, `log`, `sqrt` for the argument's kind [-].
    lambdas : sequence of sequences, n x n
        Lambda_ij [-], from `wilson_lambdas` or given.
    x : sequence of n entries, each of any one shape
        Liquid mole fractions, summing to one [-].

    Returns
    -------
    tuple of n entries, each of the shape of the entries of `x`
        ln gamma_i [-].

    References
    ----------
    G. M. Wilson, J. Am. Chem. Soc. 86 (1964) 127-130. For more than two
    components the form of Sinnott, Chemical Engineering Design, section 8.16.
    """
    if len(x) == 2:
        x1, x2 = x
        l12, l21 = lambdas[0][1], lambdas[1][0]
        s1, s2 = x1 + l12 * x2, l21 * x1 + x2
        bracket = l12 / s1 - l21 / s2
        return -xp.log(s1) + x2 * bracket, -xp.log(s2) - x1 * bracket
    n = len(x)
    sums = [_weighted_sum(lambdas[k], x) for k in range(n)]
    shares = [x[k] / sums[k] for k in range(n)]
    return tuple(
        1.0 - xp.log(sums[i]) - _weighted_sum([lambdas[k][i] for k in range(n)], shares)
        for i in range(n)
    )


def nrtl_ln_gamma(
    xp: Mathematics, parameters: Nrtl, temperature_k: Any, x: Sequence[Any]
) -> tuple[Any, ...]:
    """Logarithms of the activity coefficients by the NRTL equation.

    Parameters
    ----------
    xp : Mathematics
        Module that offers `exp`, `log`, `sqrt` for the argument's kind [-].
    parameters : Nrtl
        Energies and non-randomness of n components.
    temperature_k : float, array or symbol, any shape
        Temperature [K].
    x : sequence of n entries, each of the shape of `temperature_k`
        Liquid mole fractions, summing to one [-].

    Returns
    -------
    tuple of n entries, each of the shape of `temperature_k`
        ln gamma_i [-].

    References
    ----------
    H. Renon, J. M. Prausnitz, AIChE J. 14 (1968) 135-144.
    """
    inverse_rt = 1.0 / (GAS_CONSTANT_J_MOL_K * temperature_k)
    if len(x) == 2:
        return _nrtl_binary(xp, parameters, inverse_rt, x[0], x[1])
    n = len(x)
    tau = [[b * inverse_rt for b in row] for row in parameters.energies_j_mol]
    g = [[xp.exp(-parameters.alphas[i][j] * tau[i][j]) for j in range(n)] for i in range(n)]
    columns = [[g[j][i] for j in range(n)] for i in range(n)]
    sums = [_weighted_sum(columns[i], x) for i in range(n)]
    means = [
        _weighted_sum([tau[j][i] * columns[i][j] for j in range(n)], x) / sums[i] for i in range(n)
    ]
    return tuple(
        means[i] + _weighted_sum([g[i][j] / sums[j] * (tau[i][j] - means[j]) for j in range(n)], x)
        for i in range(n)
    )


def _nrtl_binary(
    xp: Mathematics, parameters: Nrtl, inverse_rt: Any, x1: Any, x2: Any
) -> tuple[Any, Any]:
    tau12 = parameters.energies_j_mol[0][1] * inverse_rt
    tau21 = parameters.energies_j_mol[1][0] * inverse_rt
    g12 = xp.exp(-parameters.alphas[0][1] * tau12)
    g21 = xp.exp(-parameters.alphas[1][0] * tau21)
    r21 = g21 / (x1 + x2 * g21)
    r12 = 1.0 / (x2 + x1 * g12)
    first = tau21 * r21 * r21
    second = tau12 * g12 * r12 * r12
    # ln gamma1 = x2^2 (tau21 (G21/(x1+x2 G21))^2 + tau12 G12/(x2+x1 G12)^2), and alike for 2.
    ln_gamma1 = x2 * x2 * (first + second)
    ln_gamma2 = x1 * x1 * (second * g12 + first / g21)
    return ln_gamma1, ln_gamma2


def _weighted_sum(weights: Sequence[Any], values: Sequence[Any]) -> Any:
    total = weights[0] * values[0]
    for weight, value in zip(weights[1:], values[1:], strict=True):
        total = total + weight * value
    return total
