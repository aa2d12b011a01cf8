"""What the first two frames say: the setup goes down, the worker's readiness comes back."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

BRAIN = "edgectl.optimisation.planner:build_brain"


@dataclass(frozen=True, slots=True)
class Setup:
    """Everything from which a worker builds its brain; the same for each one that is started."""

    site: Mapping[str, Any]
    """Plain JSON: the brain's maker takes it as a dict."""
    brain: str = BRAIN
    """`module:function`, imported in the worker only."""
    rehearsal: bool = False
    """The plant is simulated: drills are allowed."""
    slow_cycles: tuple[int, int] | None = None
    """A drill: in these cycles, first to last, the worker sleeps before it answers."""
    slow_s: float = 60.0
    """For how long, wall seconds. Longer than any budget: the loop has to end it."""

    def __post_init__(self) -> None:
        if ":" not in self.brain:
            raise ValueError(f"brain {self.brain!r}: expected module:function")
        if self.slow_cycles is not None and not self.rehearsal:
            raise ValueError("slow_cycles is a drill: refused unless rehearsal is true")


@dataclass(frozen=True, slots=True)
class Ready:
    """The worker has built its brain and solved once."""

    engine: str
    model_hash: str
    build_ms: float
    solve_ms: float
