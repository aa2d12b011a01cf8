"""When a person is asked for a hand.

A plan is made every cycle; a suggestion changes only when it is worth it:

- not before `interval_s` has passed, unless a hard limit is about to be broken
  and the moves would keep it: then `act_within_s` is enough;
- at most `repeat_limit_h` times an hour, the last of them kept for such a need;
- an MV whose planned *destination* is at least `worthwhile_move` away. Judging the
  first move instead would deadlock: move suppression keeps every first move small;
- by the plan's first move, which the planner has rounded to what can be entered;
- back from where it was just moved to only for twice the reason;
- not while the base layer is moving the MV after the feed: the number would be old
  before anyone could enter it.

A suggestion that was not taken stays while the plans still point there; when they
no longer do, its target becomes the present position. So does a target from which
the plant has wandered (the base layer keeps reflux in ratio to the feed): whoever
reads an old number must not be led back to it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Final

from edgectl.cycle.policies import MovePolicy, Policies
from edgectl.cycle.suggestion import Suggestion
from edgectl.cycle.vetting import hard_excess, standing_reach, worsened_hard_limits
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import Plan, PlannedMove

HOUR_S: Final = 3600.0
SOON_MIN: Final = 40.0
"""A hard limit broken within this time is about to be broken."""
REVERSAL_S: Final = 1200.0
"""For this long after a suggestion the way back takes twice the reason."""
REVERSAL_FACTOR: Final = 2.0


@dataclass(frozen=True, slots=True)
class PaceState:
    """What stands at the board, and when hands were asked for."""

    suggestions: Mapping[str, Suggestion] = field(default_factory=dict)
    asked_at: tuple[float, ...] = ()
    """Times of the last hour's suggestions."""
    last_step: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    """By MV: when it was last suggested to move, and by how much."""


@dataclass(frozen=True, slots=True)
class Choice:
    """What shall stand at the board after this cycle."""

    targets: Mapping[str, float]
    """Every MV that has a target."""
    asks: frozenset[str]
    """MVs that a person is asked to move, new or standing."""
    new: frozenset[str]
    """Those of them asked in this cycle."""
    unlike: frozenset[str]
    """MVs whose move alone would break a hard limit that the moves together keep."""


def choose(
    state: PaceState,
    plan: Plan,
    positions: Mapping[str, MovePosition],
    now: float,
    policies: Policies,
) -> Choice:
    """The targets that this cycle's vetted plan supports."""
    moves = {move.mv: move for move in plan.moves}
    targets, asks = {}, set()
    for mv, policy in policies.moves.items():
        standing, at = state.suggestions.get(mv), positions[mv]
        if standing is not None and _still_holds(standing, moves[mv], at, policy):
            targets[mv] = standing.target
            if standing.open:
                asks.add(mv)
        elif at.position is not None:
            targets[mv] = as_it_stands(at, policy)
    new: frozenset[str] = frozenset()
    if _may_ask(state, now, policies, urgent=_urgent(plan, policies)):
        wanted = {
            mv
            for mv, policy in policies.moves.items()
            if _worth_a_hand(state, moves[mv], positions[mv], now, policy)
            and not (mv in asks and _near(targets[mv], moves[mv].first, policy.worthwhile_move))
        }
        new = _safe_together(plan, policies, moves, positions, asks, wanted)
    targets |= {mv: moves[mv].first for mv in new}
    asks |= new
    if breaks_alone(plan, policies, asks):
        # What is left of an earlier suggestion is no longer safe without the rest of it.
        asks -= asks - new
        targets |= {
            mv: as_it_stands(positions[mv], policies.moves[mv])
            for mv in targets
            if mv not in asks and positions[mv].position is not None
        }
    return Choice(targets, frozenset(asks), new, _unlike(plan, policies, asks))


def as_it_stands(at: MovePosition, policy: MovePolicy) -> float:
    """The present position as a target: inside the limits, as an operator could enter it."""
    assert at.position is not None
    low = math.ceil(at.low / policy.increment - 1e-9) * policy.increment
    high = math.floor(at.high / policy.increment + 1e-9) * policy.increment
    nearest = round(at.position / policy.increment) * policy.increment
    if low > high:
        return at.position
    return round(min(max(nearest, low), high), 9)


def outside_reach(positions: Mapping[str, MovePosition], policies: Policies) -> str | None:
    """An MV in service that stands outside its limits, farther than one move reaches back."""
    for mv, policy in policies.moves.items():
        at = positions[mv]
        if at.position is None or at.service is Service.FIXED:
            continue
        beyond = max(at.low - at.position, at.position - at.high)
        if beyond > policy.max_move:
            return mv
    return None


def asked(state: PaceState, choice: Choice, now: float) -> tuple[float, ...]:
    """Times of the last hour's suggestions, this cycle's included."""
    recent = tuple(at for at in state.asked_at if now - at < HOUR_S)
    return (*recent, now) if choice.new else recent


