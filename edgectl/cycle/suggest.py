"""From a vetted plan to the targets, reasons and sentences that stand at the board."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from edgectl.cycle import sentences
from edgectl.cycle.pace import Choice, PaceState, asked, choose
from edgectl.cycle.policies import MovePolicy, Policies
from edgectl.cycle.suggestion import Suggestion
from edgectl.cycle.vetting import Vetting, vet_targets
from edgectl.records.advice import SuggestedMove
from edgectl.records.measurements import MovePosition
from edgectl.records.plan import Plan, PlanRequest


@dataclass(frozen=True, slots=True)
class Suggested:
    """What one cycle would put at the board."""

    pace: PaceState
    moves: tuple[SuggestedMove, ...]
    reason: str
    sentence: str
    findings: tuple[str, ...]
    """Of the vetting of the very values; not empty: nothing of this may be published."""


def suggest(
    pace: PaceState,
    plan: Plan,
    vetting: Vetting,
    request: PlanRequest,
    positions: Mapping[str, MovePosition],
    now: float,
    policies: Policies,
) -> Suggested:
    """Choose what stands at the board, vet those very values, and say why."""
    choice = choose(pace, plan, positions, now, policies)
    minutes = {mv: (now - at) / 60.0 for mv, (at, _) in pace.last_step.items()}
    findings = vet_targets(choice.targets, choice.asks, choice.new, minutes, positions, policies)
    reason, clause = sentences.why_moves(plan, vetting, request.limits, policies)
    if choice.unlike and choice.unlike == choice.asks:
        reason = "only_together"
    suggestions = {
        mv: _suggestion(mv, choice, pace, positions[mv], now, reason, clause, policies)
        for mv in choice.targets
    }
    steps = {mv: (now, suggestions[mv].target - suggestions[mv].before) for mv in choice.new}
    after = PaceState(
        suggestions=suggestions,
        asked_at=asked(pace, choice, now),
        last_step={**pace.last_step, **steps},
    )
    moves = tuple(
        _move(mv, suggestions.get(mv), positions[mv], mv in choice.new, policies.moves[mv])
        for mv in policies.moves
    )
    open_ones = [found for found in suggestions.values() if found.open]
    word = open_ones[0].reason if open_ones else "no_change"
    return Suggested(after, moves, word, _sentence(open_ones, choice, policies), findings)


def _suggestion(
    mv: str,
    choice: Choice,
    pace: PaceState,
    at: MovePosition,
    now: float,
    reason: str,
    clause: str,
    policies: Policies,
) -> Suggestion:
    target, standing = choice.targets[mv], pace.suggestions.get(mv)
    policy = policies.moves[mv]
    here = target if at.position is None else at.position
    if mv in choice.new:
        action = sentences.action(policy, here, target)
        return Suggestion(mv, target, now, here, True, reason, action, clause, feed=at.feed)
    stays = standing is not None and standing.target == target
    if standing is not None and stays and (mv in choice.asks or not standing.open):
        return standing
    there = sentences.amount(target, policy.unit, policy.increment)
    return Suggestion(mv, target, now, here, False, "no_change", "", f"leave {mv} at {there}")


def _move(
    mv: str,
    found: Suggestion | None,
    at: MovePosition,
    changed: bool,
    policy: MovePolicy,
) -> SuggestedMove:
    if found is None:
        return SuggestedMove(mv, None, False, None, "no_change", "Where it stands is not known.")
    if found.open:
        return SuggestedMove(mv, found.target, changed, found.made_at, found.reason, found.sentence)
    there = sentences.amount(found.target, policy.unit, policy.increment)
    reason, words = "no_change", f"{mv}: no change suggested, {there} stands."
    if found.asks:
        reason, words = "taken", f"{mv} was moved to {there} as suggested."
    if at.reason != "in_service":
        reason, words = at.reason, f"{mv} {sentences.withheld_words(at)}."
    return SuggestedMove(mv, found.target, False, found.made_at, reason, words)


def _sentence(open_ones: Sequence[Suggestion], choice: Choice, policies: Policies) -> str:
    if not open_ones:
        return "No change suggested: no move is worth a hand now."
    newest = max(open_ones, key=lambda found: found.made_at)
    actions = " and ".join(found.action for found in open_ones)
    words = sentences.sentence(f"{actions}: {newest.clause}")
    if not choice.unlike:
        return words
    first = [mv for mv in policies.moves if mv in choice.asks and mv not in choice.unlike]
    if not first:
        return f"{words} Only together: either move alone would break a limit."
    then = " and ".join(sorted(choice.unlike))
    return f"{words} First {' and '.join(first)}, then {then}: that alone would break a limit."
