"""The model runs along with the plant; what it says is corrected by a bias.

The model's controlled tray is driven to the *measured* temperature by a tight
loop on model duty, never by measured steam: near the purities of interest a
duty error of a per cent puts a steam-driven model on the wrong branch. Feed
composition follows from the light component leaving at the top. Each analyser
result is compared with the model *at the time its sample was taken*.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from edgectl.column.layout import mass_fraction, molar_mass, mole_fraction
from edgectl.estimation.dynamics import Drive, LoopedColumn, steady_drive
from edgectl.records.plan import Memory

Vector = NDArray[np.float64]

KELVIN = 273.15
LONGEST_STEP_S = 60.0
SETTLING_H = 8.0
"""Model hours a cold start runs in for, at the present measurements."""
LEVEL_FILTER_H = 2.0 / 60.0
FIRST_RESULT_CLIPS = 3.0
"""A first result this many clips away from the model is not taken at its word [-]."""
HISTORY_S = 2400.0
"""How far back a late analyser result may reach."""


@dataclass(frozen=True, slots=True)
class TrackingSettings:
    """How the model is driven along."""

    gain_kw_k: float
    reset_h: float
    duty_low_kw: float
    duty_high_kw: float
    composition_filter_h: float
    composition_low: float
    composition_high: float
    """Bounds of the estimated feed composition, light mass fraction [-]."""
    feed_filter_h: float
    ratio_filter_h: float
    mismatch_k: float
    mismatch_after_s: float


@dataclass(frozen=True, slots=True)
class PlantInputs:
    """This cycle's measured inputs, in the units of the tags' quantities."""

    feed_kg_h: float
    feed_temp_degc: float
    reflux_kg_h: float
    distillate_kg_h: float
    tray_temp_degc: float
    top_pressure_kpa: float
    column_dp_kpa: float
    distillate_light: float
    """Mass fraction light in the distillate, from its analyser [-]."""
    drum_level: float | None = None
    """Fraction of the reflux drum's volume [-]; what it gains, left the column too."""


@dataclass(frozen=True, slots=True)
class TrackedState:
    """What is carried from cycle to cycle, besides the biases."""

    made_at: float
    point: Vector
    feed_light: float
    """Estimated light mass fraction of the feed [-]."""
    feed_kg_h: float
    """Lightly filtered feed flow."""
    ratio_feed_kg_h: float
    """Feed flow as the base layer's ratio station filters it."""
    reflux_kg_h: float
    tray_temp_degc: float
    duty_kw: float
    """Filtered duty of the tracking loop."""
    drum_level: float
    """Filtered drum level [-]; NaN when not measured."""
    mismatch_s: float
    """How long the model's tray has been away from the measured one [s]."""


