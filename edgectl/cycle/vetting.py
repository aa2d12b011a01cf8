"""The independent check of a plan before it may become advice.

Shares no code with any engine. `vet_plan` asks whether the plan is sound: is it
the answer to this cycle's question, does it start where the plant stands, does
every first move keep its limits, is it better than doing nothing by our own
reckoning. `vet_targets` asks the same of what will really be published, which may
be only a part of the plan. A finding is a sentence; no finding means passed.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Final

from edgectl.cycle.cost import Cost, CvTarget, coordinate, cost_of
from edgectl.cycle.policies import CvPolicy, MovePolicy, Policies
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import CvPrediction, Plan, PlannedMove, PlanRequest

SAME: Final = 1e-6
"""Relative difference below which two numbers are the same."""
COST_SLACK: Final = 0.02
COST_SLACK_SHARE: Final = 0.005
"""A plan may cost this much more than doing nothing: rounding a move costs something."""
COST_AGREES: Final = 0.02
"""Relative difference between the engine's cost and ours that is not believed."""
HARD_SLACK: Final = 0.01
"""In the planning coordinate: closer than this to a hard limit is not a violation."""


@dataclass(frozen=True, slots=True)
class Vetting:
    """What came out."""

    findings: tuple[str, ...]
    cost_with: Cost | None
    cost_without: Cost | None

    @property
    def passed(self) -> bool:
        return not self.findings


def vet_plan(plan: Plan, request: PlanRequest, policies: Policies) -> Vetting:
    """Whether a plan is sound enough to suggest anything from it."""
    findings = list(_shape_findings(plan, request, policies))
    if findings:
        # What is not even shaped like an answer is not reckoned with.
        return Vetting(tuple(findings), None, None)
    positions = {position.mv: position for position in request.positions}
    for move in plan.moves:
        findings += _move_findings(move, positions[move.mv], policies.moves[move.mv])
    findings += _limit_findings(plan, request)
    findings += worsened_hard_limits(plan, policies, {p.cv: p.with_moves for p in plan.predictions})
    cost_with, cost_without = _costs(plan, request, policies)
    findings += _cost_findings(plan, cost_with, cost_without)
    return Vetting(tuple(findings), cost_with, cost_without)


def vet_targets(
    targets: Mapping[str, float],
    asks: Collection[str],
    new: Collection[str],
    minutes_since_move: Mapping[str, float],
    positions: Mapping[str, MovePosition],
    policies: Policies,
) -> tuple[str, ...]:
    """Whether the very values that will be published may be.

    Parameters
    ----------
    targets : mapping
        Absolute targets by MV, in the MV's unit.
    asks, new : collection
        MVs that a person is asked to move; those of them asked in this cycle.
    minutes_since_move : mapping
        Since the last suggestion for each MV; absent when there was none.
    """
    findings: list[str] = []
    for mv, target in targets.items():
        policy, at = policies.moves[mv], positions[mv]
        if not math.isfinite(target):
            findings.append(f"{mv}: {target} is not a target")
        if mv not in asks:
            continue
        if at.position is None:
            findings.append(f"{mv}: nobody knows where it stands")
            continue
        findings += _value_findings(mv, target, at.position, at, policy)
        reach = standing_reach(policy)
        if mv in new:
            rate = policy.rate_limit_per_min * minutes_since_move.get(mv, math.inf)
            reach = min(policy.max_move, rate)
        if not abs(target - at.position) <= reach + SAME * policy.scale:
            findings.append(
                f"{mv}: {abs(target - at.position):g} {policy.unit} at once,"
                f" {reach:g} are allowed since the last suggestion"
            )
    return tuple(findings)


def standing_reach(policy: MovePolicy) -> float:
    """How far a standing target may be: what was allowed when it was made, and its rounding."""
    return policy.max_move + policy.increment


def worsened_hard_limits(
    plan: Plan,
    policies: Policies,
    paths: Mapping[str, Sequence[float]],
    *,
    dropped_too: bool = False,
) -> Iterator[str]:
    """Hard limits that these paths break, or break further than doing nothing would.

    A limit that the plan says gives way, and that doing nothing would not keep either by our
    own reckoning, is named, not hidden: no finding. A dropped
    CV fails no plan; with `dropped_too` the model's word, all there is of it, still counts.
    """
    for prediction in plan.predictions:
        policy = policies.cvs[prediction.cv]
        dropped = _state(plan, policy.cv) == "dropped" and not dropped_too
        lost_anyway = policy.cv in plan.gives_way and _leaves_planned(plan, policy, prediction)
        if lost_anyway or dropped:
            continue
        with_moves = hard_excess(policy, paths[policy.cv])
        without = hard_excess(policy, prediction.without_moves)
        if with_moves > max(without, 0.0) + HARD_SLACK:
            limit = policy.hard_high if policy.hard_high is not None else policy.hard_low
            yield (
                f"{policy.cv} would break its limit of {limit:g} {policy.unit},"
                " and would not without the moves"
            )


