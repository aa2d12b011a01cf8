"""What one cycle tells the people at the board."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Standing(StrEnum):
    """What the runtime vouches for right now."""

    STARTING = "starting"
    ADVISING = "advising"
    HOLDING = "holding"
    SILENT = "silent"


@dataclass(frozen=True, slots=True)
class SuggestedMove:
    """An absolute target in the tag's unit, never an increment."""

    mv: str
    target: float | None
    """None until the first suggestion: then nothing stands at the advisory node."""
    changed: bool
    """True in the cycle in which a person is asked anew. A target that only follows the plant
    (`no_change`) is no new suggestion."""
    made_at: float | None
    reason: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Advice:
    """The moves suggested by one cycle, with validity and reasons."""

    cycle: int
    standing: Standing
    reason: str
    sentence: str
    valid: bool
    valid_until: float
    made_at: float | None
    """When the suggestion last changed; unchanged values keep it."""
    confirmed_cycle: int | None
    """The newest cycle whose vetted plan supports the values."""
    moves: tuple[SuggestedMove, ...]
    notices: tuple[str, ...]
    """Sentences to read beside the suggestion: an analyser out, a limit that gives way."""


@dataclass(frozen=True, slots=True)
class ItemStatus:
    """What the server answered to one write."""

    node: str
    status_code: int


@dataclass(frozen=True, slots=True)
class Delivery:
    """What became of an advice at the server."""

    cycle: int
    valid: bool
    """`valid` as it stands at the server after this delivery."""
    complete: bool
    items: tuple[ItemStatus, ...]
    problem: str | None
