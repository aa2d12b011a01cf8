"""What the property functions ask of the module handed to them as `xp`."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Final, Protocol

GAS_CONSTANT_J_MOL_K: Final = 8.314462618
"""Molar gas constant, exact to the digits given (CODATA 2018)."""


class Mathematics(Protocol):
    """The three functions a correlation may use: numpy, casadi and math all offer them."""

    @property
    def exp(self) -> Callable[..., Any]: ...

    @property
    def log(self) -> Callable[..., Any]: ...

    @property
    def sqrt(self) -> Callable[..., Any]: ...
