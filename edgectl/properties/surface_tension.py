"""Surface tension of liquid mixtures."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any


def surface_tension_n_m(values_n_m: Sequence[float], x: Sequence[Any]) -> Any:
    """Surface tension by linear mixing in mole fractions.

    Parameters
    ----------
    values_n_m : sequence of float, n entries
        Pure-component surface tensions near the temperature of interest [N/m].
    x : sequence of n entries, each of any one shape
        Liquid mole fractions, summing to one [-].

    Returns
    -------
    float, array or symbol, shape of the entries of `x`
        Surface tension [N/m]. Too high for aqueous methanol, whose curve sags;
        good enough for a flooding fraction, which takes its 0.2nd power.

    References
    ----------
    Linear mixing, a rule of thumb of the trade (from memory).
    """
    total = values_n_m[0] * x[0]
    for value, fraction in zip(values_n_m[1:], x[1:], strict=True):
        total = total + value * fraction
    return total