def _leaves_planned(plan: Plan, policy: CvPolicy, prediction: CvPrediction) -> bool:
    """Whether the planned limits are broken when nothing is moved."""
    estimate = next(found for found in plan.estimate.cvs if found.cv == policy.cv)
    values = prediction.without_moves
    too_high = estimate.high is not None and max(values) > estimate.high
    too_low = estimate.low is not None and min(values) < estimate.low
    return too_high or too_low


def hard_excess(policy: CvPolicy, path: Sequence[float]) -> float:
    """How far a path goes beyond a hard limit, in the planning coordinate; below 0 inside."""
    excess = -math.inf
    values = [coordinate(policy, value) for value in path]
    if policy.hard_high is not None:
        excess = max(values) - coordinate(policy, policy.hard_high)
    if policy.hard_low is not None:
        excess = max(excess, coordinate(policy, policy.hard_low) - min(values))
    return excess


# -- is it an answer at all -------------------------------------------------------------


def _shape_findings(plan: Plan, request: PlanRequest, policies: Policies) -> Iterator[str]:
    if plan.request_id != request.request_id or plan.cycle != request.cycle:
        yield f"answers {plan.request_id!r}, asked was {request.request_id!r}"
        return
    mvs = [move.mv for move in plan.moves]
    if sorted(mvs) != sorted(policies.moves):
        yield f"has moves for {mvs}, asked were {list(policies.moves)}"
        return
    cvs = [prediction.cv for prediction in plan.predictions]
    if len(set(cvs)) != len(cvs) or any(cv not in policies.cvs for cv in cvs):
        yield f"predicts {cvs}, known are {list(policies.cvs)}"
        return
    quality = {name for name, policy in policies.cvs.items() if policy.quality}
    if unpredicted := sorted(quality - set(cvs)):
        yield f"does not predict {', '.join(unpredicted)}"
        return
    yield from _number_findings(plan, policies)


def _number_findings(plan: Plan, policies: Policies) -> Iterator[str]:
    times = plan.times_min
    if not times or not _finite(times) or not _rises(times):
        yield "its time grid does not rise from zero"
        return
    paths: dict[str, Sequence[float]] = {f"path of {m.mv}": m.path for m in plan.moves}
    for prediction in plan.predictions:
        paths |= _paths_of(prediction)
        if set(prediction.taken_alone) != set(policies.moves):
            yield f"{prediction.cv} is not predicted for each move alone"
    for name, path in paths.items():
        if len(path) != len(times):
            yield f"{name} has {len(path)} values for {len(times)} intervals"
        elif not _finite(path):
            yield f"{name} is not finite"
    for prediction in plan.predictions:
        if policies.cvs[prediction.cv].logarithmic:
            for name, path in _paths_of(prediction).items():
                if any(value <= 0.0 for value in path):
                    yield f"{name} is not above zero"
    numbers = [n for m in plan.moves for n in (m.position, m.first, m.destination)]
    if not _finite([*numbers, plan.cost_with, plan.cost_without]):
        yield "a move or a cost is not finite"


def _rises(times: Sequence[float]) -> bool:
    return all(b > a for a, b in zip([0.0, *times[:-1]], times, strict=True))


def _paths_of(prediction: CvPrediction) -> dict[str, Sequence[float]]:
    paths: dict[str, Sequence[float]] = {
        f"{prediction.cv} with the moves": prediction.with_moves,
        f"{prediction.cv} without the moves": prediction.without_moves,
    }
    for mv, path in prediction.taken_alone.items():
        paths[f"{prediction.cv} with {mv} alone"] = path
    return paths


def _finite(numbers: Iterable[float]) -> bool:
    return all(math.isfinite(number) for number in numbers)


# -- is every first move allowed --------------------------------------------------------


