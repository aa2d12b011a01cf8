"""Moves, goals, estimation and planning: `[mv.*]`, `[cv.*]`, `[dv.*]` and their tuning."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from edgectl.settings.fields import (
    Count,
    Fraction,
    NotNegative,
    Number,
    NumberOrTag,
    Positive,
    Section,
    TagName,
    Text,
    UnitName,
)


class BaseLoop(Section):
    """The base-layer loop under an advised setpoint, as tuned on the plant."""

    stage: Annotated[int, Field(ge=0, le=199)]
    """Stage whose temperature it controls."""
    gain_kw_per_k: Positive
    """Proportional gain, reboiler duty per temperature."""
    reset_min: Positive
    """Integral time."""


class ManipulatedVariable(Section):
    """Something a person is advised to move."""

    description: Text
    """What it is, for people."""
    kind: Literal["reflux", "tray_temperature_setpoint"]
    """What it is to the column."""
    position: TagName
    """Tag of the loop's setpoint."""
    measured: TagName
    """Tag of the loop's measured value."""
    output: TagName
    """Tag of the loop's output."""
    mode: TagName
    """Tag of the loop's mode."""
    automatic_modes: Annotated[tuple[int, ...], Field(strict=False, min_length=1, max_length=10)]
    """Values of the mode in which the loop follows its setpoint."""
    unit: UnitName
    """Unit of everything below; the same as that of `position` and `measured`."""
    low: NumberOrTag
    """Lowest target that is ever suggested."""
    high: NumberOrTag
    """Highest target that is ever suggested."""
    rate_limit_per_min: Positive
    """Fastest change that is ever suggested."""
    max_move: Positive
    """Largest single suggestion."""
    worthwhile_move: Positive
    """Smaller planned departures are not worth a person's hand."""
    increment: Positive
    """What the operator can enter."""
    weight: NotNegative
    """Cost of a move of `scale`, squared."""
    scale: Positive
    """The move that `weight` and `price` speak of."""
    price: Number = 0.0
    """Cost per `scale` of position."""
    follow_tolerance: Positive
    """A measured value farther than this from the setpoint does not follow it."""
    follow_cycles: Count
    """Cycles in a row before that counts."""
    in_ratio_to: TagName | None = None
    """Feed flow that the base layer keeps this flow in ratio to."""
    ratio_filter_min: Positive | None = None
    """Time constant of the filter on that feed flow."""
    loop: BaseLoop | None = None
    """The base-layer loop under a temperature setpoint."""


class ControlledVariable(Section):
    """Something to be held at a value or inside limits, or only tracked."""

    description: Text
    """What it is, for people."""
    kind: Literal["bottoms_light_impurity", "distillate_heavy_impurity", "tray_temperature"]
    """What it is to the column."""
    measured: TagName
    """Tag that measures it."""
    unit: UnitName
    """Unit of its limits; the same as that of `measured`."""
    coordinate: Literal["linear", "logarithmic"]
    """How it is planned: logarithmic for impurities."""
    role: Literal["quality", "tracking"]
    """`quality`: a product specification. `tracking`: only shows how well the model follows."""
    hard_low: Number | None = None
    """Specification; vetting names a predicted violation."""
    hard_high: Number | None = None
    """Specification; vetting names a predicted violation."""
    low: NumberOrTag | None = None
    """Planned limit, backed off from the specification."""
    high: NumberOrTag | None = None
    """Planned limit, backed off from the specification."""
    setpoint: NumberOrTag | None = None
    """Planned value."""
    weight: NotNegative = 0.0
    """Cost of a squared distance from the setpoint, in the coordinate."""
    soft_linear: NotNegative = 2.0
    """Cost of breaking a planned limit, in the coordinate."""
    soft_quadratic: NotNegative = 20.0
    """The same, squared."""
    bias_filter: Annotated[Number, Field(gt=0, le=1)] = 0.4
    """Share of a new innovation that enters the bias."""
    innovation_clip: Positive = 0.4
    """Largest innovation that is believed, in the coordinate."""
    bias_max_age_s: Positive = 10800.0
    """Plant seconds without a result after which this CV is dropped."""
    tighten_per_h: Annotated[Number, Field(ge=0, lt=1)] = 0.15
    """Relative tightening of the limits by the age of the last result."""


class DisturbanceVariable(Section):
    """A measured disturbance, fed forward."""

    measured: TagName
    """Tag that measures it."""
    kind: Literal["feed_flow", "feed_temperature"]
    """What it is to the column; also the role of the tag."""
    filter_min: NotNegative | None = None
    """Time constant of the filter on the feed flow, and with it on reflux and the loop's tray."""


class Estimation(Section):
    """How the model follows the plant."""

    method: Literal["bias"]
    """Filtered bias per CV, at the time of the sample."""
    feed_composition_filter_min: Positive
    """Time constant of the feed composition from the component balance."""
    feed_composition_low: Fraction
    """Lowest mass fraction of the first component that is believed."""
    feed_composition_high: Fraction
    """Highest mass fraction of the first component that is believed."""
    tracking_gain_kw_per_k: Positive
    """Gain that drives the model's tray temperature to the measured one."""
    tracking_reset_min: Positive
    """Its integral time."""
    tracking_duty_low_kw: NotNegative
    """Lowest reboiler duty of the model."""
    tracking_duty_high_kw: Positive
    """Highest reboiler duty of the model."""
    mismatch_k: Positive
    """Distance of the two temperatures that withdraws advice ..."""
    mismatch_after_min: Positive
    """... when it has lasted this long."""


class Planning(Section):
    """How the plan is made."""

    engine: Literal["collocation"]
    """Way of solving the planning problem."""
    grid_min: Annotated[tuple[Positive, ...], Field(strict=False, min_length=1, max_length=100)]
    """Lengths of the intervals."""
    moves_at_min: Annotated[
        tuple[NotNegative, ...], Field(strict=False, min_length=1, max_length=20)
    ]
    """When moves may be made, minutes from now, at ends of intervals."""
    max_iterations: Count
    """Most iterations of one solve."""
