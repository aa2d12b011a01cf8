"""The column under its tray-temperature loop, as functions that can be solved.

The duty follows a PI law on one tray's temperature:
Q = I + K (T_ref - T_tray), dI/dt = K/tau (T_ref - T_tray). With the base layer's
tuning and its setpoint this is the plant's own loop; with a tight tuning and the
*measured* temperature as reference it drives the model along with the plant.

One vector holds a point in time, stage by stage: the drum's composition, then
(composition, holdup, temperature, vapour composition, vapour flow) of each tray,
the reboiler's four, and the loop's (integral, duty). Radau IIA of order 3 (two
points) takes a step.

References
----------
Hairer, E. & Wanner, G., Solving Ordinary Differential Equations II, 2nd ed.
(1996), table IV.5.5 (Radau IIA, s = 2).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from functools import cached_property
from typing import Any

import casadi as ca
import numpy as np
from numpy.typing import NDArray

from edgectl.column.assembly import column_rates
from edgectl.column.layout import ColumnModel, Inputs, StageState
from edgectl.column.steady import SteadyState

Vector = NDArray[np.float64]

RADAU_A = ((5.0 / 12.0, -1.0 / 12.0), (3.0 / 4.0, 1.0 / 4.0))
"""Weights of the rates at the points t + h/3 and t + h."""

DUTY_SCALE_KW = 1000.0
VAPOUR_SCALE_KMOL_H = 100.0
TEMP_SCALE_K = 10.0


class StepFailedError(ArithmeticError):
    """The implicit step did not converge to finite numbers."""


@dataclass(frozen=True, slots=True)
class Drive:
    """Everything that drives the column over one step; the order is the parameter vector's."""

    reflux_kmol_h: Any
    reference_k: Any
    """Setpoint, or measured tray temperature when tracking [K]."""
    feed_kmol_h: Any
    feed_light: Any
    feed_temp_k: Any
    drum_pressure_kpa: Any
    column_dp_kpa: Any
    efficiency: Any
    gain_kw_k: Any
    reset_h: Any

    def vector(self) -> list[Any]:
        return [getattr(self, f.name) for f in fields(self)]


DRIVES = len(fields(Drive))


