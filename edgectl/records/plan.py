"""What goes to the worker and what comes back: plain numbers and words only.

A request carries *everything* the worker needs, the estimator's memory
included, so that a killed worker loses nothing and any journalled cycle can be
solved again.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final, TypeAlias

from edgectl.records.measurements import Measurement, MovePosition

Memory: TypeAlias = Mapping[str, tuple[float, ...]]
"""Named rows of numbers that the estimator and planner carry from cycle to cycle."""

EMPTY_MEMORY: Final[Memory] = {}


@dataclass(frozen=True, slots=True)
class CvLimits:
    """A CV's limits this cycle, in its unit, after limits that are tags were read."""

    cv: str
    low: float | None
    high: float | None
    setpoint: float | None


@dataclass(frozen=True, slots=True)
class PlanRequest:
    """One cycle's question to the worker."""

    request_id: str
    cycle: int
    made_at: float
    elapsed_s: float
    """Plant time since the memory was made; 0 for a cold start."""
    soft_deadline_s: float
    """Wall seconds after which the engine returns its best iterate."""
    measurements: tuple[Measurement, ...]
    positions: tuple[MovePosition, ...]
    limits: tuple[CvLimits, ...]
    memory: Memory


@dataclass(frozen=True, slots=True)
class CvEstimate:
    """What the model and its bias say about one CV now."""

    cv: str
    value: float
    """Bias-corrected, in the CV's unit."""
    bias: float
    """In the CV's planning coordinate (a logarithm for impurities)."""
    bias_age_s: float
    state: str
    """`live`, `ageing` (bias frozen, limit tightened) or `dropped`."""
    low: float | None
    """Limits as planned with, tightening included."""
    high: float | None


@dataclass(frozen=True, slots=True)
class ProfileStage:
    """One stage of the estimated column, for people to look at."""

    stage: int
    temperature_degc: float
    liquid_fraction: float
    """Mole fraction of the light component in the liquid [-]."""


@dataclass(frozen=True, slots=True)
class Estimate:
    """What is believed about the column at the instant of the request."""

    cvs: tuple[CvEstimate, ...]
    disturbances: Mapping[str, float]
    """Estimated unmeasured disturbances by name, e.g. feed composition."""
    profile: tuple[ProfileStage, ...]
    warnings: tuple[str, ...]
    """Stable words: `model_mismatch`, `bias_at_clip`, ... empty when all is well."""
    memory: Memory


@dataclass(frozen=True, slots=True)
class PlannedMove:
    """One MV's planned path, in the tag's unit."""

    mv: str
    position: float
    """Where the plan starts from: the plant's own value."""
    first: float
    """Value after the first move, rounded to what the operator can enter."""
    destination: float
    """Largest departure over the first three moves: is it worth a hand?"""
    path: tuple[float, ...]
    """Value over each interval of `Plan.times_min`."""


@dataclass(frozen=True, slots=True)
class CvPrediction:
    """One CV over the horizon, in its unit, at the ends of the intervals."""

    cv: str
    with_moves: tuple[float, ...]
    without_moves: tuple[float, ...]
    taken_alone: Mapping[str, tuple[float, ...]]
    """By MV: the same if only that MV's move is taken."""


@dataclass(frozen=True, slots=True)
class SolverStatistics:
    engine: str
    status: str
    converged: bool
    iterations: int
    estimate_ms: float
    plan_ms: float
    total_ms: float


@dataclass(frozen=True, slots=True)
class Plan:
    """A finished estimate and plan. Not advice yet: the parent vets it first."""

    request_id: str
    cycle: int
    estimate: Estimate
    times_min: tuple[float, ...]
    """Interval ends, minutes from `made_at`."""
    moves: tuple[PlannedMove, ...]
    predictions: tuple[CvPrediction, ...]
    cost_with: float
    cost_without: float
    """The engine's own cost, with and without the rounded moves [-]; vetting recomputes both."""
    gives_way: tuple[str, ...]
    """CVs whose limits the plan cannot keep."""
    statistics: SolverStatistics


# What a request can end in: values, matched with `assert_never`.


@dataclass(frozen=True, slots=True)
class Overrun:
    """Past the hard deadline: the worker was killed, nothing was read."""

    budget_s: float
    killed: bool


@dataclass(frozen=True, slots=True)
class WorkerLost:
    """The worker died or spoke nonsense."""

    why: str


@dataclass(frozen=True, slots=True)
class SolverWarming:
    """No worker has built and solved once yet."""

    why: str


@dataclass(frozen=True, slots=True)
class NoPlan:
    """The worker answered, and says why it has no plan."""

    request_id: str
    reason: str
    sentence: str
    statistics: SolverStatistics | None
    estimate: Estimate | None


@dataclass(frozen=True, slots=True)
class BadInputs:
    """Required data are missing: nothing was asked of the worker."""

    tags: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class NoData:
    """The plant could not be read: there is nothing to judge."""

    why: str
    mismatch: bool
    """The server answers, but not as the site file says: needs a person."""


Outcome: TypeAlias = Plan | NoPlan | Overrun | WorkerLost | SolverWarming | BadInputs | NoData
SolveOutcome: TypeAlias = Plan | NoPlan | Overrun | WorkerLost | SolverWarming
