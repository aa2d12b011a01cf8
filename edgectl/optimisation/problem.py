"""What is asked of an engine: the goals, the grid, and one cycle's situation.

Costs are formed in planning coordinates: a logarithm for an impurity, the unit
itself otherwise. An engine sees `Situation` and returns `Solution`; it knows no
tags and no clock.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from edgectl.estimation.dynamics import Drive
from edgectl.estimation.outputs import KELVIN, Output

Vector = NDArray[np.float64]

NO_LIMIT = 1e3
"""Stands for an absent limit: far outside every planning coordinate."""


@dataclass(frozen=True, slots=True)
class CvGoal:
    """One controlled variable of the plan."""

    output: Output
    weight: float
    """Cost of a squared distance from the setpoint, in the planning coordinate."""
    soft_linear: float
    soft_quadratic: float


@dataclass(frozen=True, slots=True)
class MvGoal:
    """One manipulated variable of the plan."""

    name: str
    kind: str
    """`reflux` or `tray_temperature_setpoint`."""
    scale: float
    move_weight: float
    price: float
    max_move: float
    """From one move to the next."""


@dataclass(frozen=True, slots=True)
class Goals:
    """The fixed part of the planning problem."""

    grid_h: tuple[float, ...]
    """Interval lengths [h]."""
    move_interval: tuple[int, ...]
    """Index of the interval in which each move begins; interval 0 repeats the present position."""
    mvs: tuple[MvGoal, ...]
    cvs: tuple[CvGoal, ...]

    @property
    def intervals(self) -> int:
        return len(self.grid_h)

    @property
    def moves(self) -> int:
        return len(self.move_interval)

    def block(self, interval: int) -> int:
        """Which move an interval belongs to; -1 before the first."""
        return sum(1 for begin in self.move_interval if begin <= interval) - 1

    @property
    def weights(self) -> Vector:
        """Each interval's share of the horizon [-], shape (intervals,)."""
        grid = np.array(self.grid_h)
        share: Vector = grid / grid.sum()
        return share


@dataclass(frozen=True, slots=True)
class Situation:
    """One cycle's numbers."""

    start: Vector
    """Unscaled point vector (algebraics included), shape (size,)."""
    drive: Drive
    """With the present reflux and reference; `reflux_kmol_h` is overwritten by the moves."""
    positions: Vector
    """Present MV positions in their units, shape (mvs,)."""
    low: Vector
    high: Vector
    """MV limits per move, shape (mvs, moves); equal to the position when fixed."""
    feed_ratio: Vector
    """Per interval: filtered feed over its present value, which the ratio station follows [-]."""
    kmol_per_kg: float
    """Of the reflux liquid."""
    bias: Vector
    """Per CV, in planning coordinates."""
    cv_low: Vector
    cv_high: Vector
    cv_setpoint: Vector
    """Per CV, in planning coordinates; NaN for no setpoint."""
    in_service: Vector
    """1 or 0 per CV."""


@dataclass(frozen=True, slots=True)
class Solution:
    """An engine's answer."""

    moves: Vector
    """Shape (mvs, moves), in the MVs' units."""
    status: str
    converged: bool
    iterations: int
    cost: float
    points: Vector
    """The engine's own trajectory, unscaled, shape (intervals, 2 size)."""


class Engine(Protocol):
    """A way of solving the planning problem."""

    name: str

    def solve(self, situation: Situation, first_guess: Vector, soft_deadline_s: float) -> Solution:
        """Best moves found from a first guess of shape (mvs, moves)."""


def interval_moves(goals: Goals, positions: Vector, moves: Vector) -> Vector:
    """MV values in each interval, shape (mvs, intervals)."""
    columns = [
        positions if goals.block(k) < 0 else moves[:, goals.block(k)]
        for k in range(goals.intervals)
    ]
    return np.stack(columns, axis=1)


def interval_drive(goals: Goals, situation: Situation, values: Sequence[Any], k: int) -> Drive:
    """The drive of interval `k` when the MVs have `values` (numbers or symbols)."""
    changes: dict[str, Any] = {}
    for mv, value in zip(goals.mvs, values, strict=True):
        if mv.kind == "reflux":
            changes["reflux_kmol_h"] = value * situation.feed_ratio[k] * situation.kmol_per_kg
        else:
            changes["reference_k"] = value + KELVIN
    return replace(situation.drive, **changes)


def plan_cost(goals: Goals, situation: Situation, moves: Vector, coordinates: Vector) -> float:
    """The cost that every engine minimises, from a rollout's CVs.

    Parameters
    ----------
    moves : array, shape (mvs, moves)
        In the MVs' units.
    coordinates : array, shape (cvs, intervals)
        Model CVs at the interval ends, planning coordinates, bias not yet added.

    Returns
    -------
    float
        Cost [-].
    """
    values = interval_moves(goals, situation.positions, moves)
    weights = goals.weights
    cost = 0.0
    for i, cv in enumerate(goals.cvs):
        if not situation.in_service[i]:
            continue
        path = coordinates[i] + situation.bias[i]
        if not math.isnan(situation.cv_setpoint[i]):
            cost += cv.weight * float(weights @ (path - situation.cv_setpoint[i]) ** 2)
        over = np.maximum(0.0, path - situation.cv_high[i])
        under = np.maximum(0.0, situation.cv_low[i] - path)
        for excess in (over, under):
            cost += float(np.sum(cv.soft_linear * excess + cv.soft_quadratic * excess**2))
    for j, mv in enumerate(goals.mvs):
        cost += mv.price * float(weights @ values[j]) / mv.scale
        steps = np.diff(np.concatenate([[situation.positions[j]], moves[j]])) / mv.scale
        cost += mv.move_weight * float(steps @ steps)
    return cost