class LoopedColumn:
    """A column with its tray-temperature loop: layout, equations, implicit step.

    Parameters
    ----------
    steady : SteadyState
        Gives the column, its weirs and the scales.
    loop_stage : int
        Stage whose temperature the loop holds.
    """

    def __init__(self, steady: SteadyState, loop_stage: int) -> None:
        self.steady = steady
        self.model: ColumnModel = steady.model
        self.loop_stage = loop_stage
        self.stages = self.model.column.stages
        self._build_layout()

    def _build_layout(self) -> None:
        """Positions of every variable; the only place in the worker that knows them."""
        n = self.stages
        last = 1 + 5 * (n - 2)
        self.light_at = np.array([0] + [1 + 5 * i for i in range(n - 2)] + [last])
        self.holdup_at = np.array([2 + 5 * i for i in range(n - 2)])
        self.temp_at = np.array([3 + 5 * i for i in range(n - 2)] + [last + 1])
        self.vapour_light_at = np.array([4 + 5 * i for i in range(n - 2)] + [last + 2])
        self.vapour_at = np.array([5 + 5 * i for i in range(n - 2)] + [last + 3])
        self.integral_at = last + 4
        self.duty_at = last + 5
        self.size = last + 6
        """Variables of one point in time."""
        self.state_at = np.sort(np.concatenate([self.light_at, self.holdup_at, [self.integral_at]]))
        """Positions of the differential states within a point."""
        self.states = self.state_at.size
        scale = np.ones(self.size)
        scale[self.holdup_at] = np.array(self.model.weirs.holdup_kmol)
        scale[self.temp_at] = TEMP_SCALE_K
        scale[self.vapour_at] = VAPOUR_SCALE_KMOL_H
        scale[[self.integral_at, self.duty_at]] = DUTY_SCALE_KW
        self.scale: Vector = scale
        """Unscaled = scaled x scale."""

    @cached_property
    def steady_point(self) -> Vector:
        """The operating point as an unscaled point vector, shape (size,)."""
        return self.point(self.steady.states, self.steady.inputs.duty_kw)

    def point(self, states: Sequence[StageState], duty_kw: float) -> Vector:
        """Pack stage states into a point vector, integral equal to the duty."""
        vector = np.zeros(self.size)
        vector[self.light_at] = [state.light for state in states]
        vector[self.holdup_at] = [state.holdup for state in states[1:-1]]
        vector[self.temp_at] = [state.temp_k for state in states[1:]]
        vector[self.vapour_light_at] = [state.vapour_light for state in states[1:]]
        vector[self.vapour_at] = [state.vapour for state in states[1:]]
        vector[[self.integral_at, self.duty_at]] = duty_kw
        return vector

    def tray_temp_k(self, point: Any) -> Any:
        """Temperature of the controlled tray in a point vector [K]."""
        return point[int(self.temp_at[self.loop_stage - 1])]

    def _stage_states(self, point: Any) -> list[StageState]:
        column = self.model.column
        drum = StageState(
            point[0], column.drum_holdup_kmol, column.drum_temperature_k, point[0], 0.0
        )
        trays = [StageState(*(point[int(at + k)] for k in range(5))) for at in self.light_at[1:-1]]
        at = int(self.light_at[-1])
        sump = StageState(
            point[at], column.sump_holdup_kmol, point[at + 1], point[at + 2], point[at + 3]
        )
        return [drum, *trays, sump]

    @cached_property
    def equations(self) -> ca.Function:
        """(scaled point, drive) -> (scaled state rates per hour, scaled algebraic residuals)."""
        scaled = ca.SX.sym("point", self.size)
        drive = ca.SX.sym("drive", DRIVES)
        point = scaled * ca.DM(self.scale)
        d = Drive(*(drive[k] for k in range(DRIVES)))
        duty, integral = point[self.duty_at], point[self.integral_at]
        inputs = Inputs(
            reflux_kmol_h=d.reflux_kmol_h,
            duty_kw=duty,
            feed_kmol_h=d.feed_kmol_h,
            feed_light=d.feed_light,
            feed_temp_k=d.feed_temp_k,
            drum_pressure_kpa=d.drum_pressure_kpa,
            column_dp_kpa=d.column_dp_kpa,
            efficiency=d.efficiency,
        )
        rates = column_rates(ca, self.model, self._stage_states(point), inputs)
        error = d.reference_k - self.tray_temp_k(point)
        by_position: dict[int, Any] = {self.integral_at: d.gain_kw_k / d.reset_h * error}
        for at, rate in zip(self.light_at, rates, strict=True):
            by_position[int(at)] = rate.light_rate
        for at, rate in zip(self.holdup_at, rates[1:-1], strict=True):
            by_position[int(at)] = rate.holdup_rate
        state_rates = ca.vertcat(*(by_position[int(at)] for at in self.state_at))
        algebraic = []
        for rate in rates[1:]:
            algebraic += [rate.bubble, rate.vapour_light, rate.energy / VAPOUR_SCALE_KMOL_H]
        algebraic.append((duty - integral - d.gain_kw_k * error) / DUTY_SCALE_KW)
        return ca.Function(
            "equations",
            [scaled, drive],
            [state_rates / ca.DM(self.scale[self.state_at]), ca.vertcat(*algebraic)],
        )

    def interval_residual(self, start: Any, points: Sequence[Any], drive: Any, hours: Any) -> Any:
        """Radau residual of one step, all arguments scaled; zero when the step is right."""
        evaluated = [self.equations(point, drive) for point in points]
        at = [int(k) for k in self.state_at]
        rows = []
        for weights, point, (_, algebraic) in zip(RADAU_A, points, evaluated, strict=True):
            advance = sum(
                weight * rates for weight, (rates, _) in zip(weights, evaluated, strict=True)
            )
            rows += [point[at] - start - hours * advance, algebraic]
        return ca.vertcat(*rows)

    @cached_property
    def step(self) -> ca.Function:
        """(guess (2 size), scaled start state, drive, hours) -> solved scaled points (2 size)."""
        points = ca.SX.sym("points", 2 * self.size)
        start = ca.SX.sym("start", self.states)
        drive = ca.SX.sym("drive", DRIVES)
        hours = ca.SX.sym("hours")
        residual = self.interval_residual(
            start, [points[: self.size], points[self.size :]], drive, hours
        )
        problem = ca.Function("radau", [points, start, drive, hours], [residual])
        return ca.rootfinder(
            "step",
            "newton",
            problem,
            {
                "linear_solver": "qr",
                "abstol": 1e-9,
                "max_iter": 25,
                "error_on_fail": False,
            },
        )

    def advance(self, start: Vector, guess: Vector, drive: Drive, hours: float) -> Vector:
        """Take one step.

        Parameters
        ----------
        start : array, shape (states,)
            Unscaled differential states at the start.
        guess : array, shape (2 size,)
            Unscaled guess of the two points.
        drive : Drive
            Held over the step.
        hours : float
            Length [h].

        Returns
        -------
        array, shape (2 size,)
            The two points, unscaled; the second is the end of the step.

        Raises
        ------
        StepFailedError
            No finite solution.
        """
        scale = np.tile(self.scale, 2)
        solved = self.step(
            guess / scale, start / self.scale[self.state_at], ca.DM(drive.vector()), hours
        )
        points = np.array(solved).ravel() * scale
        if not np.all(np.isfinite(points)):
            raise StepFailedError("the column model's implicit step gave no finite numbers")
        return points


def steady_drive(looped: LoopedColumn, gain_kw_k: float, reset_h: float) -> Drive:
    """The drive that holds the operating point."""
    inputs = looped.steady.inputs
    return Drive(
        reflux_kmol_h=inputs.reflux_kmol_h,
        reference_k=float(looped.tray_temp_k(looped.steady_point)),
        feed_kmol_h=inputs.feed_kmol_h,
        feed_light=inputs.feed_light,
        feed_temp_k=inputs.feed_temp_k,
        drum_pressure_kpa=inputs.drum_pressure_kpa,
        column_dp_kpa=inputs.column_dp_kpa,
        efficiency=inputs.efficiency,
        gain_kw_k=gain_kw_k,
        reset_h=reset_h,
    )
