"""From a request and a belief to the numbers that an engine solves for."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from edgectl.column.layout import molar_mass
from edgectl.estimation.dynamics import steady_drive
from edgectl.estimation.estimator import Belief, MissingInputError
from edgectl.estimation.outputs import KELVIN
from edgectl.optimisation.from_site import SiteModel
from edgectl.optimisation.problem import NO_LIMIT, Situation
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import PlanRequest

Vector = NDArray[np.float64]


class Situations:
    """Makes situations for one site.

    Parameters
    ----------
    parts : SiteModel
        Model, estimator and goals.
    increments : sequence of float
        What an operator can enter, per MV.
    """

    def __init__(self, parts: SiteModel, increments: Sequence[float]) -> None:
        self._parts = parts
        self._increments = tuple(increments)

    def nominal(self) -> Situation:
        """The operating point at rest, no limits: for warming up and for tests."""
        parts, goals = self._parts, self._parts.goals
        point = parts.looped.steady_point
        kmol_per_kg = 1.0 / molar_mass(float(point[0]), parts.looped.model.column)
        positions = np.array(
            [
                self._parts.looped.steady.inputs.reflux_kmol_h / kmol_per_kg
                if mv.kind == "reflux"
                else float(parts.looped.tray_temp_k(point)) - KELVIN
                for mv in goals.mvs
            ]
        )
        free = np.tile(positions[:, None], (1, goals.moves))
        spread = np.array([mv.max_move for mv in goals.mvs])[:, None]
        cvs = len(goals.cvs)
        return Situation(
            start=point,
            drive=steady_drive(parts.looped, parts.loop.gain_kw_k, parts.loop.reset_h),
            positions=positions,
            low=free - 4.0 * spread,
            high=free + 4.0 * spread,
            feed_ratio=np.ones(goals.intervals),
            kmol_per_kg=kmol_per_kg,
            bias=np.zeros(cvs),
            cv_low=np.full(cvs, -NO_LIMIT),
            cv_high=np.full(cvs, NO_LIMIT),
            cv_setpoint=np.full(cvs, np.nan),
            in_service=np.ones(cvs),
        )

    def of(self, request: PlanRequest, belief: Belief) -> tuple[Situation, Vector]:
        """One cycle's situation and a first guess of its moves, shape (mvs, moves)."""
        parts, goals, state = self._parts, self._parts.goals, belief.state
        looped, loop = parts.looped, parts.loop
        at = {position.mv: position for position in request.positions}
        positions = np.array([_value(at[mv.name]) for mv in goals.mvs])
        drive = replace(
            parts.estimator.tracker.drive(state, belief.inputs),
            gain_kw_k=loop.gain_kw_k,
            reset_h=loop.reset_h,
        )
        start = state.point.copy()
        reference = next(
            (
                positions[j]
                for j, mv in enumerate(goals.mvs)
                if mv.kind == "tray_temperature_setpoint"
            ),
            state.tray_temp_degc,
        )
        # The plant's integrator: today's duty less what the proportional part asks for.
        start[looped.integral_at] = state.duty_kw - loop.gain_kw_k * (
            reference - state.tray_temp_degc
        )
        start[looped.duty_at] = state.duty_kw
        low, high = self._move_limits(at, positions)
        names = [cv.output.name for cv in goals.cvs]
        situation = Situation(
            start=start,
            drive=drive,
            positions=positions,
            low=low,
            high=high,
            feed_ratio=self._feed_ratio(belief),
            kmol_per_kg=1.0 / molar_mass(float(state.point[0]), looped.model.column),
            bias=np.array([belief.biases[name].value for name in names]),
            cv_low=self._coordinates(belief, "low", -NO_LIMIT),
            cv_high=self._coordinates(belief, "high", NO_LIMIT),
            cv_setpoint=self._coordinates(belief, "setpoint", math.nan),
            in_service=np.array([float(belief.in_service[name]) for name in names]),
        )
        return situation, self._first_guess(request, belief, positions)

    def _coordinates(self, belief: Belief, which: str, absent: float) -> Vector:
        values = []
        for cv in self._parts.goals.cvs:
            value = getattr(belief.limits[cv.output.name], which)
            values.append(absent if value is None else cv.output.to_coordinate(value))
        return np.array(values)

    def _feed_ratio(self, belief: Belief) -> Vector:
        """Filtered feed in each interval over its value now, where reflux follows the feed."""
        goals, state = self._parts.goals, belief.state
        filter_h = self._parts.estimator.tracker.settings.ratio_filter_h
        if filter_h <= 0.0:
            return np.ones(goals.intervals)
        middles = np.cumsum(goals.grid_h) - np.array(goals.grid_h) / 2.0
        coming = state.feed_kg_h + (state.ratio_feed_kg_h - state.feed_kg_h) * np.exp(
            -middles / filter_h
        )
        ratio: Vector = coming / state.ratio_feed_kg_h
        return ratio

    def _move_limits(
        self, at: Mapping[str, MovePosition], positions: Vector
    ) -> tuple[Vector, Vector]:
        """Bounds of every move; an MV out of service is a fixed input."""
        goals = self._parts.goals
        low = np.empty((len(goals.mvs), goals.moves))
        high = np.empty_like(low)
        for j, (mv, increment) in enumerate(zip(goals.mvs, self._increments, strict=True)):
            given, here = at[mv.name], positions[j]
            down, up = given.low, given.high
            if given.service in (Service.FIXED, Service.RAISE_ONLY):
                down = here
            if given.service in (Service.FIXED, Service.LOWER_ONLY):
                up = here
            # Outside its limits an MV comes back at the pace of moves, not in one jump;
            # an increment of room keeps a value that can be entered within that pace.
            reach = mv.max_move * np.arange(1, goals.moves + 1) - increment
            low[j] = np.minimum(down, np.maximum(here, here + reach))
            high[j] = np.maximum(up, np.minimum(here, here - reach))
            if given.service is Service.FIXED:
                low[j] = high[j] = here
        return low, high

    def _first_guess(self, request: PlanRequest, belief: Belief, positions: Vector) -> Vector:
        held = np.tile(positions[:, None], (1, self._parts.goals.moves))
        rows = request.memory.get("moves")
        if belief.restarted or rows is None or len(rows) != held.size:
            return held
        return np.array(rows).reshape(held.shape)


def _value(position: MovePosition) -> float:
    if position.position is None:
        raise MissingInputError(f"the position of {position.mv} is not known")
    return position.position
