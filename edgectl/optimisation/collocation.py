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

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from edgectl.estimation.dynamics import DRIVES, LoopedColumn
from edgectl.optimisation.problem import NO_LIMIT, Goals, Situation, Solution, interval_drive
from edgectl.optimisation.rollout import roll_out

Vector = NDArray[np.float64]

FRACTION_FLOOR = 1e-9
"""Mole fractions stay above this, so that a logarithm never sees zero."""


_IPOPT = {
    "print_level": 0,
    "sb": "yes",
    # The programme is scaled by hand, and its KKT matrix is nearly block-banded: a
    # minimum-degree ordering without further scaling factors it several times faster.
    "nlp_scaling_method": "none",
    "mumps_pivot_order": 0,
    "mumps_permuting_scaling": 0,
    "mumps_scaling": 0,
    # A rollout is feasible and near the optimum: start close to the bounds, with
    # least-squares multipliers and a small barrier. Warm solves take one to six steps.
    "mu_strategy": "monotone",
    "mu_init": 1e-5,
    "bound_mult_init_method": "mu-based",
    "bound_push": 1e-6,
    "bound_frac": 1e-6,
    "slack_bound_push": 1e-6,
    "slack_bound_frac": 1e-6,
    "bound_relax_factor": 1e-10,
}


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
        self._interval = _Interval(looped, goals)
        self._deadline = _SoftDeadline(self._interval, goals, wall)
        options = {"max_iter": max_iterations, "tol": tolerance}
        self._solver = _assemble(self._interval, goals, options, self._deadline)

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


class _Interval:
    """One interval's residuals, cost and their derivatives, as CasADi functions."""

    def __init__(self, looped: LoopedColumn, goals: Goals) -> None:
        self.looped, self.goals = looped, goals
        cvs, size = len(goals.cvs), looped.size
        self.equalities = 2 * size
        self.inequalities = 2 * cvs
        self.block = 2 * size + 2 * cvs
        self.controls = len(goals.mvs)
        self.parameters = DRIVES + 3 + 5 * cvs
        start = ca.SX.sym("start", looped.states)
        block = ca.SX.sym("block", self.block)
        control = ca.SX.sym("control", self.controls)
        parameter = ca.SX.sym("parameter", self.parameters)
        rows, cost = self._equations(start, block, control, parameter)
        multiplier = ca.SX.sym("multiplier", rows.numel())
        factor = ca.SX.sym("factor")
        own = ca.vertcat(block, control)
        seen = ca.vertcat(start, block, control)
        self.value = ca.Function("value", [start, block, control, parameter], [rows, cost])
        self.slope = ca.Function(
            "slope",
            [start, block, control, parameter],
            [ca.jacobian(rows, seen), ca.gradient(cost, own)],
        )
        lagrangian = factor * cost + ca.dot(multiplier, rows)
        hessian = ca.triu(ca.hessian(lagrangian, own)[0])
        self.curvature = ca.Function(
            "curvature", [block, control, parameter, factor, multiplier], [hessian]
        )

    @property
    def rows(self) -> int:
        return self.equalities + self.inequalities

    def lower(self, intervals: int) -> Vector:
        """Lower bounds of the rows: equalities, then rows that need only stay below zero."""
        one = np.concatenate([np.zeros(self.equalities), np.full(self.inequalities, -np.inf)])
        return np.tile(one, intervals)

    def _equations(self, start: Any, block: Any, control: Any, parameter: Any) -> tuple[Any, Any]:
        looped, goals = self.looped, self.goals
        size, cvs = looped.size, len(goals.cvs)
        drive = parameter[:DRIVES]
        hours, weight, kmol_per_unit = (parameter[DRIVES + k] for k in range(3))
        bias, high, low, setpoint, tracked = (
            parameter[DRIVES + 3 + k * cvs : DRIVES + 3 + (k + 1) * cvs] for k in range(5)
        )
        entries = [drive[k] for k in range(DRIVES)]
        cost: Any = 0.0
        for j, mv in enumerate(goals.mvs):
            value = control[j] * mv.scale
            if mv.kind == "reflux":
                entries[0] = value * kmol_per_unit
            else:
                entries[1] = value + 273.15
            cost += weight * mv.price * control[j]
        points = [block[:size], block[size : 2 * size]]
        slack = block[2 * size :]
        rows = looped.interval_residual(start, points, ca.vertcat(*entries), hours)
        end = points[1] * ca.DM(looped.scale)
        soft = []
        for i, cv in enumerate(goals.cvs):
            path = cv.output.coordinate(ca, looped, end) + bias[i]
            cost += weight * cv.weight * tracked[i] * (path - setpoint[i]) ** 2
            soft += [path - high[i] - slack[i]]
            for s in (slack[i], slack[cvs + i]):
                cost += cv.soft_linear * s + cv.soft_quadratic * s**2
        soft += [
            low[i] - cv.output.coordinate(ca, looped, end) - bias[i] - slack[cvs + i]
            for i, cv in enumerate(goals.cvs)
        ]
        return ca.vertcat(rows, *soft), cost


