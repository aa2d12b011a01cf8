"""The column's future for given moves: the model integrated along the grid."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from edgectl.estimation.dynamics import LoopedColumn
from edgectl.optimisation.problem import Goals, Situation, interval_drive, interval_moves

Vector = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Rollout:
    """A simulated future."""

    points: Vector
    """Unscaled Radau points, shape (intervals, 2 size)."""
    coordinates: Vector
    """CVs at the interval ends in planning coordinates without bias, shape (cvs, intervals)."""


def roll_out(
    looped: LoopedColumn,
    goals: Goals,
    situation: Situation,
    moves: Vector,
    near: Vector | None = None,
) -> Rollout:
    """Integrate the looped column over the horizon.

    Parameters
    ----------
    looped : LoopedColumn
        The model.
    goals : Goals
        Grid and CVs.
    situation : Situation
        Start and drives.
    moves : array, shape (mvs, moves)
        In the MVs' units.
    near : array, shape (intervals, 2 size), optional
        Points of a similar future: a better guess for each step, the same answer.

    Returns
    -------
    Rollout
        Points and CVs.

    Raises
    ------
    StepFailedError
        The model cannot follow these moves with finite numbers.
    """
    values = interval_moves(goals, situation.positions, moves)
    start = situation.start[looped.state_at]
    guess = np.tile(situation.start, 2)
    points = np.empty((goals.intervals, 2 * looped.size))
    for k, hours in enumerate(goals.grid_h):
        drive = interval_drive(goals, situation, list(values[:, k]), k)
        points[k] = looped.advance(start, guess if near is None else near[k], drive, hours)
        end = points[k, looped.size :]
        start = end[looped.state_at]
        guess = np.tile(end, 2)
    ends = points[:, looped.size :]
    coordinates = np.array(
        [[float(cv.output.coordinate(np, looped, end)) for end in ends] for cv in goals.cvs]
    )
    return Rollout(points, coordinates)