class ModelTracker:
    """Drives the looped column along with the plant.

    Parameters
    ----------
    looped : LoopedColumn
        The model.
    settings : TrackingSettings
        Tuning and bounds.
    """

    def __init__(self, looped: LoopedColumn, settings: TrackingSettings) -> None:
        self.looped = looped
        self.settings = settings
        self._steady = steady_drive(looped, settings.gain_kw_k, settings.reset_h)
        column = looped.model.column
        self._drum_kg = column.drum_capacity_kmol * column.light.molar_mass_kg_kmol

    def start(self, inputs: PlantInputs, at: float) -> TrackedState:
        """A cold start: the model settled at the present measurements."""
        looped = self.looped
        feed_light = self._balance_composition(inputs)
        state = TrackedState(
            made_at=at,
            point=looped.steady_point,
            feed_light=feed_light,
            feed_kg_h=inputs.feed_kg_h,
            ratio_feed_kg_h=inputs.feed_kg_h,
            reflux_kg_h=inputs.reflux_kg_h,
            tray_temp_degc=inputs.tray_temp_degc,
            duty_kw=looped.steady.inputs.duty_kw,
            drum_level=math.nan if inputs.drum_level is None else inputs.drum_level,
            mismatch_s=0.0,
        )
        drive = replace(self.drive(state, inputs), reset_h=0.5)
        for hours in [0.05] * 4 + [0.2] * 4 + [SETTLING_H / 20] * 20:
            state = replace(state, point=self._step(state.point, drive, hours))
        return replace(state, duty_kw=self._clip_duty(float(state.point[looped.duty_at])))

    def update(self, state: TrackedState, inputs: PlantInputs, at: float) -> TrackedState:
        """Bring the model from `state.made_at` to `at` with the newest measurements."""
        elapsed_s = max(0.0, at - state.made_at)
        if elapsed_s == 0.0:
            return state
        settings, looped = self.settings, self.looped
        hours = elapsed_s / 3600.0
        filtered = replace(
            state,
            made_at=at,
            feed_light=self._observed_composition(state, inputs, hours),
            drum_level=self._drum_level(state, inputs, hours),
            feed_kg_h=_filtered(state.feed_kg_h, inputs.feed_kg_h, hours, settings.feed_filter_h),
            ratio_feed_kg_h=_filtered(
                state.ratio_feed_kg_h, inputs.feed_kg_h, hours, settings.ratio_filter_h
            ),
            reflux_kg_h=_filtered(
                state.reflux_kg_h, inputs.reflux_kg_h, hours, settings.feed_filter_h
            ),
            tray_temp_degc=_filtered(
                state.tray_temp_degc, inputs.tray_temp_degc, hours, settings.feed_filter_h
            ),
        )
        drive = self.drive(filtered, inputs)
        steps = max(1, math.ceil(elapsed_s / LONGEST_STEP_S))
        point = state.point
        for _ in range(steps):
            point = self._step(point, drive, hours / steps)
        away = abs(float(looped.tray_temp_k(point)) - KELVIN - filtered.tray_temp_degc)
        return replace(
            filtered,
            point=point,
            duty_kw=_filtered(
                state.duty_kw, float(point[looped.duty_at]), hours, 3.0 * settings.feed_filter_h
            ),
            mismatch_s=state.mismatch_s + elapsed_s if away > settings.mismatch_k else 0.0,
        )

    def drive(self, state: TrackedState, inputs: PlantInputs) -> Drive:
        """What drives the model now, with the tracking loop's tuning."""
        column = self.looped.model.column
        feed_light = mole_fraction(state.feed_light, column)
        reflux_mass = molar_mass(float(state.point[0]), column)
        return replace(
            self._steady,
            reflux_kmol_h=state.reflux_kg_h / reflux_mass,
            reference_k=state.tray_temp_degc + KELVIN,
            feed_kmol_h=state.feed_kg_h / molar_mass(feed_light, column),
            feed_light=feed_light,
            feed_temp_k=inputs.feed_temp_degc + KELVIN,
            drum_pressure_kpa=inputs.top_pressure_kpa,
            column_dp_kpa=inputs.column_dp_kpa,
        )

    def mismatched(self, state: TrackedState) -> bool:
        """The model has not followed the measured tray for too long."""
        return state.mismatch_s > self.settings.mismatch_after_s

    def _step(self, point: Vector, drive: Drive, hours: float) -> Vector:
        looped = self.looped
        points = looped.advance(point[looped.state_at], np.tile(point, 2), drive, hours)
        end = points[looped.size :].copy()
        end[looped.integral_at] = self._clip_duty(float(end[looped.integral_at]))
        return end

    def _clip_duty(self, duty_kw: float) -> float:
        return min(max(duty_kw, self.settings.duty_low_kw), self.settings.duty_high_kw)

    def _balance_composition(self, inputs: PlantInputs) -> float:
        """Light mass fraction of the feed: nearly all of it leaves with the distillate [-]."""
        column = self.looped.model.column
        bottoms_light = mass_fraction(self.looped.steady.states[-1].light, column)
        bottoms_kg_h = max(0.0, inputs.feed_kg_h - inputs.distillate_kg_h)
        light = inputs.distillate_kg_h * inputs.distillate_light + bottoms_kg_h * bottoms_light
        fraction = light / max(inputs.feed_kg_h, 1.0)
        settings = self.settings
        return float(min(max(fraction, settings.composition_low), settings.composition_high))

    def _drum_level(self, state: TrackedState, inputs: PlantInputs, hours: float) -> float:
        if inputs.drum_level is None:
            return math.nan
        if math.isnan(state.drum_level):
            return inputs.drum_level
        return _filtered(state.drum_level, inputs.drum_level, hours, LEVEL_FILTER_H)

    def _observed_composition(
        self, state: TrackedState, inputs: PlantInputs, hours: float
    ) -> float:
        """Feed composition after comparing overheads measured and modelled [-]."""
        looped, settings = self.looped, self.settings
        column = looped.model.column
        point = state.point
        drum_light = float(point[0])
        model_kg_h = molar_mass(drum_light, column) * float(point[looped.vapour_at[0]]) - (
            state.reflux_kg_h
        )
        level = self._drum_level(state, inputs, hours)
        rising_per_h = (level - state.drum_level) / hours
        stored_kg_h = 0.0 if math.isnan(rising_per_h) else rising_per_h * self._drum_kg
        measured_kg_h = inputs.distillate_kg_h + stored_kg_h
        surplus = measured_kg_h * inputs.distillate_light - model_kg_h * mass_fraction(
            drum_light, column
        )
        gain = 1.0 - math.exp(-hours / settings.composition_filter_h)
        observed = state.feed_light + gain * surplus / max(state.feed_kg_h, 1.0)
        return float(min(max(observed, settings.composition_low), settings.composition_high))


def _filtered(old: float, new: float, hours: float, time_constant_h: float) -> float:
    """First-order filter, exact for a held input."""
    if time_constant_h <= 0.0:
        return new
    return new + (old - new) * math.exp(-hours / time_constant_h)


