"""The steady state that two product purities fix, and the weirs that follow from it.

Newton's method on all stage equations at once. Derivatives are exact to
rounding: complex steps through the very same equations, three stages apart at a
time, since a stage sees only its neighbours.

References
----------
Naphtali, L. M. & Sandholm, D. P. (1971), AIChE J. 17, 148-153 (simultaneous
Newton on stage equations); Squire, W. & Trapp, G. (1998), SIAM Rev. 40, 110-112
(complex-step derivative).
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from edgectl.column.assembly import column_rates, liquid_flows, stage_pressures_kpa
from edgectl.column.hydraulics import GRAVITY_M_S2, tray_holdup_kmol, weir_lag_h
from edgectl.column.layout import (
    VARIABLES_PER_STAGE,
    Column,
    ColumnModel,
    Inputs,
    StageState,
    Weirs,
)
from edgectl.properties.mathematics import Mathematics

Vector = NDArray[np.float64]

COLOURS = 3
STEP = 1e-30
TOLERANCE = 1e-10


class NoSteadyStateError(ValueError):
    """Newton's method found no steady state; the message says where it stood."""


@dataclass(frozen=True, slots=True)
class PuritySpecification:
    """Light mole fractions of the two products [-]."""

    distillate_light: float
    bottoms_light: float


@dataclass(frozen=True, slots=True)
class SteadyState:
    """A solved column."""

    model: ColumnModel
    states: tuple[StageState, ...]
    inputs: Inputs
    liquid_kmol_h: tuple[float, ...]
    """Leaving each stage; the last is the bottoms."""
    distillate_kmol_h: float
    iterations: int
    residual: float
    """Largest scaled residual left [-]."""


def solve_steady(
    column: Column,
    inputs: Inputs,
    specification: PuritySpecification,
    max_iterations: int = 60,
) -> SteadyState:
    """Solve a column for two product purities.

    Parameters
    ----------
    column : Column
        The column.
    inputs : Inputs
        Feed and pressures; reflux [kmol/h] and duty [kW] are ignored and solved for.
    specification : PuritySpecification
        Light mole fractions of distillate and bottoms [-].
    max_iterations : int
        Newton steps allowed [-].

    Returns
    -------
    SteadyState
        States, inputs with reflux and duty, and weirs linearised there.

    Raises
    ------
    NoSteadyStateError
        The purities straddle no feed, or Newton's method does not converge.

    References
    ----------
    Naphtali & Sandholm (1971), AIChE J. 17, 148-153.
    """
    low, feed, high = (
        specification.bottoms_light,
        inputs.feed_light,
        specification.distillate_light,
    )
    if not 0.0 < low < feed < high < 1.0:
        raise NoSteadyStateError(
            f"light mole fractions must rise from bottoms ({low:.4g}) over feed ({feed:.4g}) "
            f"to distillate ({high:.4g}), each between 0 and 1"
        )
    problem = _Problem(ColumnModel(column, _flow_as_holdup(column)), inputs, specification)
    unknowns = _settle(problem, _first_guess(column, inputs, specification))
    worst = np.inf
    for iteration in range(1, max_iterations + 1):
        residual = problem.residual(unknowns)
        worst = float(np.max(np.abs(residual)))
        if worst < TOLERANCE:
            return _finish(problem, unknowns, iteration, worst)
        unknowns = _bounded_step(unknowns, np.linalg.solve(problem.jacobian(unknowns), -residual))
    raise NoSteadyStateError(
        f"no steady state after {max_iterations} Newton steps: largest scaled residual "
        f"{worst:.2g}, reflux {unknowns[-2]:.4g} kmol/h, duty {unknowns[-1]:.4g} kW; "
        "are the purities within reach of this many trays?"
    )


def linear_weirs(
    column: Column, states: Sequence[StageState], flows: Sequence[float], inputs: Inputs
) -> Weirs:
    """Francis weirs linearised at a steady state.

    Parameters
    ----------
    column : Column
        The column; without trays' geometry every tray gets the drum's holdup and no lag.
    states : sequence of StageState
        One per stage.
    flows : sequence of float
        Liquid leaving each stage [kmol/h].
    inputs : Inputs
        For the pressure profile [kPa].

    Returns
    -------
    Weirs
        Flow [kmol/h], holdup [kmol] and lag [h] of each tray.

    References
    ----------
    Francis formula; see `hydraulics`.
    """
    if column.tray is None:
        raise ValueError("linear weirs need the trays' geometry")
    pressures = stage_pressures_kpa(column, inputs)
    holdups, lags = [], []
    for i in column.trays:
        density = _density_kmol_m3(column, states[i])
        mass_density = density * _molar_mass(column, states[i].light)
        head = (pressures[i + 1] - pressures[i]) * 1e3 / (mass_density * GRAVITY_M_S2)
        holdups.append(tray_holdup_kmol(flows[i], density, head, column.tray))
        lags.append(weir_lag_h(flows[i], density, column.tray))
    return Weirs(tuple(flows[i] for i in column.trays), tuple(holdups), tuple(lags))


