"""What stands at the board for one MV, and what the operator has done with it.

A suggestion either asks for a hand or repeats where the MV stands. What the
operator did is read from the plant's positions, recorded, and never nagged about.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Final

from edgectl.cycle.policies import AdvicePolicy, MovePolicy
from edgectl.records.cycle_record import FollowUp
from edgectl.records.measurements import MovePosition

TAKEN_SHARE: Final = 0.9
PART_SHARE: Final = 0.25
"""Of the way from where the MV stood to the target."""


@dataclass(frozen=True, slots=True)
class Suggestion:
    """One MV's standing suggestion."""

    mv: str
    target: float
    made_at: float
    before: float
    """Position when it was made."""
    asks: bool
    """False: the target repeats the position, and no hand is asked for."""
    reason: str
    action: str
    """`raise reflux flow FIC-2103 from 7,900 to 8,100 kg/h`; empty when no hand is asked for."""
    clause: str
    """Why."""
    outcome: str = "pending"
    """See `FollowUp.outcome`."""
    feed: float | None = None
    """Filtered feed at `made_at`, where the base layer keeps the MV in ratio to it."""

    @property
    def sentence(self) -> str:
        words = f"{self.action}: {self.clause}" if self.action else self.clause
        return f"{words[:1].upper()}{words[1:]}."

    @property
    def open(self) -> bool:
        """Somebody may still act on it."""
        return self.asks and self.outcome != "taken"


def followed(
    suggestion: Suggestion, at: MovePosition, now: float, policy: MovePolicy, advice: AdvicePolicy
) -> Suggestion:
    """The suggestion with what has become of it. `taken` is final: the base layer may move on."""
    if not suggestion.open or at.position is None:
        return suggestion
    return replace(suggestion, outcome=_outcome(suggestion, at, now, policy, advice))


def _outcome(
    suggestion: Suggestion,
    at: MovePosition,
    now: float,
    policy: MovePolicy,
    advice: AdvicePolicy,
) -> str:
    asked = suggestion.target - suggestion.before
    here = at.position
    assert here is not None
    share = (here - suggestion.before) / asked if asked else 1.0
    if share >= TAKEN_SHARE or abs(here - suggestion.target) <= policy.increment / 2.0:
        return "taken"
    share = max(share, _share_after_feed(suggestion, at))
    moved = abs(here - suggestion.before)
    if share >= PART_SHARE and moved > policy.increment / 2.0:
        return "part_taken"
    # A setpoint that follows a noisy feed is never quite still: opposing takes a real step.
    if share <= -PART_SHARE and moved >= policy.worthwhile_move / 2.0:
        return "opposed"
    return "pending" if now - suggestion.made_at <= advice.act_within_s else "ignored"


def _share_after_feed(suggestion: Suggestion, at: MovePosition) -> float:
    """The share of the way, without what the base layer did after the feed; of two readings
    of the same number the kinder one counts, for it is a person's doing that is judged.
    """
    if suggestion.feed is None or at.feed is None or at.position is None or at.feed <= 0.0:
        return -math.inf
    without_feed = at.position * suggestion.feed / at.feed
    return (without_feed - suggestion.before) / (suggestion.target - suggestion.before)


def follow_ups(
    before: Mapping[str, Suggestion],
    after: Mapping[str, Suggestion],
    positions: Mapping[str, MovePosition],
) -> tuple[FollowUp, ...]:
    """One line for each suggestion that asked for a hand when the cycle began.

    Parameters
    ----------
    before : mapping
        With their newest outcome, before this cycle changed anything.
    after : mapping
        As they stand when the cycle ends.
    """
    found = []
    for mv, suggestion in before.items():
        position = positions[mv].position if mv in positions else None
        if not suggestion.asks or position is None:
            continue
        replaced = mv in after and after[mv].made_at != suggestion.made_at
        outcome = suggestion.outcome
        if replaced and outcome == "pending":
            outcome = "superseded"
        found.append(FollowUp(mv, suggestion.target, suggestion.before, position, outcome))
    return tuple(found)
