"""What the decisions need to know about a site: small frozen values, filled from the site file.

Units are those of the tags. Times are plant seconds unless the name says wall.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

Limit = float | str | None
"""A number, the name of the tag that holds it, or none."""


@dataclass(frozen=True, slots=True)
class AnalyserPolicy:
    """How an analyser's results come."""

    delay_s: float
    """From the sample to the result's source timestamp."""
    detection_limit: float
    repeat_limit: int
    """This many equal results in a row count as a dead analyser."""


@dataclass(frozen=True, slots=True)
class TagPolicy:
    """What one tag must be like to be used."""

    tag: str
    description: str
    unit: str
    low: float
    high: float
    stale_after_s: float | None
    """By source time; None for laboratory results, which are late by nature."""
    required: bool
    use_uncertain: bool
    rate_limit_per_min: float | None = None
    substitute: float | None = None
    analyser: AnalyserPolicy | None = None


@dataclass(frozen=True, slots=True)
class MovePolicy:
    """One MV: where it stands on the plant, and how a person may be asked to move it."""

    mv: str
    description: str
    unit: str
    position: str
    measured: str
    output: str
    mode: str
    automatic_modes: tuple[int, ...]
    low: float | str
    high: float | str
    rate_limit_per_min: float
    max_move: float
    worthwhile_move: float
    increment: float
    weight: float
    scale: float
    price: float
    follow_tolerance: float
    follow_cycles: int
    in_ratio_to: str | None = None
    """Tag of the feed that the base layer keeps this MV in ratio to."""
    ratio_filter_s: float = 0.0


@dataclass(frozen=True, slots=True)
class CvPolicy:
    """One CV and its limits."""

    cv: str
    description: str
    unit: str
    measured: str
    logarithmic: bool
    quality: bool
    """False for a CV that is only tracked: it has no limits and no cost."""
    hard_low: float | None
    hard_high: float | None
    low: Limit
    high: Limit
    setpoint: Limit
    weight: float
    soft_linear: float
    soft_quadratic: float


@dataclass(frozen=True, slots=True)
class CyclePolicy:
    """The rhythm, and what is enforced in it."""

    period_s: float
    budget_s: float
    """Wall seconds, as the site file asks for; see `runtime/schedule.py` for what is enforced."""
    journal_wait_s: float
    read_timeout_s: float
    write_timeout_s: float
    hold_limit: int
    validity_s: float
    warm_up_cycles: int
    restore_max_age_s: float
    future_tolerance_s: float
    """How far ahead of the receipt a source time may be."""


@dataclass(frozen=True, slots=True)
class AdvicePolicy:
    """How often a person is asked for a hand."""

    interval_s: float
    act_within_s: float
    repeat_limit_h: int


@dataclass(frozen=True, slots=True)
class Policies:
    """All of them. Mappings are in the order of the site file."""

    tags: Mapping[str, TagPolicy]
    moves: Mapping[str, MovePolicy]
    cvs: Mapping[str, CvPolicy]
    cycle: CyclePolicy
    advice: AdvicePolicy
    switch: str | None
    """Tag of the operator's switch for advice; None: always wanted."""