def breaks_alone(plan: Plan, policies: Policies, asks: set[str] | frozenset[str]) -> bool:
    """Whether these moves, without the plan's others, would break a hard limit.

    That of a dropped CV too: the plan leaves it out, and what is cheap would walk straight
    through it while nobody measures.
    """
    paths = {p.cv: _path(plan, p.cv, asks) for p in plan.predictions}
    return any(True for _ in worsened_hard_limits(plan, policies, paths, dropped_too=True))


def _path(plan: Plan, cv: str, asks: set[str] | frozenset[str]) -> Sequence[float]:
    """The predicted path when only these MVs are moved."""
    prediction = next(p for p in plan.predictions if p.cv == cv)
    if not asks:
        return prediction.without_moves
    if len(asks) == 1 and len(plan.moves) > 1:
        return prediction.taken_alone[next(iter(asks))]
    return prediction.with_moves


def _still_holds(
    standing: Suggestion, move: PlannedMove, at: MovePosition, policy: MovePolicy
) -> bool:
    """Whether the plan, from where the plant is now, supports what stands at the board."""
    if at.position is None or not at.low <= standing.target <= at.high:
        return False
    left = standing.target - at.position
    if not standing.open:
        # A setpoint in ratio wanders with the feed; any other was moved by somebody, and
        # "stands at" must say where it stands.
        return abs(left) <= (policy.increment if at.feed is None else policy.worthwhile_move)
    if not _allowed(left, at.service) or abs(left) > standing_reach(policy):
        return False
    planned = move.destination - at.position
    if abs(left) <= policy.worthwhile_move and left * planned >= 0.0:
        return True
    return left * planned > 0.0 and abs(left) <= abs(planned) + policy.worthwhile_move


def _worth_a_hand(
    state: PaceState, move: PlannedMove, at: MovePosition, now: float, policy: MovePolicy
) -> bool:
    if at.position is None:
        return False
    step, planned = move.first - at.position, move.destination - at.position
    if abs(step) < policy.increment / 2.0 or step * planned <= 0.0:
        return False
    if not _allowed(step, at.service) or abs(at.drift) > policy.worthwhile_move:
        return False
    made_at, last = state.last_step.get(mv := move.mv, (-math.inf, 0.0))
    elapsed_min = (now - made_at) / 60.0
    if abs(step) > policy.rate_limit_per_min * elapsed_min:
        return False
    standing = state.suggestions.get(mv)
    if standing is not None and standing.open:
        # Not taken: the plant was never moved, so there is nothing to reverse.
        last = 0.0
    back = last * step < 0.0 and now - made_at < REVERSAL_S
    return abs(planned) >= policy.worthwhile_move * (REVERSAL_FACTOR if back else 1.0)


def _allowed(step: float, service: Service) -> bool:
    if service is Service.FREE:
        return True
    if service is Service.FIXED:
        return False
    return step > 0.0 if service is Service.RAISE_ONLY else step < 0.0


def _near(a: float, b: float, distance: float) -> bool:
    return abs(a - b) < distance


def _may_ask(state: PaceState, now: float, policies: Policies, *, urgent: bool) -> bool:
    advice = policies.advice
    recent = [at for at in state.asked_at if now - at < HOUR_S]
    kept_back = 0 if urgent or advice.repeat_limit_h == 1 else 1
    if len(recent) >= advice.repeat_limit_h - kept_back:
        return False
    pause_s = advice.act_within_s if urgent else advice.interval_s
    return not recent or now - recent[-1] >= pause_s


def _urgent(plan: Plan, policies: Policies) -> bool:
    """A hard limit is about to be broken, and the moves would keep it or nearly so."""
    soon = [k for k, end in enumerate(plan.times_min) if end <= SOON_MIN]
    if not soon:
        return False
    for prediction in plan.predictions:
        policy = policies.cvs[prediction.cv]
        without = hard_excess(policy, [prediction.without_moves[k] for k in soon])
        with_moves = hard_excess(policy, [prediction.with_moves[k] for k in soon])
        if without > 0.0 and with_moves <= without / 2.0:
            return True
    return False


def _safe_together(
    plan: Plan,
    policies: Policies,
    moves: Mapping[str, PlannedMove],
    positions: Mapping[str, MovePosition],
    standing: set[str],
    wanted: set[str],
) -> frozenset[str]:
    """The moves to ask for now: those wanted, with others where they are only safe together."""
    if not wanted:
        return frozenset()
    if not breaks_alone(plan, policies, standing | wanted):
        return frozenset(wanted)
    everything = {
        mv
        for mv, move in moves.items()
        if move.first != move.position
        and _allowed(move.first - move.position, positions[mv].service)
    }
    safe = not breaks_alone(plan, policies, everything)
    return frozenset(everything) if safe and wanted <= everything else frozenset()


def _unlike(plan: Plan, policies: Policies, asks: set[str]) -> frozenset[str]:
    if len(asks) < 2:
        return frozenset()
    return frozenset(mv for mv in asks if breaks_alone(plan, policies, {mv}))