class _SoftDeadline(ca.Callback):
    """Stops IPOPT after an iteration that ends past the soft deadline; it keeps its iterate."""

    def __init__(self, interval: _Interval, goals: Goals, wall: Callable[[], float]) -> None:
        ca.Callback.__init__(self)
        variables = goals.intervals * interval.block + interval.controls * goals.moves
        rows = goals.intervals * interval.rows + interval.controls * goals.moves
        parameters = (
            goals.intervals * interval.parameters + interval.looped.states + interval.controls
        )
        self._sizes = {
            "x": variables,
            "f": 1,
            "g": rows,
            "lam_x": variables,
            "lam_g": rows,
            "lam_p": parameters,
        }
        self._wall = wall
        self._ends = 0.0
        self.construct("soft_deadline", {})

    def start(self, seconds: float) -> None:
        """Begin counting."""
        self._ends = self._wall() + seconds

    def get_n_in(self) -> int:
        return int(ca.nlpsol_n_out())

    def get_n_out(self) -> int:
        return 1

    def get_name_in(self, index: int) -> str:
        return str(ca.nlpsol_out(index))

    def get_sparsity_in(self, index: int) -> Any:
        size = self._sizes[ca.nlpsol_out(index)]
        return ca.Sparsity.dense(size, 1)

    def eval(self, arg: Any) -> list[Any]:
        return [1 if self._wall() > self._ends else 0]


def _assemble(
    interval: _Interval, goals: Goals, options: dict[str, Any], deadline: _SoftDeadline
) -> Any:
    """IPOPT on all intervals, with the block derivatives put in their places."""
    K, looped = goals.intervals, interval.looped
    nb, nu, npar = interval.block, interval.controls, interval.parameters
    x = ca.MX.sym("x", K * nb + nu * goals.moves)
    p = ca.MX.sym("p", K * npar + looped.states + nu)
    factor = ca.MX.sym("factor")
    multiplier = ca.MX.sym("multiplier", K * interval.rows + nu * goals.moves)
    blocks = ca.reshape(x[: K * nb], nb, K)
    moves = ca.reshape(x[K * nb :], nu, goals.moves)
    parameters = ca.reshape(p[: K * npar], npar, K)
    initial, positions = p[K * npar : K * npar + looped.states], p[-nu:]
    ends = [int(looped.size + at) for at in looped.state_at]
    starts = ca.horzcat(initial, blocks[ends, : K - 1])
    controls = ca.horzcat(
        *(positions if goals.block(k) < 0 else moves[:, goals.block(k)] for k in range(K))
    )
    rows, costs = interval.value.map(K)(starts, blocks, controls, parameters)
    steps = moves - ca.horzcat(positions, moves[:, :-1])
    weights = ca.DM([mv.move_weight for mv in goals.mvs])
    move_cost = ca.sum1(ca.sum2(ca.repmat(weights, 1, goals.moves) * steps**2))
    cost = ca.sum2(costs) + move_cost
    program: Any = {"x": x, "p": p, "f": cost, "g": ca.vertcat(ca.vec(rows), ca.vec(steps))}

    places = _Places(interval, goals)
    slopes, gradients = interval.slope.map(K)(starts, blocks, controls, parameters)
    jacobian = ca.vertcat(places.jacobian(slopes), ca.jacobian(ca.vec(steps), x))
    gradient = places.gradient(gradients) + ca.gradient(move_cost, x)
    curvatures = interval.curvature.map(K)(
        blocks,
        controls,
        parameters,
        ca.repmat(factor, 1, K),
        ca.reshape(multiplier[: K * interval.rows], interval.rows, K),
    )
    hessian = places.hessian(curvatures) + ca.triu(factor * ca.hessian(move_cost, x)[0])
    settings: Any = {
        "print_time": False,
        "grad_f": ca.Function("grad_f", [x, p], [cost, gradient]),
        "jac_g": ca.Function("jac_g", [x, p], [program["g"], jacobian]),
        "hess_lag": ca.Function("hess_lag", [x, p, factor, multiplier], [hessian]),
        "calc_lam_p": False,
        "iteration_callback": deadline,
        "ipopt": _IPOPT | options,
    }
    return ca.nlpsol("plan", "ipopt", program, settings)