def _flow_as_holdup(column: Column) -> Weirs:
    """Weirs whose holdup *is* the flow: at steady state holdup decides nothing else."""
    trays = len(column.trays)
    return Weirs((0.0,) * trays, (0.0,) * trays, (1.0,) * trays)


def _first_guess(column: Column, inputs: Inputs, spec: PuritySpecification) -> Vector:
    """Straight line in logit composition, constant molar flows at twice the distillate's reflux."""
    distillate = _distillate_kmol_h(inputs, spec)
    reflux = 2.0 * distillate
    pressures = stage_pressures_kpa(column, inputs)
    logits = np.linspace(_logit(spec.distillate_light), _logit(spec.bottoms_light), column.stages)
    rows = []
    for i, logit in enumerate(logits):
        light = 1.0 / (1.0 + np.exp(-logit))
        temp_k = _bubble_point_k(column, float(light), pressures[i])
        star = column.equilibrium.vapour_light(np, light, temp_k, pressures[i])
        liquid = reflux + (inputs.feed_kmol_h if i >= column.feed_stage else 0.0)
        rows.append([logit, liquid, temp_k, star, reflux + distillate])
    rows[0] = [logits[0], column.drum_holdup_kmol, column.drum_temperature_k,
               spec.distillate_light, 0.0]  # fmt: skip
    rows[-1][1] = column.sump_holdup_kmol
    duty = (reflux + distillate) * 38000.0 / 3600.0
    return np.concatenate([np.ravel(rows), [reflux, duty]])


def _bubble_point_k(column: Column, light: float, pressure_kpa: float) -> float:
    temp_k = column.equilibrium.guess_temp_k(light, pressure_kpa)
    for _ in range(30):
        probe = complex(
            column.equilibrium.bubble_residual(cmath, light, temp_k + STEP * 1j, pressure_kpa)
        )
        step = -probe.real / (probe.imag / STEP)
        temp_k += max(-20.0, min(20.0, step))
        if abs(step) < 1e-9:
            break
    return temp_k


def _states(xp: Mathematics, unknowns: Sequence[Any], column: Column) -> list[StageState]:
    width = VARIABLES_PER_STAGE
    rows = (unknowns[i * width : (i + 1) * width] for i in range(column.stages))
    return [StageState(1.0 / (1.0 + xp.exp(-row[0])), *row[1:]) for row in rows]


@dataclass(frozen=True, slots=True)
class _Problem:
    """All equations of a column and the two specifications, scaled.

    With `flows` given, reflux and distillate flow [kmol/h] take the place of the
    purities.
    """

    model: ColumnModel
    inputs: Inputs
    specification: PuritySpecification
    flows: tuple[float, float] | None = None

    def residual(self, unknowns: Vector) -> Vector:
        """Zero at a steady state; flows in parts of the feed, compositions as logits [-]."""
        return np.array(self.rows(math, unknowns.tolist()))

    def rows(self, xp: Mathematics, unknowns: Sequence[Any]) -> list[Any]:
        """The residuals of plain real or complex numbers: those are the fastest here."""
        column, feed = self.model.column, self.inputs.feed_kmol_h
        states = _states(xp, unknowns, column)
        at = replace(self.inputs, reflux_kmol_h=unknowns[-2], duty_kw=unknowns[-1])
        given = {0: column.drum_holdup_kmol, column.reboiler: column.sump_holdup_kmol}
        rows: list[Any] = []
        stages = zip(states, column_rates(xp, self.model, states, at), strict=True)
        for i, (state, rates) in enumerate(stages):
            rows += [
                rates.light_rate * state.holdup / feed / _impurity_scale(state),
                state.holdup / given[i] - 1.0 if i in given else rates.holdup_rate / feed,
                rates.bubble,
                rates.vapour_light,
                rates.energy / feed,
            ]
        if self.flows is None:
            rows += [
                unknowns[0] - _logit(self.specification.distillate_light),
                unknowns[-2 - VARIABLES_PER_STAGE] - _logit(self.specification.bottoms_light),
            ]
        else:
            distillate = states[1].vapour - unknowns[-2]
            rows += [
                (unknowns[-2] - self.flows[0]) / feed,
                (distillate - self.flows[1]) / feed,
            ]
        return rows

    def jacobian(self, unknowns: Vector) -> Vector:
        """Of `residual`, shape (n, n): one complex step for every third stage at once."""
        width, stages, size = VARIABLES_PER_STAGE, self.model.column.stages, unknowns.size
        jacobian = np.zeros((size, size))
        for colour in range(COLOURS):
            for variable in range(width):
                columns = [stage * width + variable for stage in range(colour, stages, COLOURS)]
                slope = self._slope(unknowns, columns)
                for column in columns:
                    first = column // width - 1
                    rows = slice(max(0, first) * width, min(stages, first + 3) * width)
                    jacobian[rows, column] = slope[rows]
        # The specifications name drum, top tray and reboiler, and are cheap to step alone.
        for column in (0, 2 * width - 1, size - 2 - width):
            jacobian[-2:, column] = self._slope(unknowns, [column])[-2:]
        for column in (size - 2, size - 1):
            jacobian[:, column] = self._slope(unknowns, [column])
        return jacobian

    def _slope(self, unknowns: Vector, columns: list[int]) -> Vector:
        probe: list[Any] = unknowns.tolist()
        for column in columns:
            probe[column] += STEP * 1j
        # Rows that the probe does not reach stay real numbers.
        return np.array([complex(row).imag for row in self.rows(cmath, probe)]) / STEP


