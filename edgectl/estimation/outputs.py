"""Controlled variables as the model sees them: from a point in time to a unit."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from edgectl.column.layout import mass_fraction
from edgectl.estimation.dynamics import LoopedColumn

KELVIN = 273.15
SMALLEST_IMPURITY = 1e-9
"""Mass fraction [-] below which a logarithm is taken of this instead."""


@dataclass(frozen=True, slots=True)
class Output:
    """What one CV is to the column, and its planning coordinate.

    Parameters
    ----------
    kind : str
        `bottoms_light_impurity`, `distillate_heavy_impurity` or `tray_temperature`.
    scale : float
        The CV's unit per SI unit of its quantity, e.g. 1e6 for ppm [-].
    """

    name: str
    kind: str
    logarithmic: bool
    scale: float
    stage: int = 0

    def coordinate(self, xp: Any, looped: LoopedColumn, point: Any) -> Any:
        """The planning coordinate from an unscaled point vector [-]."""
        if self.kind == "tray_temperature":
            return point[int(looped.temp_at[self.stage - 1])] - KELVIN
        column = looped.model.column
        if self.kind == "bottoms_light_impurity":
            fraction = mass_fraction(point[int(looped.light_at[-1])], column)
        else:
            fraction = 1.0 - mass_fraction(point[0], column)
        return xp.log(fraction * self.scale) if self.logarithmic else fraction * self.scale

    def to_coordinate(self, value: float) -> float:
        """A value in the CV's unit as a planning coordinate; a logarithm never sees zero."""
        if self.logarithmic:
            return math.log(max(value, SMALLEST_IMPURITY * self.scale))
        return value

    def to_unit(self, coordinate: float) -> float:
        """The other way round."""
        return math.exp(coordinate) if self.logarithmic else coordinate
