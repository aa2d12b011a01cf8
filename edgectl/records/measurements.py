"""What validation made of the readings, and where the moves stand."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum


class Verdict(StrEnum):
    """What validation decided about one reading; the word is its reason too."""

    USED = "used"
    BAD_QUALITY = "bad_quality"
    UNCERTAIN_QUALITY = "uncertain_quality"
    NOT_A_NUMBER = "not_a_number"
    OUT_OF_RANGE = "out_of_range"
    INPUT_STALE = "input_stale"
    IN_THE_FUTURE = "in_the_future"
    TOO_FAST = "too_fast"
    FROZEN = "frozen"
    """An analyser that repeats its result beyond belief: treated as no new result."""
    MISSING = "missing"


@dataclass(frozen=True, slots=True)
class Measurement:
    """One tag after validation. `value` is the last usable one, or None."""

    tag: str
    value: float | None
    verdict: Verdict
    sample_time: float | None
    """When the sample was taken: source time minus the analyser's delay."""
    age_s: float
    """Since `sample_time`; infinite when there never was a usable value."""
    is_new: bool
    """A result not used before (a changed timestamp, never a changed value)."""
    at_most: bool = False
    """The reading is at or below the analyser's detection limit."""
    note: str = ""
    """What people should know about a value: `substituted`, `uncertain`, `no_source_time`,
    `step_accepted`; empty when there is nothing to say."""

    @property
    def usable(self) -> bool:
        return self.verdict is Verdict.USED and self.value is not None


class Service(StrEnum):
    """How far an MV can be moved now."""

    FREE = "free"
    FIXED = "fixed"
    RAISE_ONLY = "raise_only"
    LOWER_ONLY = "lower_only"


@dataclass(frozen=True, slots=True)
class MovePosition:
    """Where one MV is on the plant, and what may be done with it."""

    mv: str
    position: float | None
    """The setpoint when the loop is in automatic; the PV otherwise."""
    service: Service
    low: float
    high: float
    reason: str
    """`in_service`, `loop_in_manual`, `output_saturated`, `not_followed`, ..."""
    feed: float | None = None
    """The filtered feed that the base layer keeps this MV in ratio to, if it does."""
    drift: float = 0.0
    """How far the base layer will still move the MV after that feed, in the MV's unit."""


@dataclass(frozen=True, slots=True)
class Measurements:
    """All tags of one cycle after validation."""

    cycle: int
    taken_at: float
    values: Mapping[str, Measurement]
    positions: Mapping[str, MovePosition]
    advice_wanted: bool
    """The operator's switch for advice."""
    missing_required: tuple[str, ...]
    """Required tags that are not usable; not empty means: no plan this cycle."""

    @property
    def complete(self) -> bool:
        return not self.missing_required
