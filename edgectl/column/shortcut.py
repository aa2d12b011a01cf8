"""The shortcut that bounds a column before any tray is solved."""

from __future__ import annotations

import math


def minimum_stages(
    distillate_ratio: float, bottoms_ratio: float, relative_volatility: float
) -> float:
    """Equilibrium stages that the separation needs at total reflux, reboiler included.

    Parameters
    ----------
    distillate_ratio : float
        Light key over heavy key in the distillate, mole per mole [-], positive.
    bottoms_ratio : float
        The same in the bottoms [-], positive.
    relative_volatility : float
        Of the light to the heavy key [-], greater than one; where it varies, the
        geometric mean of top and bottom is usual.

    Returns
    -------
    float
        Stages [-], not rounded.

    Raises
    ------
    ValueError
        A ratio is not positive, or the relative volatility is not above one.

    References
    ----------
    Fenske, M. R. (1932), Ind. Eng. Chem. 24, 482-485 (citation from memory).

    Examples
    --------
    >>> round(minimum_stages(99.0, 1.0 / 99.0, 1.5), 4)
    22.6659
    """
    if not (distillate_ratio > 0.0 and bottoms_ratio > 0.0):
        raise ValueError(
            f"key ratios must be positive: distillate {distillate_ratio}, bottoms {bottoms_ratio}"
        )
    if not relative_volatility > 1.0:
        raise ValueError(f"relative volatility must be above 1: {relative_volatility}")
    return math.log(distillate_ratio / bottoms_ratio) / math.log(relative_volatility)
