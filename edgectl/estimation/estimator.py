"""One request's estimate: tracked model, feed composition, biases, CVs now."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from edgectl.estimation.outputs import KELVIN, Output
from edgectl.estimation.tracking import (
    Bias,
    BiasSettings,
    History,
    ModelTracker,
    PlantInputs,
    TrackedState,
    corrected,
    pack,
    unpack,
)
from edgectl.records.measurements import Measurement, Verdict
from edgectl.records.plan import CvEstimate, CvLimits, Estimate, PlanRequest, ProfileStage

CLIPPED_RESULTS = 3
"""Results in a row beyond belief, after which model and analyser contradict each other."""


@dataclass(frozen=True, slots=True)
class CvSettings:
    """One CV for the estimator."""

    output: Output
    tag: str
    """Tag that measures it."""
    bias: BiasSettings | None
    """None: the model is taken at its word (a tracked temperature)."""


@dataclass(frozen=True, slots=True)
class InputTags:
    """Which tag plays which part; values used when a tag is not usable."""

    feed_flow: str
    feed_temperature: str | None
    reflux_flow: str
    distillate_flow: str
    tray_temperature: str
    top_pressure: str
    differential_pressure: str | None
    drum_level: str | None
    feed_temp_degc: float
    column_dp_kpa: float


@dataclass(frozen=True, slots=True)
class Belief:
    """Everything the planner needs to know about now."""

    state: TrackedState
    inputs: PlantInputs
    biases: Mapping[str, Bias]
    history: History
    limits: Mapping[str, CvLimits]
    """As planned with: tightened where a result ages."""
    in_service: Mapping[str, bool]
    estimate: Estimate
    restarted: bool


class MissingInputError(ValueError):
    """A measurement that the model cannot do without is not there."""


class BiasEstimator:
    """Runs the model along and keeps one bias per CV.

    Parameters
    ----------
    tracker : ModelTracker
        Model and tracking loop.
    tags : InputTags
        Where the inputs come from.
    cvs : sequence of CvSettings
        The CVs, in the order of every vector of CVs.
    distillate_output : str or None
        CV that gives the distillate's purity to the feed balance.
    longest_gap_s : float
        A memory older than this is not carried on: the model is settled afresh [s].
    """

    def __init__(
        self,
        tracker: ModelTracker,
        tags: InputTags,
        cvs: Sequence[CvSettings],
        distillate_output: str | None,
        longest_gap_s: float,
    ) -> None:
        self.tracker = tracker
        self.tags = tags
        self.cvs = tuple(cvs)
        self._distillate_output = distillate_output
        self._longest_gap_s = longest_gap_s

    def estimate(self, request: PlanRequest) -> Belief:
        """The belief that follows from a request.

        Raises
        ------
        MissingInputError
            A flow, temperature or pressure that the model needs has no value.
        StepFailedError
            The model cannot follow.
        """
        measured = {m.tag: m for m in request.measurements}
        state, biases, history, restarted = self._recalled(request)
        inputs = self._inputs(measured, state, biases)
        if state is None:
            state = self.tracker.start(inputs, request.made_at)
        else:
            state = self.tracker.update(state, inputs, request.made_at)
        predicted = {cv.output.name: self._model(cv.output, state) for cv in self.cvs}
        history.append(request.made_at, predicted)
        biases = {
            cv.output.name: self._corrected(cv, biases[cv.output.name], history, measured)
            for cv in self.cvs
        }
        return self._belief(request, state, inputs, biases, history, predicted, restarted)

    def _recalled(
        self, request: PlanRequest
    ) -> tuple[TrackedState | None, dict[str, Bias], History, bool]:
        names = [cv.output.name for cv in self.cvs]
        if request.memory:
            state, biases, history = unpack(request.memory, names)
            if 0.0 <= request.made_at - state.made_at <= self._longest_gap_s:
                return state, biases, history, False
            # The biases outlive the state: they age by their own sample times.
            return None, biases, History([], {}), True
        return None, {name: Bias(0.0, None) for name in names}, History([], {}), True

    def _inputs(
        self,
        measured: Mapping[str, Measurement],
        state: TrackedState | None,
        biases: Mapping[str, Bias],
    ) -> PlantInputs:
        tags = self.tags

        def needed(tag: str) -> float:
            value = _believed(measured.get(tag))
            if value is None:
                raise MissingInputError(f"{tag} has no usable value and the model needs it")
            return value

        def optional(tag: str | None, otherwise: float) -> float:
            value = None if tag is None else _believed(measured.get(tag))
            return otherwise if value is None else value

        return PlantInputs(
            feed_kg_h=needed(tags.feed_flow),
            feed_temp_degc=optional(tags.feed_temperature, tags.feed_temp_degc),
            reflux_kg_h=needed(tags.reflux_flow),
            distillate_kg_h=needed(tags.distillate_flow),
            tray_temp_degc=needed(tags.tray_temperature),
            top_pressure_kpa=needed(tags.top_pressure),
            column_dp_kpa=optional(tags.differential_pressure, tags.column_dp_kpa),
            distillate_light=self._distillate_light(state, biases),
            drum_level=self._drum_level(measured),
        )

    def _drum_level(self, measured: Mapping[str, Measurement]) -> float | None:
        """Fraction of the drum, only while the tag is usable: a stuck level says nothing."""
        tag = self.tags.drum_level
        if tag is None or tag not in measured or not measured[tag].usable:
            return None
        value = measured[tag].value
        return None if value is None else value / 100.0

    def _distillate_light(self, state: TrackedState | None, biases: Mapping[str, Bias]) -> float:
        """Bias-corrected purity of the distillate, light mass fraction [-]."""
        for cv in self.cvs:
            if cv.output.name != self._distillate_output or state is None:
                continue
            coordinate = self._model(cv.output, state) + biases[cv.output.name].value
            return 1.0 - min(0.5, cv.output.to_unit(coordinate) / cv.output.scale)
        return 1.0

    def _model(self, output: Output, state: TrackedState) -> float:
        return float(output.coordinate(np, self.tracker.looped, state.point))

    def _corrected(
        self,
        cv: CvSettings,
        bias: Bias,
        history: History,
        measured: Mapping[str, Measurement],
    ) -> Bias:
        result = measured.get(cv.tag)
        if cv.bias is None or result is None or result.value is None:
            return bias
        if not (result.usable and result.is_new) or result.sample_time is None:
            return bias
        return corrected(
            bias,
            cv.bias,
            result.sample_time,
            cv.output.to_coordinate(result.value),
            history.at(cv.output.name, result.sample_time),
            result.at_most,
        )

    def _belief(
        self,
        request: PlanRequest,
        state: TrackedState,
        inputs: PlantInputs,
        biases: dict[str, Bias],
        history: History,
        predicted: Mapping[str, float],
        restarted: bool,
    ) -> Belief:
        asked = {limits.cv: limits for limits in request.limits}
        rows, limits, in_service = [], {}, {}
        for cv in self.cvs:
            name, bias = cv.output.name, biases[cv.output.name]
            now = request.made_at
            word = "live" if cv.bias is None else bias.state(cv.bias, now)
            factor = 1.0 if cv.bias is None else bias.tightening(cv.bias, now)
            wanted = asked.get(name, CvLimits(name, None, None, None))
            high = None if wanted.high is None else wanted.high * factor
            limits[name] = replace(wanted, high=high)
            in_service[name] = word != "dropped"
            rows.append(
                CvEstimate(
                    cv=name,
                    value=cv.output.to_unit(predicted[name] + bias.value),
                    bias=bias.value,
                    bias_age_s=0.0 if cv.bias is None else bias.age_s(now),
                    state=word,
                    low=wanted.low,
                    high=high,
                )
            )
        estimate = Estimate(
            cvs=tuple(rows),
            disturbances={
                "feed_light_mass_fraction": state.feed_light,
                "model_duty_kw": state.duty_kw,
            },
            profile=self._profile(state),
            warnings=self._warnings(state, biases, request.made_at),
            memory=pack(state, biases, history),
        )
        return Belief(state, inputs, biases, history, limits, in_service, estimate, restarted)

    def _warnings(
        self, state: TrackedState, biases: Mapping[str, Bias], now: float
    ) -> tuple[str, ...]:
        """Why this estimate should not be advised from; empty when all is well."""
        mismatched = ("model_mismatch",) if self.tracker.mismatched(state) else ()
        # A dropped CV is left out of the plan: an analyser that died while it contradicted
        # the model must not silence the advice for ever.
        at_clip = any(
            biases[cv.output.name].clipped >= CLIPPED_RESULTS
            and biases[cv.output.name].state(cv.bias, now) != "dropped"
            for cv in self.cvs
            if cv.bias is not None
        )
        return (*mismatched, *(("bias_at_clip",) if at_clip else ()))

    def _profile(self, state: TrackedState) -> tuple[ProfileStage, ...]:
        looped = self.tracker.looped
        temps = [
            looped.model.column.drum_temperature_k,
            *(float(v) for v in state.point[looped.temp_at]),
        ]
        lights = [float(v) for v in state.point[looped.light_at]]
        return tuple(
            ProfileStage(stage, round(temp - KELVIN, 3), round(light, 6))
            for stage, (temp, light) in enumerate(zip(temps, lights, strict=True))
        )


def _believed(found: Measurement | None) -> float | None:
    """The value this cycle may rest on.

    A refused measurement keeps its last usable value, which may be hours old: that one
    counts only where validation lets it stand in.
    """
    if found is None:
        return None
    stands_in = found.note == "substituted" or found.verdict is Verdict.TOO_FAST
    return found.value if found.usable or stands_in else None