class _Places:
    """Where the entries of the interval blocks stand in the whole programme."""

    def __init__(self, interval: _Interval, goals: Goals) -> None:
        self.interval, self.goals = interval, goals
        looped = interval.looped
        K, nb, nu = goals.intervals, interval.block, interval.controls
        self.variables = K * nb + nu * goals.moves
        self.rows = K * interval.rows
        self._columns = []
        for k in range(K):
            ends = looped.size + looped.state_at + (k - 1) * nb
            start = ends if k > 0 else np.full(looped.states, -1)
            block = np.arange(nb) + k * nb
            move = goals.block(k)
            control = np.full(nu, -1) if move < 0 else np.arange(nu) + K * nb + move * nu
            self._columns.append(np.concatenate([start, block, control]))

    def _gather(self, entries: Any, sparsity: Any, row_of: Any, column_of: Any, shape: Any) -> Any:
        """Sum mapped block nonzeros into one sparse matrix of `shape`."""
        local_rows, local_columns = (np.array(v) for v in sparsity.get_triplet())
        rows, columns, kept = [], [], []
        for k in range(self.goals.intervals):
            r, c = row_of(k, local_rows), column_of(k, local_columns)
            good = (r >= 0) & (c >= 0)
            rows.append(r[good])
            columns.append(c[good])
            kept.append(np.flatnonzero(good) + k * local_rows.size)
        all_rows, all_columns = np.concatenate(rows), np.concatenate(columns)
        order, inverse = np.unique(all_columns * shape[0] + all_rows, return_inverse=True)
        whole = ca.Sparsity.triplet(
            shape[0],
            shape[1],
            [int(v) for v in order % shape[0]],
            [int(v) for v in order // shape[0]],
        )
        source = np.concatenate(kept)
        spread = ca.DM(
            ca.Sparsity.triplet(
                order.size,
                local_rows.size * self.goals.intervals,
                [int(v) for v in inverse],
                [int(v) for v in source],
            ),
            1.0,
        )
        flat = _nonzeros(entries, sparsity, self.goals.intervals)
        return _with_sparsity(whole, ca.mtimes(spread, flat))

    def jacobian(self, slopes: Any) -> Any:
        rows = self.interval.rows
        return self._gather(
            slopes,
            self.interval.slope.sparsity_out(0),
            lambda k, r: r + k * rows,
            lambda k, c: self._columns[k][c],
            (self.rows, self.variables),
        )

    def gradient(self, gradients: Any) -> Any:
        states = self.interval.looped.states
        return self._gather(
            gradients,
            self.interval.slope.sparsity_out(1),
            lambda k, r: self._columns[k][states + r],
            lambda k, c: c,
            (self.variables, 1),
        )

    def hessian(self, curvatures: Any) -> Any:
        states = self.interval.looped.states
        return self._gather(
            curvatures,
            self.interval.curvature.sparsity_out(0),
            lambda k, r: self._columns[k][states + r],
            lambda k, c: self._columns[k][states + c],
            (self.variables, self.variables),
        )


def _nonzeros(entries: Any, sparsity: Any, count: int) -> Any:
    """All nonzeros of `count` blocks side by side as one dense column."""
    expected = sparsity.nnz() * count
    flat = ca.MX(entries)
    assert flat.nnz() == expected
    return ca.vertcat(flat.nz[:])


def _with_sparsity(sparsity: Any, nonzeros: Any) -> Any:
    return ca.MX(sparsity, nonzeros)