@dataclass(frozen=True, slots=True)
class BiasSettings:
    """How one CV's bias follows its analyser."""

    filter_gain: float
    innovation_clip: float
    max_age_s: float
    fresh_for_s: float
    """Age up to which the last result counts as current [s]."""
    tighten_per_h: float


@dataclass(frozen=True, slots=True)
class Bias:
    """One CV's bias in its planning coordinate."""

    value: float
    sample_time: float | None
    """Of the newest result used; None before the first."""
    clipped: int = 0
    """Results in a row that were farther off than is believed."""

    def age_s(self, now: float) -> float:
        return math.inf if self.sample_time is None else max(0.0, now - self.sample_time)

    def state(self, settings: BiasSettings, now: float) -> str:
        """`live`, `ageing` or `dropped`."""
        age_s = self.age_s(now)
        if age_s > settings.max_age_s:
            return "dropped"
        return "live" if age_s <= settings.fresh_for_s else "ageing"

    def tightening(self, settings: BiasSettings, now: float) -> float:
        """Factor on an upper limit while the result ages [-]."""
        if self.state(settings, now) != "ageing":
            return 1.0
        return max(0.3, 1.0 - settings.tighten_per_h * self.age_s(now) / 3600.0)


def corrected(
    bias: Bias,
    settings: BiasSettings,
    sample_time: float,
    measured: float,
    predicted: float,
    at_most: bool,
) -> Bias:
    """The bias after one new result.

    Parameters
    ----------
    measured, predicted : float
        Result and model at the sample time, planning coordinate.
    at_most : bool
        The result is at or below the detection limit: it only says "not above".
    """
    if bias.sample_time is not None and sample_time <= bias.sample_time:
        return bias
    innovation = measured - (predicted + bias.value)
    if not math.isfinite(innovation):
        # Once in a bias, it would stay there and travel through every restart.
        return bias
    if at_most:
        innovation = min(0.0, innovation)
    clip = settings.innovation_clip
    # The first result sets the bias, for there is nothing to filter against yet; one that is
    # beyond all expectation is only believed step by step, as a later one would be.
    if bias.sample_time is None and abs(innovation) <= FIRST_RESULT_CLIPS * clip:
        return Bias(bias.value + innovation, sample_time)
    step = settings.filter_gain * min(max(innovation, -clip), clip)
    clipped = bias.clipped + 1 if abs(innovation) > clip else 0
    return Bias(bias.value + step, sample_time, clipped)


class History:
    """Model CVs of the last while, to compare late results with."""

    def __init__(self, times: Sequence[float], rows: Mapping[str, Sequence[float]]) -> None:
        self.times = list(times)
        self.rows = {name: list(values) for name, values in rows.items()}

    def append(self, at: float, values: Mapping[str, float]) -> None:
        """Add the present; forget what is older than any analyser's delay."""
        while self.times and self.times[0] < at - HISTORY_S:
            del self.times[0]
            for row in self.rows.values():
                del row[0]
        self.times.append(at)
        for name, value in values.items():
            self.rows.setdefault(name, [value] * (len(self.times) - 1)).append(value)

    def at(self, name: str, time: float) -> float:
        """The model's CV at that time; the oldest known when the time is before all."""
        return float(np.interp(time, self.times, self.rows[name]))


def pack(
    state: TrackedState, biases: Mapping[str, Bias], history: History
) -> dict[str, tuple[float, ...]]:
    """Everything carried, as rows of numbers."""
    rows: dict[str, tuple[float, ...]] = {
        "point": tuple(float(v) for v in state.point),
        "tracked": (
            state.made_at,
            state.feed_light,
            state.feed_kg_h,
            state.ratio_feed_kg_h,
            state.reflux_kg_h,
            state.tray_temp_degc,
            state.duty_kw,
            state.drum_level,
            state.mismatch_s,
        ),
        "history_times": tuple(history.times),
    }
    for name, bias in biases.items():
        sample = math.nan if bias.sample_time is None else bias.sample_time
        rows[f"bias.{name}"] = (bias.value, sample, float(bias.clipped))
        rows[f"history.{name}"] = tuple(history.rows[name])
    return rows


def unpack(memory: Memory, cvs: Sequence[str]) -> tuple[TrackedState, dict[str, Bias], History]:
    """The other way round.

    Raises
    ------
    KeyError, ValueError
        The memory is not one that `pack` made for these CVs.
    """
    made_at, *rest = memory["tracked"]
    if len(rest) != len(fields(TrackedState)) - 2:
        raise ValueError(f"a memory with {len(rest) + 1} tracked numbers is of another version")
    state = TrackedState(made_at, np.array(memory["point"]), *rest)
    biases = {}
    for name in cvs:
        value, sample, clipped = memory[f"bias.{name}"]
        biases[name] = Bias(value, None if math.isnan(sample) else sample, int(clipped))
    rows = {name: memory[f"history.{name}"] for name in cvs}
    return state, biases, History(memory["history_times"], rows)
