"""Drills: faults that happen to the plant at fixed plant times.

A drill lies on top of the plant: it changes what its instruments show, what
the board does or whether the server answers, and never the plant's own noise
and disturbances, so that a drilled run can be compared with an undrilled one.
Pure logic, plant seconds since the plant's start passed in.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from enum import StrEnum
from typing import Final, Protocol, runtime_checkable

from sim_server.signals import BAD_SENSOR_FAILURE, GOOD, Mode, Signal


class DrillName(StrEnum):
    """The drills of the rehearsal plant."""

    NONE = "none"
    BAD_QUALITY = "bad-quality"
    SERVER_DROP = "server-drop"
    FROZEN_ANALYSER = "frozen-analyser"
    LOOP_MANUAL = "loop-manual"
    VALVE_LIMIT = "valve-limit"
    OPERATOR_OFF = "operator-off"
    SLOW_SOLVER = "slow-solver"
    """Happens in the runtime; the plant does nothing."""


BEGIN_S: Final = 20 * 60.0
LASTS_S: Final[Mapping[DrillName, float]] = {
    DrillName.NONE: 0.0,
    DrillName.BAD_QUALITY: 8 * 60.0,
    DrillName.SERVER_DROP: 3 * 60.0,
    DrillName.FROZEN_ANALYSER: 240 * 60.0,
    DrillName.LOOP_MANUAL: 15 * 60.0,
    DrillName.VALVE_LIMIT: 10 * 60.0,
    DrillName.OPERATOR_OFF: 10 * 60.0,
    DrillName.SLOW_SOLVER: 0.0,
}
ANALYSER_RENEWS_S: Final = 60 * 60.0
"""A frozen analyser repeats its result with new timestamps for so long, then goes quiet."""

BAD_SIGNAL: Final = "TI-2107.PV"
FROZEN_SIGNAL: Final = "AI-2116.PV"
MANUAL_LOOP: Final = "FIC-2103"
LIMITED_VALVE: Final = "FIC-2104"
VALVE_MARGIN: Final = 2.0
"""A stuck steam valve opens this far less than it stood open when it stuck [%]."""


@dataclass(frozen=True, slots=True)
class BoardWrite:
    """The board writes a signal."""

    signal: str
    value: float


@dataclass(frozen=True, slots=True)
class Switch:
    """The board turns the switch for advice."""

    on: bool


@dataclass(frozen=True, slots=True)
class ValveLimit:
    """A control valve opens no further than `high` [%]; None frees it again."""

    loop: str
    high: float | None


Order = BoardWrite | Switch | ValveLimit


@runtime_checkable
class LimitsValves(Protocol):
    """A plant whose valves can be kept from opening fully."""

    def limit_valve(self, loop: str, high: float | None) -> None: ...


class Drill:
    """One drill on its timetable.

    Parameters
    ----------
    name : DrillName
    begin_s : float
        Plant seconds after the plant's start [s].
    lasts_s : float, optional
        Plant seconds [s]; the drill's own usual length when left out.
    """

    def __init__(
        self, name: DrillName, begin_s: float = BEGIN_S, lasts_s: float | None = None
    ) -> None:
        self.name = name
        self.begin_s = begin_s
        self.end_s = begin_s + (LASTS_S[name] if lasts_s is None else lasts_s)
        self._was_active = False
        self._mode_before: float = Mode.AUTOMATIC
        self._frozen: Signal | None = None

    @property
    def needs_valve_limit(self) -> bool:
        return self.name is DrillName.VALVE_LIMIT

    def active(self, now_s: float) -> bool:
        return self.begin_s <= now_s < self.end_s

    def endpoint_up(self, now_s: float) -> bool:
        """False while the OPC UA server is to be away."""
        return not (self.name is DrillName.SERVER_DROP and self.active(now_s))

    def orders(self, now_s: float, signals: Mapping[str, Signal]) -> tuple[Order, ...]:
        """What happens on the plant as the drill begins and as it ends; else nothing."""
        active = self.active(now_s)
        if active == self._was_active:
            return ()
        self._was_active = active
        if self.name is DrillName.LOOP_MANUAL:
            signal = f"{MANUAL_LOOP}.MODE"
            if active:
                self._mode_before = signals[signal].value
                return (BoardWrite(signal, Mode.MANUAL),)
            return (BoardWrite(signal, self._mode_before),)
        if self.name is DrillName.VALVE_LIMIT:
            opening = signals[f"{LIMITED_VALVE}.OP"].value
            return (ValveLimit(LIMITED_VALVE, opening - VALVE_MARGIN if active else None),)
        if self.name is DrillName.OPERATOR_OFF:
            return (Switch(on=not active),)
        return ()

    def seen(self, now_s: float, signals: Mapping[str, Signal]) -> Mapping[str, Signal]:
        """The signals as the instruments show them with the drill's fault."""
        if not self.active(now_s):
            return signals
        if self.name is DrillName.BAD_QUALITY:
            broken = replace(signals[BAD_SIGNAL], status=BAD_SENSOR_FAILURE)
            return {**signals, BAD_SIGNAL: broken}
        if self.name is DrillName.FROZEN_ANALYSER:
            return {**signals, FROZEN_SIGNAL: self._frozen_result(now_s, signals[FROZEN_SIGNAL])}
        return signals

    def _frozen_result(self, now_s: float, current: Signal) -> Signal:
        if self._frozen is None:
            self._frozen = replace(current, status=GOOD)
        if now_s < self.begin_s + ANALYSER_RENEWS_S:
            # Each analysis still "completes": its timestamp is new, its result is not.
            self._frozen = replace(self._frozen, source_time_s=current.source_time_s)
        return self._frozen
