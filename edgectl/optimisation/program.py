"""The collocation programme: all intervals in one, for IPOPT.

The block derivatives of `interval.py` are put in their places in the whole
Jacobian and Hessian, and a soft deadline may stop the iterations.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import casadi as ca
import numpy as np

from edgectl.optimisation.interval import Interval
from edgectl.optimisation.problem import Goals

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


class SoftDeadline(ca.Callback):
    """Stops IPOPT when another iteration would end past the deadline; it keeps its iterate."""

    def __init__(self, interval: Interval, goals: Goals, wall: Callable[[], float]) -> None:
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
        self._ends = self._last = 0.0
        self.construct("soft_deadline", {})

    def start(self, seconds: float) -> None:
        """Begin counting."""
        self._last = self._wall()
        self._ends = self._last + seconds

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
        now = self._wall()
        took, self._last = now - self._last, now
        return [1 if now + took > self._ends else 0]


def assemble(
    interval: Interval, goals: Goals, options: dict[str, Any], deadline: SoftDeadline
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

    def __init__(self, interval: Interval, goals: Goals) -> None:
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
