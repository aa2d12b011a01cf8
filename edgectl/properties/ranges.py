"""Range checks for the border, where temperatures are plain numbers.

The correlations themselves never check: a CasADi symbol has no value to
compare, and a solver may pass through points outside the range on its way.
"""

from __future__ import annotations

import math


class OutsideRangeError(ValueError):
    """A temperature outside the range in which a correlation was fitted.

    Parameters
    ----------
    component : str
        Name of the component.
    quantity : str
        What was to be computed, for example `vapour pressure`.
    temperature_k : float
        The temperature asked for [K].
    low_k : float
        Lower end of the validity range [K].
    high_k : float
        Upper end of the validity range [K].
    """

    def __init__(
        self, component: str, quantity: str, temperature_k: float, low_k: float, high_k: float
    ) -> None:
        super().__init__(
            f"{quantity} of {component}: {temperature_k:.6g} K is outside"
            f" {low_k:.6g} to {high_k:.6g} K"
        )
        self.component = component
        self.quantity = quantity
        self.temperature_k = temperature_k
        self.low_k = low_k
        self.high_k = high_k


def check_range(
    component: str, quantity: str, temperature_k: float, low_k: float, high_k: float
) -> None:
    """Refuse a temperature outside a correlation's validity range.

    Parameters
    ----------
    component : str
        Name of the component, for the message.
    quantity : str
        What is to be computed, for the message.
    temperature_k : float
        Temperature [K]; a number, never a symbol.
    low_k : float
        Lower end of the range [K].
    high_k : float
        Upper end of the range [K].

    Raises
    ------
    OutsideRangeError
        The temperature lies outside the range, or is not finite.
    """
    # Written so that NaN fails: every comparison with NaN is false.
    inside = low_k <= temperature_k <= high_k
    if not inside or not math.isfinite(temperature_k):
        raise OutsideRangeError(component, quantity, temperature_k, low_k, high_k)
