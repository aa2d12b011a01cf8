"""`[tags.*]`: what is read from the plant, and what it means."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated, Final

from pydantic import Field

from edgectl.records.units import UNITS, Basis, Unit
from edgectl.settings.fields import (
    NodeText,
    NotNegative,
    Number,
    Positive,
    Section,
    Text,
    UnitName,
)

ANALYSER_STALE_CYCLES: Final = 2.5
"""An analyser without a new result for this many of its cycles is stale."""


class Role(StrEnum):
    """What a tag is to the column."""

    FEED_FLOW = "feed_flow"
    FEED_TEMPERATURE = "feed_temperature"
    REFLUX_FLOW = "reflux_flow"
    STEAM_FLOW = "steam_flow"
    DISTILLATE_FLOW = "distillate_flow"
    BOTTOMS_FLOW = "bottoms_flow"
    TRAY_TEMPERATURE = "tray_temperature"
    TOP_PRESSURE = "top_pressure"
    DIFFERENTIAL_PRESSURE = "differential_pressure"
    DRUM_LEVEL = "drum_level"
    SUMP_LEVEL = "sump_level"
    ANALYSER = "analyser"
    LOOP_SETPOINT = "loop_setpoint"
    LOOP_OUTPUT = "loop_output"
    LOOP_MODE = "loop_mode"
    ADVICE_SWITCH = "advice_switch"
    LIMIT = "limit"
    """A tag that holds a limit or a setpoint of an MV or CV."""


class Analyser(Section):
    """How an analyser's results come."""

    cycle_s: Positive
    """Plant seconds between results."""
    delay_s: Annotated[Number, Field(ge=0, le=2400)]
    """Plant seconds from the sample to the result's source timestamp; the model's own past is
    kept no longer."""
    detection_limit: NotNegative
    """In the tag's unit; a result at or below it means "at most"."""
    repeat_limit: Annotated[int, Field(ge=2, le=1000)]
    """This many equal results in a row count as a dead analyser."""


class Tag(Section):
    """One value that is read every cycle."""

    description: Text
    """What it is, for people."""
    node: NodeText
    """Where it is read."""
    role: Annotated[Role, Field(strict=False)]
    """What it is to the column."""
    unit: UnitName
    """Engineering unit, as the server has it."""
    basis: Annotated[Basis, Field(strict=False)] = Basis.NONE
    """What the unit does not say: mass or mole, absolute or gauge."""
    low: Number
    """Values below are not used."""
    high: Number
    """Values above are not used."""
    stale_after_s: Positive | None = None
    """Plant seconds of source-timestamp age after which a value is not used."""
    rate_limit_per_min: Positive | None = None
    """A faster change than this is not believed at once."""
    required: bool = False
    """Without a usable value: no plan, and a hold."""
    substitute: Number | None = None
    """Used, and said so, when the tag is not usable."""
    stage: Annotated[int, Field(ge=0, le=199)] | None = None
    """Stage of a tray temperature."""
    analyser: Analyser | None = None
    """How an analyser's results come."""

    @property
    def stale_limit_s(self) -> float:
        """Source-timestamp age at which the value is stale, plant seconds [s]."""
        if self.stale_after_s is not None:
            return self.stale_after_s
        assert self.analyser is not None, "a site file without either is refused"
        return ANALYSER_STALE_CYCLES * self.analyser.cycle_s

    @property
    def engineering_unit(self) -> Unit:
        return UNITS[self.unit]
