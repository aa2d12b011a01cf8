"""What the journal keeps of one cycle: the bodies of its entries.

The report, the live view and every later reading of the journal are made from
these records alone.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from edgectl.records.advice import Advice, Delivery, SuggestedMove
from edgectl.records.measurements import Measurement, MovePosition
from edgectl.records.plan import (
    CvLimits,
    CvPrediction,
    Estimate,
    Memory,
    PlannedMove,
    SolverStatistics,
)
from edgectl.records.readings import Reading


@dataclass(frozen=True, slots=True)
class PhaseTimings:
    """Wall milliseconds of each phase of one cycle."""

    late_ms: float
    """How long after its grid instant the cycle started."""
    read_ms: float
    validate_ms: float
    solve_ms: float
    """Estimate + plan as the loop saw it, pipe included."""
    decide_ms: float
    """Vetting and decision."""


@dataclass(frozen=True, slots=True)
class LoopLag:
    """How late the event loop ran its probe since the last cycle [ms]."""

    p99_ms: float
    max_ms: float
    p90_ms: float = 0.0
    samples: int = 0
    """With these the p99 of many cycles can be bounded; 0 in records that lack them."""


@dataclass(frozen=True, slots=True)
class FollowUp:
    """What the operator did with a standing suggestion."""

    mv: str
    suggested: float
    before: float
    """Position when it was suggested."""
    now: float
    outcome: str
    """`pending`, `taken`, `part_taken`, `ignored`, `opposed`, `superseded`."""


@dataclass(frozen=True, slots=True)
class Provenance:
    """Which software, site file and model made this record."""

    edgectl_version: str
    site_hash: str
    model_hash: str
    insecure: bool
    """The session uses security mode None: for testing only."""


@dataclass(frozen=True, slots=True)
class DecisionRecord:
    """Everything one cycle saw, thought and decided. Durable before it is published."""

    cycle: int
    made_at: float
    skipped_cycles: int
    readings: tuple[Reading, ...]
    source_problem: str | None
    """Why there are no readings, when there are none."""
    measurements: Mapping[str, Measurement]
    positions: Mapping[str, MovePosition]
    limits: tuple[CvLimits, ...]
    memory_in: Memory
    """The memory the request carried: with it and the measurements, `replay` can solve again."""
    outcome: str
    """`plan`, `no_plan`, `overrun`, `worker_lost`, `solver_warming`, `bad_inputs`, `no_data`
    or `not_asked`."""
    outcome_detail: str
    estimate: Estimate | None
    times_min: tuple[float, ...]
    planned: tuple[PlannedMove, ...]
    predictions: tuple[CvPrediction, ...]
    cost_with: float | None
    cost_without: float | None
    gives_way: tuple[str, ...]
    vetting: tuple[str, ...]
    """Findings of the vetting; empty when the plan passed or none was vetted."""
    follow_ups: tuple[FollowUp, ...]
    advice: Advice
    statistics: SolverStatistics | None
    budget_ms: float
    """The hard budget as enforced, wall milliseconds."""
    timings: PhaseTimings
    loop_lag: LoopLag
    provenance: Provenance
    memory_at: float | None = None
    """Instant of `memory_in`; None for a cold start."""
    recomputed_cost_with: float | None = None
    recomputed_cost_without: float | None = None
    """What the vetting made of both costs, by its own formula."""


@dataclass(frozen=True, slots=True)
class DeliveryRecord:
    """What was written to the server after a decision, chained behind it."""

    delivery: Delivery
    decision_seq: int | None
    """None when the decision did not become durable in time: then `valid` is false."""
    journal_ms: float
    publish_ms: float
    previous_record_bytes: int


@dataclass(frozen=True, slots=True)
class WithdrawalRecord:
    reason: str
    sentence: str
    delivery: Delivery
    moves: tuple[SuggestedMove, ...]


@dataclass(frozen=True, slots=True)
class EventRecord:
    """One root cause, raised once and cleared once, with a count of cycles."""

    event: str
    """Stable word, e.g. `plant_unreachable`, `over_budget`, `tag_not_used`."""
    subject: str
    """Tag, MV, CV or edge concerned; empty when none."""
    raised: bool
    severity: str
    """Modelled on NE 107: failure, function_check, out_of_specification or
    maintenance_required."""
    cycles: int
    sentence: str


@dataclass(frozen=True, slots=True)
class OpeningRecord:
    """The runtime started."""

    provenance: Provenance
    engine: str
    site: str
    restored_from_seq: int | None
    restored: str
    """`cold` or `memory of cycle N`, and why."""
    speed: float
    period_s: float
    budget_s: float
    site_content: Mapping[str, Any] = field(default_factory=dict)
    """The site file as loaded (`Site.as_dict`): units, limits and tags for whoever reads the
    journal later, without the file. A site file never holds a password."""
    schema: int = 1


@dataclass(frozen=True, slots=True)
class ClosingRecord:
    """The runtime ended, and said so. After a crash there is none."""

    reason: str
    """`stopping`, `finished` or `fault`."""
    sentence: str
    cycles: int
    """Run since the opening."""
