"""What became of a suggestion, read from the plant."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.suggestion import Suggestion, follow_ups, followed
from edgectl.testing.toy import REFLUX

NOW = 1_767_592_800.0
MADE = Suggestion(REFLUX, 8800.0, NOW, 9000.0, True, "economics", "lower it", "it is cheaper")


def outcome(case: Any, position: float | None, age_s: float, made: Suggestion = MADE) -> str:
    place = replace(case.positions[REFLUX], position=position)
    policy = case.policies.moves[REFLUX]
    return followed(made, place, NOW + age_s, policy, case.policies.advice).outcome


@pytest.mark.parametrize(
    ("position", "age_s", "expected"),
    [
        (9000.0, 60.0, "pending"),
        (9000.0, 121.0, "ignored"),
        (8800.0, 60.0, "taken"),
        (8815.0, 60.0, "taken"),
        (8700.0, 60.0, "taken"),
        (8900.0, 60.0, "part_taken"),
        (8900.0, 600.0, "part_taken"),
        (9100.0, 60.0, "opposed"),
        (9030.0, 60.0, "pending"),
        (None, 600.0, "pending"),
    ],
)
def test_the_outcome_follows_from_the_position(
    case: Any, position: float | None, age_s: float, expected: str
) -> None:
    assert outcome(case, position, age_s) == expected


def test_taken_late_is_taken_and_taken_is_final(case: Any) -> None:
    ignored = replace(MADE, outcome="ignored")
    assert outcome(case, 8800.0, 900.0, ignored) == "taken"
    # The base layer moves on with the feed: that is nobody's opposition.
    assert outcome(case, 9400.0, 900.0, replace(MADE, outcome="taken")) == "taken"


def test_replaced_before_anyone_had_time_is_superseded(case: Any) -> None:
    newer = replace(MADE, target=8700.0, made_at=NOW + 300.0)
    found = follow_ups({REFLUX: MADE}, {REFLUX: newer}, case.positions)
    assert [(f.outcome, f.suggested, f.before, f.now) for f in found] == [
        ("superseded", 8800.0, 9000.0, 9000.0)
    ]
    kept = follow_ups({REFLUX: replace(MADE, outcome="ignored")}, {REFLUX: newer}, case.positions)
    assert kept[0].outcome == "ignored"


def test_what_asks_for_no_hand_is_not_followed(case: Any) -> None:
    stays = replace(MADE, asks=False, action="")
    assert follow_ups({REFLUX: stays}, {REFLUX: stays}, case.positions) == ()
    assert outcome(case, 9400.0, 900.0, stays) == "pending"
    assert stays.sentence == "It is cheaper."
    assert MADE.sentence == "Lower it: it is cheaper."


def test_what_the_base_layer_moved_after_the_feed_is_nobodys_doing(case: Any) -> None:
    made = replace(MADE, feed=18_000.0)
    policy, advice = case.policies.moves[REFLUX], case.policies.advice

    def outcome_at(position: float, feed: float) -> str:
        place = replace(case.positions[REFLUX], position=position, feed=feed)
        return followed(made, place, NOW + 60.0, policy, advice).outcome

    # The feed rose by 2 %, and the reflux with it.
    assert outcome_at(9180.0, 18_360.0) == "pending"
    # The same number without a change of the feed is a hand's work.
    assert outcome_at(9180.0, 18_000.0) == "opposed"
    # Half of what was asked, on top of the feed's own 2 %.
    assert outcome_at(9078.0, 18_360.0) == "part_taken"
