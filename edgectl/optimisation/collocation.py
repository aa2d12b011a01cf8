"""The reference engine: direct collocation, solved by IPOPT.

Every Radau point of every interval is a variable of one large sparse programme.
The derivatives are formed once for one interval and mapped over the grid: the
first and second derivatives of a stage-wise model are block-sparse, and letting
a general tool find that out for the whole programme costs minutes at start-up.

References
----------
Biegler, L. T., Nonlinear Programming (2010), ch. 10 (collocation);
Waechter, A. & Biegler, L. T. (2006), Math. Program. 106, 25-57 (IPOPT).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from edgectl.estimation.dynamics import LoopedColumn
from edgectl.optimisation.interval import Interval
from edgectl.optimisation.problem import NO_LIMIT, Goals, Situation, Solution, interval_drive
from edgectl.optimisation.program import SoftDeadline, assemble
from edgectl.optimisation.rollout import roll_out

Vector = NDArray[np.float64]

FRACTION_FLOOR = 1e-9
"""Mole fractions stay above this, so that a logarithm never sees zero."""


class CollocationEngine:
    """IPOPT on the collocated column.

    Parameters
    ----------
    looped : LoopedColumn
        The model.
    goals : Goals
        Grid, MVs, CVs.
    max_iterations : int
        IPOPT's limit.
    wall : callable
        Monotonic seconds, for the soft deadline.
    tolerance : float
        IPOPT's convergence tolerance [-].
    """

    name = "collocation"

    def __init__(
        self,
        looped: LoopedColumn,
        goals: Goals,
        max_iterations: int,
        wall: Callable[[], float],
        tolerance: float = 1e-4,
    ) -> None:
        self.looped = looped
        self.goals = goals
        self._points = 2 * looped.size
        self._slacks = 2 * len(goals.cvs)
        self._block = self._points + self._slacks
        self._controls = len(goals.mvs)
        self._interval = Interval(looped, goals)
        self._deadline = SoftDeadline(self._interval, goals, wall)
        options = {"max_iter": max_iterations, "tol": tolerance}
        self._solver = assemble(self._interval, goals, options, self._deadline)

    def solve(self, situation: Situation, first_guess: Vector, soft_deadline_s: float) -> Solution:
        """Solve from the rollout of a first guess; see `Engine`."""
        goals, looped = self.goals, self.looped
        guess = np.clip(first_guess, situation.low, situation.high)
        rollout = roll_out(looped, goals, situation, guess)
        slack = self._slacks_of(situation, rollout.coordinates)
        scaled = rollout.points / np.tile(looped.scale, 2)
        blocks = np.concatenate([scaled, slack], axis=1)
        scale = np.array([mv.scale for mv in goals.mvs])[:, None]
        start = np.concatenate([blocks.ravel(), (guess / scale).T.ravel()])
        lower, upper = self._bounds(situation)
        self._deadline.start(soft_deadline_s)
        answer = self._solver(
            x0=start,
            p=self._parameters(situation),
            lbx=lower,
            ubx=upper,
            lbg=np.concatenate([self._interval.lower(goals.intervals), -self._longest_moves()]),
            ubg=np.concatenate(
                [np.zeros(self._interval.rows * goals.intervals), self._longest_moves()]
            ),
        )
        statistics = self._solver.stats()
        found = np.array(answer["x"]).ravel()
        blocks = found[: goals.intervals * self._block].reshape(goals.intervals, self._block)
        moves = found[-self._controls * goals.moves :]
        moves = moves.reshape(goals.moves, self._controls).T * scale
        return Solution(
            moves=np.clip(moves, situation.low, situation.high),
            status=str(statistics["return_status"]),
            converged=bool(statistics["success"]),
            iterations=int(statistics["iter_count"]),
            cost=float(answer["f"]),
            points=blocks[:, : self._points] * np.tile(looped.scale, 2),
        )

    def _longest_moves(self) -> Vector:
        """Bound on each move, scaled, in the order of the move rows."""
        one = np.array([mv.max_move / mv.scale for mv in self.goals.mvs])
        return np.tile(one, self.goals.moves)

    def _slacks_of(self, situation: Situation, coordinates: Vector) -> Vector:
        """The slack each soft row needs along a rollout, shape (intervals, slacks)."""
        path = coordinates + situation.bias[:, None]
        over = np.maximum(0.0, path - situation.cv_high[:, None])
        under = np.maximum(0.0, situation.cv_low[:, None] - path)
        return np.concatenate([over, under]).T

    def _bounds(self, situation: Situation) -> tuple[Vector, Vector]:
        looped, goals = self.looped, self.goals
        low = np.full(looped.size, -np.inf)
        high = np.full(looped.size, np.inf)
        fractions = np.concatenate([looped.light_at, looped.vapour_light_at])
        low[fractions], high[fractions] = FRACTION_FLOOR, 1.0 - FRACTION_FLOOR
        low[looped.vapour_at] = 0.0
        low[looped.holdup_at] = 0.05
        block_low = np.concatenate([low, low, np.zeros(self._slacks)])
        block_high = np.concatenate([high, high, np.full(self._slacks, np.inf)])
        scale = np.array([mv.scale for mv in goals.mvs])[:, None]
        return (
            np.concatenate(
                [np.tile(block_low, goals.intervals), (situation.low / scale).T.ravel()]
            ),
            np.concatenate(
                [np.tile(block_high, goals.intervals), (situation.high / scale).T.ravel()]
            ),
        )

    def _parameters(self, situation: Situation) -> Any:
        """One column per interval, then the start state and the positions."""
        goals, looped = self.goals, self.looped
        columns = []
        present = list(situation.positions)
        for k, (hours, weight) in enumerate(zip(goals.grid_h, goals.weights, strict=True)):
            drive = interval_drive(goals, situation, present, k)
            setpoint = np.where(np.isnan(situation.cv_setpoint), 0.0, situation.cv_setpoint)
            tracked = np.where(np.isnan(situation.cv_setpoint), 0.0, situation.in_service)
            columns.append(
                np.concatenate(
                    [
                        drive.vector(),
                        [hours, weight, situation.feed_ratio[k] * situation.kmol_per_kg],
                        situation.bias,
                        np.where(situation.in_service > 0, situation.cv_high, NO_LIMIT),
                        np.where(situation.in_service > 0, situation.cv_low, -NO_LIMIT),
                        setpoint,
                        tracked,
                    ]
                )
            )
        start = situation.start[looped.state_at] / looped.scale[looped.state_at]
        scale = np.array([mv.scale for mv in goals.mvs])
        return np.concatenate([np.concatenate(columns), start, situation.positions / scale])
