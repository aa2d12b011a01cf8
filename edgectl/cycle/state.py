"""What the loop carries from cycle to cycle, by value, and what a cycle's decision is."""

from __future__ import annotations

from dataclasses import dataclass, field

from edgectl.cycle.pace import PaceState
from edgectl.cycle.positions import Seen
from edgectl.cycle.standing import StandingState
from edgectl.cycle.vetting import Vetting
from edgectl.records.advice import Advice
from edgectl.records.cycle_record import FollowUp
from edgectl.records.plan import EMPTY_MEMORY, Memory


@dataclass(frozen=True, slots=True)
class LoopState:
    """All there is. A fresh one is a cold start."""

    seen: Seen = field(default_factory=Seen)
    memory: Memory = field(default_factory=lambda: EMPTY_MEMORY)
    memory_at: float | None = None
    """Plant time of the estimate in `memory`."""
    unanswered: int = 0
    """Answers in a row without an estimate: a memory that nobody can use is given up."""
    standing: StandingState = field(default_factory=StandingState)
    pace: PaceState = field(default_factory=PaceState)
    advice: Advice | None = None
    """As last decided; what a hold repeats."""


@dataclass(frozen=True, slots=True)
class Condition:
    """Something that is so in this cycle and that people should find in the journal."""

    event: str
    subject: str
    severity: str
    """One of NE 107's four signals, as in `EventRecord`."""
    sentence: str


@dataclass(frozen=True, slots=True)
class Decision:
    """What one cycle tells the people, and the state after it."""

    state: LoopState
    advice: Advice
    vetting: Vetting | None
    follow_ups: tuple[FollowUp, ...]
    conditions: tuple[Condition, ...]