def _settle(problem: _Problem, unknowns: Vector) -> Vector:
    """Let the column run in (implicit Euler, growing steps) at given reflux and distillate flow.

    A column at fixed flows is stable, so this leads from any rough profile to one
    from which Newton's method converges.
    """
    column, inputs, spec = problem.model.column, problem.inputs, problem.specification
    distillate = _distillate_kmol_h(inputs, spec)
    settling = replace(problem, flows=(float(unknowns[-2]), distillate))
    is_light = np.zeros(unknowns.size)
    is_light[:-2:VARIABLES_PER_STAGE] = 1.0
    step = 0.02 * column.stages
    for _ in range(40):
        residual = settling.residual(unknowns)
        if float(np.max(np.abs(residual))) < 1e-3 and step > 1e3:
            break
        matrix = settling.jacobian(unknowns) - np.diag(is_light / step)
        unknowns = _bounded_step(unknowns, np.linalg.solve(matrix, -residual))
        step *= 2.5
    return unknowns


def _distillate_kmol_h(inputs: Inputs, spec: PuritySpecification) -> float:
    """From the component balance around the column [kmol/h]."""
    return float(
        inputs.feed_kmol_h
        * (inputs.feed_light - spec.bottoms_light)
        / (spec.distillate_light - spec.bottoms_light)
    )


def _impurity_scale(state: StageState) -> float:
    """So that a balance on a nearly pure stage counts in parts of its impurity."""
    light = complex(state.light).real
    return max(light * (1.0 - light), 1e-9)


def _bounded_step(unknowns: Vector, step: NDArray[np.floating[Any]]) -> Vector:
    """A Newton step cut back so that no flow changes sign and no temperature jumps."""
    limits = np.tile([1.0, np.inf, 10.0, 0.2, np.inf], (unknowns.size - 2) // VARIABLES_PER_STAGE)
    limits = np.concatenate([limits, [np.inf, np.inf]])
    flows = np.isinf(limits)
    limits[flows] = np.maximum(0.4 * np.abs(unknowns[flows]), 1e-9)
    factor = float(min(1.0, np.min(limits / np.maximum(np.abs(step), 1e-300))))
    moved: Vector = unknowns + factor * step
    return moved


def _finish(problem: _Problem, unknowns: Vector, iterations: int, residual: float) -> SteadyState:
    model, inputs = problem.model, problem.inputs
    column = model.column
    at = replace(inputs, reflux_kmol_h=float(unknowns[-2]), duty_kw=float(unknowns[-1]))
    states = [
        StageState(*(float(v) for v in state)) for state in _states(math, unknowns.tolist(), column)
    ]
    flows = [float(flow) for flow in liquid_flows(model, states, at)]
    weirs = linear_weirs(column, states, flows, at) if column.tray else _flow_as_holdup(column)
    if column.tray:
        states = [
            state if i in (0, column.reboiler) else state._replace(holdup=weirs.holdup_kmol[i - 1])
            for i, state in enumerate(states)
        ]
    return SteadyState(
        model=ColumnModel(column, weirs),
        states=tuple(states),
        inputs=at,
        liquid_kmol_h=tuple(flows),
        distillate_kmol_h=states[1].vapour - at.reflux_kmol_h,
        iterations=iterations,
        residual=residual,
    )


def _density_kmol_m3(column: Column, state: StageState) -> float:
    """Additive volumes (Amagat) [kmol/m3]."""
    volume = state.light / column.light.liquid_density_kmol_m3(state.temp_k) + (
        1.0 - state.light
    ) / column.heavy.liquid_density_kmol_m3(state.temp_k)
    return float(1.0 / volume)


def _molar_mass(column: Column, light: float) -> float:
    return light * column.light.molar_mass_kg_kmol + (1.0 - light) * column.heavy.molar_mass_kg_kmol


def _logit(fraction: float) -> float:
    return float(np.log(fraction / (1.0 - fraction)))
