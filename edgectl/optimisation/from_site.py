"""From the site file to model, estimator and goals."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from edgectl.column.describe import column_from_site, operating_inputs, purity_specification
from edgectl.column.steady import SteadyState, solve_steady
from edgectl.estimation.dynamics import LoopedColumn
from edgectl.estimation.estimator import BiasEstimator, CvSettings, InputTags
from edgectl.estimation.outputs import Output
from edgectl.estimation.tracking import BiasSettings, ModelTracker, TrackingSettings
from edgectl.optimisation.problem import CvGoal, Goals, MvGoal
from edgectl.records.units import UNITS

Table = Mapping[str, Any]

FRESH_ANALYSER_CYCLES = 2.5
"""Analyser cycles (plus its delay) after which its result is no longer current."""


@dataclass(frozen=True, slots=True)
class BaseLoop:
    """The plant's tray-temperature loop as the plan predicts it."""

    stage: int
    gain_kw_k: float
    reset_h: float


@dataclass(frozen=True, slots=True)
class SiteModel:
    """Everything the planner is built from."""

    looped: LoopedColumn
    loop: BaseLoop
    estimator: BiasEstimator
    goals: Goals


def steady_from_site(site: Table) -> SteadyState:
    """Solve the site file's operating point. Raises NoSteadyStateError."""
    column = column_from_site(site)
    return solve_steady(column, operating_inputs(site, column), purity_specification(site, column))


def site_model(site: Table, steady: SteadyState) -> SiteModel:
    """Model, estimator and goals of a validated site file."""
    loop = _base_loop(site)
    looped = LoopedColumn(steady, loop.stage)
    outputs = {name: _output(name, cv, site) for name, cv in site["cv"].items()}
    tracker = ModelTracker(looped, _tracking(site))
    estimator = BiasEstimator(
        tracker,
        _input_tags(site, loop.stage),
        [
            CvSettings(outputs[name], cv["measured"], _bias(cv, site))
            for name, cv in site["cv"].items()
        ],
        next((n for n, o in outputs.items() if o.kind == "distillate_heavy_impurity"), None),
        site["cycle"]["restore_max_age_s"],
    )
    return SiteModel(looped, loop, estimator, _goals(site, outputs))


def _base_loop(site: Table) -> BaseLoop:
    loops = [mv["loop"] for mv in site["mv"].values() if mv.get("loop")]
    loop = loops[0]
    return BaseLoop(loop["stage"], loop["gain_kw_per_k"], loop["reset_min"] / 60.0)


def _output(name: str, cv: Table, site: Table) -> Output:
    unit = UNITS[cv["unit"]]
    return Output(
        name=name,
        kind=cv["kind"],
        logarithmic=cv["coordinate"] == "logarithmic",
        scale=1.0 / unit.scale,
        stage=site["tags"][cv["measured"]].get("stage") or 0,
    )


def _bias(cv: Table, site: Table) -> BiasSettings | None:
    analyser = site["tags"][cv["measured"]].get("analyser")
    if not analyser:
        return None
    fresh = FRESH_ANALYSER_CYCLES * analyser["cycle_s"] + analyser["delay_s"]
    return BiasSettings(
        filter_gain=cv["bias_filter"],
        innovation_clip=cv["innovation_clip"],
        max_age_s=cv["bias_max_age_s"],
        fresh_for_s=fresh,
        tighten_per_h=cv["tighten_per_h"],
    )


def _tracking(site: Table) -> TrackingSettings:
    table = site["estimation"]
    feed_filters = [dv["filter_min"] for dv in site["dv"].values() if dv["kind"] == "feed_flow"]
    ratio = [mv["ratio_filter_min"] for mv in site["mv"].values() if mv.get("ratio_filter_min")]
    return TrackingSettings(
        gain_kw_k=table["tracking_gain_kw_per_k"],
        reset_h=table["tracking_reset_min"] / 60.0,
        duty_low_kw=table["tracking_duty_low_kw"],
        duty_high_kw=table["tracking_duty_high_kw"],
        composition_filter_h=table["feed_composition_filter_min"] / 60.0,
        composition_low=table["feed_composition_low"],
        composition_high=table["feed_composition_high"],
        feed_filter_h=(feed_filters[0] if feed_filters else 1.0) / 60.0,
        ratio_filter_h=(ratio[0] if ratio else 0.0) / 60.0,
        mismatch_k=table["mismatch_k"],
        mismatch_after_s=table["mismatch_after_min"] * 60.0,
    )


def _input_tags(site: Table, loop_stage: int) -> InputTags:
    def tag(role: str) -> str | None:
        return next((n for n, t in site["tags"].items() if t["role"] == role), None)

    def required(role: str) -> str:
        name = tag(role)
        if name is None:
            raise ValueError(f"the model needs a tag with role {role!r}")
        return name

    tray = next(
        (
            name
            for name, t in site["tags"].items()
            if t["role"] == "tray_temperature" and t.get("stage") == loop_stage
        ),
        None,
    )
    if tray is None:
        raise ValueError(f"the model needs the temperature of stage {loop_stage}")
    point = site["operating_point"]
    return InputTags(
        feed_flow=required("feed_flow"),
        # Fed forward only where the site file says so; else the operating point's counts.
        feed_temperature=next(
            (d["measured"] for d in site["dv"].values() if d["kind"] == "feed_temperature"), None
        ),
        reflux_flow=required("reflux_flow"),
        distillate_flow=required("distillate_flow"),
        tray_temperature=tray,
        top_pressure=required("top_pressure"),
        differential_pressure=tag("differential_pressure"),
        drum_level=tag("drum_level"),
        feed_temp_degc=point["feed_temperature_degc"],
        column_dp_kpa=point["column_dp_kpa"],
    )


def _goals(site: Table, outputs: Mapping[str, Output]) -> Goals:
    planning = site["planning"]
    grid = np.array(planning["grid_min"])
    begins = np.concatenate([[0.0], np.cumsum(grid)])
    move_interval = [int(np.argmin(np.abs(begins - at))) for at in planning["moves_at_min"]]
    spacing_min = float(np.min(np.diff(planning["moves_at_min"]), initial=np.inf))
    return Goals(
        grid_h=tuple(float(v) for v in grid / 60.0),
        move_interval=tuple(move_interval),
        mvs=tuple(
            MvGoal(
                name=name,
                kind=mv["kind"],
                scale=mv["scale"],
                move_weight=mv["weight"],
                price=mv["price"],
                max_move=min(mv["max_move"], mv["rate_limit_per_min"] * spacing_min),
            )
            for name, mv in site["mv"].items()
        ),
        cvs=tuple(
            CvGoal(
                output=outputs[name],
                weight=cv["weight"],
                soft_linear=cv["soft_linear"],
                soft_quadratic=cv["soft_quadratic"],
            )
            for name, cv in site["cv"].items()
            if cv["role"] == "quality"
        ),
    )