def _move_findings(move: PlannedMove, at: MovePosition, policy: MovePolicy) -> Iterator[str]:
    if at.position is None or abs(move.position - at.position) > SAME * policy.scale:
        yield f"{move.mv}: planned from {move.position:g}, the plant stands at {at.position}"
        return
    if abs(move.first - move.position) <= SAME * policy.scale:
        return
    yield from _value_findings(move.mv, move.first, at.position, at, policy)
    if abs(move.first - at.position) > policy.max_move + SAME * policy.scale:
        yield (
            f"{move.mv}: first move of {abs(move.first - at.position):g} {policy.unit},"
            f" {policy.max_move:g} are allowed"
        )


def _value_findings(
    mv: str, target: float, here: float, at: MovePosition, policy: MovePolicy
) -> Iterator[str]:
    if not math.isfinite(target):
        yield f"{mv}: {target} is not a target"
        return
    slack = SAME * policy.scale
    if not at.low - slack <= target <= at.high + slack:
        yield f"{mv}: {target:g} is outside {at.low:g} to {at.high:g} {policy.unit}"
    steps = target / policy.increment
    if abs(steps - round(steps)) > SAME * max(1.0, abs(steps)):
        yield f"{mv}: {target!r} cannot be entered in steps of {policy.increment:g} {policy.unit}"
    step = target - here
    forbidden = {
        Service.FREE: False,
        Service.FIXED: abs(step) > slack,
        Service.RAISE_ONLY: step < -slack,
        Service.LOWER_ONLY: step > slack,
    }[at.service]
    if forbidden:
        yield f"{mv}: would move to {target:g} while {at.service.value} ({at.reason})"


# -- are the limits those that were asked for -------------------------------------------


def _limit_findings(plan: Plan, request: PlanRequest) -> Iterator[str]:
    """Limits may be tightened while a result ages, never loosened."""
    asked = {limits.cv: limits for limits in request.limits}
    for estimate in plan.estimate.cvs:
        limits = asked.get(estimate.cv)
        if limits is None:
            continue
        too_high = limits.high is not None and (
            estimate.high is None or estimate.high > limits.high * (1.0 + SAME)
        )
        too_low = limits.low is not None and (
            estimate.low is None or estimate.low < limits.low - SAME * abs(limits.low)
        )
        if too_high or too_low:
            yield f"{estimate.cv}: planned with wider limits than were asked for"


# -- is it worth it ---------------------------------------------------------------------


def _costs(plan: Plan, request: PlanRequest, policies: Policies) -> tuple[Cost, Cost]:
    planned_with = {estimate.cv: estimate for estimate in plan.estimate.cvs}
    asked = {limits.cv: limits for limits in request.limits}
    priced = []
    for prediction in plan.predictions:
        policy = policies.cvs[prediction.cv]
        if not policy.quality or _state(plan, policy.cv) == "dropped":
            continue
        limits, tightened = asked[policy.cv], planned_with.get(policy.cv)
        target = CvTarget(
            limits.low if tightened is None else tightened.low,
            limits.high if tightened is None else tightened.high,
            limits.setpoint,
        )
        priced.append((policy, target, prediction))
    moved = [(policies.moves[m.mv], m.position, m.path) for m in plan.moves]
    still = [(policies.moves[m.mv], m.position, (m.position,) * len(m.path)) for m in plan.moves]
    with_moves = cost_of(plan.times_min, [(p, t, c.with_moves) for p, t, c in priced], moved)
    without = cost_of(plan.times_min, [(p, t, c.without_moves) for p, t, c in priced], still)
    return with_moves, without


def _cost_findings(plan: Plan, cost_with: Cost, cost_without: Cost) -> Iterator[str]:
    # Asked so that a cost which is not a number fails.
    pairs = (("with", plan.cost_with, cost_with), ("without", plan.cost_without, cost_without))
    for name, told, ours in pairs:
        if not abs(told - ours.total) <= COST_AGREES * max(1.0, abs(told), abs(ours.total)):
            yield f"its cost {name} the moves is said to be {told:.4g}, it is {ours.total:.4g}"
    slack = COST_SLACK + COST_SLACK_SHARE * abs(cost_without.total)
    if not cost_with.total <= cost_without.total + slack:
        yield f"costs {cost_with.total:.4g}, doing nothing costs {cost_without.total:.4g}"


def _state(plan: Plan, cv: str) -> str:
    return next((found.state for found in plan.estimate.cvs if found.cv == cv), "live")
