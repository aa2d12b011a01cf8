"""What the simulated plant shows to its OPC UA server and to its crew.

The plant (`column`, `base_layer`, `instruments`, `disturbances`) knows nothing
of OPC UA; the server knows nothing of the column. Both know this page.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import IntEnum
from typing import Final, Protocol

GOOD: Final = 0x00000000
UNCERTAIN_LAST_USABLE: Final = 0x40900000
BAD_SENSOR_FAILURE: Final = 0x808C0000
BAD_OUT_OF_SERVICE: Final = 0x808D0000


class Mode(IntEnum):
    """Loop modes as the MODE node shows them."""

    MANUAL = 0
    AUTOMATIC = 1
    CASCADE = 2


@dataclass(frozen=True, slots=True)
class SignalSpec:
    """One published signal, e.g. `FIC-2103.SP` or `AI-2115.PV`."""

    name: str
    description: str
    unit: str
    """A name in `edgectl.records.units.UNITS`; `-` for MODE."""
    low: float
    high: float
    """EURange."""
    integer: bool = False
    board_writable: bool = False
    """Loop setpoints, outputs and modes: user `board` only."""


@dataclass(frozen=True, slots=True)
class Signal:
    """A published value. `source_time_s` is plant seconds since the plant's start."""

    value: float
    status: int
    source_time_s: float


class Plant(Protocol):
    """The simulated plant as its server and its crew see it."""

    @property
    def specs(self) -> tuple[SignalSpec, ...]: ...

    @property
    def time_s(self) -> float:
        """Plant seconds since the plant's start."""

    @property
    def signals(self) -> Mapping[str, Signal]:
        """Current values by name, noise, drift and faults included."""

    def advance(self, until_s: float) -> None:
        """Integrate to that instant, in fixed steps of one plant second."""

    def write(self, name: str, value: float) -> None:
        """A board action on a writable signal.

        Raises ValueError: unknown, not writable, out of range.
        """

    def true_values(self) -> Mapping[str, float]:
        """What no instrument shows; for scoring only, never published."""
