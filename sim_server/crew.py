"""The simulated board operator: decides, and sometimes does not do as suggested.

Pure logic: plant time is passed in, the randomness is its own seeded generator,
and what it decides is returned as actions for the plant. It acts only while
the plant's watchdog calls the advice usable, and forgets an action it had in
mind when the advice is withdrawn or changed meanwhile.
"""

from __future__ import annotations

import math
import random
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

FOLLOW_DELAY_S: Final = (30.0, 110.0)
LATE_DELAY_S: Final = (900.0, 1800.0)
PART_SHARE: Final = 0.5
PART_ONE_MOVE_CHANCE: Final = 0.3
OPPOSE_CHANCE: Final = 0.5
SAME_VALUE: Final = 1e-6

BOARD_LIMITS: Final[Mapping[str, tuple[float, float]]] = {
    "FIC-2103": (6500.0, 9500.0),
    "TIC-2107": (97.0, 104.0),
}
"""What an operator of this invented plant would never leave [kg/h], [degC]."""


class CrewMode(StrEnum):
    """How the crew treats advice."""

    FOLLOWS = "follows"
    LATE = "late"
    PART = "part"
    IGNORES = "ignores"
    OPPOSES = "opposes"


@dataclass(frozen=True, slots=True)
class BoardView:
    """What the crew sees on its screens at one instant."""

    usable: bool
    made_at: float | None
    targets: Mapping[str, float | None]
    """Suggested setpoints by loop, e.g. `{"FIC-2103": 7800.0}`."""
    setpoints: Mapping[str, float]
    in_manual: frozenset[str]
    """Loops whose setpoint it makes no sense to move."""


@dataclass(frozen=True, slots=True)
class BoardAction:
    """One setpoint entered at the board."""

    signal: str
    value: float


@dataclass(frozen=True, slots=True)
class _Suggestion:
    """What makes a suggestion the same one: its targets and when they were made."""

    made_at: float | None
    targets: tuple[tuple[str, float], ...]


class Crew:
    """Looks at the board now and then, and acts on what it sees."""

    def __init__(self, mode: CrewMode, seed: int) -> None:
        self._mode = mode
        self._random = random.Random(f"crew {seed}")
        self._answered: _Suggestion | None = None
        self._pending: tuple[_Suggestion, float] | None = None

    def look(self, now: float, view: BoardView) -> tuple[BoardAction, ...]:
        """What the crew enters at plant time `now` [s]; mostly nothing."""
        if self._mode is CrewMode.IGNORES:
            return ()
        suggestion = _suggestion(view) if view.usable else None
        if suggestion is None or suggestion == self._answered:
            self._pending = None
            return ()
        if self._pending is None or self._pending[0] != suggestion:
            self._pending = (suggestion, now + self._delay_s())
            return ()
        if now < self._pending[1]:
            return ()
        self._pending = None
        self._answered = suggestion
        return self._actions(suggestion, view)

    def _delay_s(self) -> float:
        low, high = LATE_DELAY_S if self._mode is CrewMode.LATE else FOLLOW_DELAY_S
        return self._random.uniform(low, high)

    def _actions(self, suggestion: _Suggestion, view: BoardView) -> tuple[BoardAction, ...]:
        open_moves = [
            (loop, target)
            for loop, target in suggestion.targets
            if loop not in view.in_manual and abs(target - view.setpoints[loop]) > SAME_VALUE
        ]
        share = 1.0
        if self._mode is CrewMode.PART:
            share = PART_SHARE
            if len(open_moves) > 1 and self._random.random() < PART_ONE_MOVE_CHANCE:
                open_moves = [self._random.choice(open_moves)]
        elif self._mode is CrewMode.OPPOSES:
            share = -1.0
            if self._random.random() >= OPPOSE_CHANCE:
                return ()
        return tuple(
            BoardAction(f"{loop}.SP", _entered(loop, view.setpoints[loop], target, share))
            for loop, target in open_moves
        )


def _suggestion(view: BoardView) -> _Suggestion | None:
    """The suggestion on the screen, or None when no number stands there."""
    targets = tuple(
        (loop, target)
        for loop, target in sorted(view.targets.items())
        # Not every source of advice filters what it writes: a person would not enter "NaN".
        if target is not None and math.isfinite(target)
    )
    return _Suggestion(view.made_at, targets) if targets else None


def _entered(loop: str, setpoint: float, target: float, share: float) -> float:
    """The setpoint that the crew enters, inside the board's own limits."""
    if share == 1.0:
        return target
    low, high = BOARD_LIMITS[loop]
    return min(max(setpoint + share * (target - setpoint), low), high)
