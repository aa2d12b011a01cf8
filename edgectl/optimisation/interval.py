"""One interval of the collocated column: residuals, cost and their derivatives.

Everything the whole programme needs is formed here once and mapped over the
grid by `program.py`.
"""

from __future__ import annotations

from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from edgectl.estimation.dynamics import DRIVES, LoopedColumn
from edgectl.estimation.outputs import KELVIN
from edgectl.optimisation.problem import Goals

Vector = NDArray[np.float64]


class Interval:
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
                entries[1] = value + KELVIN
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
