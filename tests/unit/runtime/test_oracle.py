"""The oracle bites: each invariant, broken on purpose in a story that was good, is named."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from edgectl.cycle.policies import Policies
from edgectl.records.advice import Standing
from edgectl.records.entries import Entry, EntryKind
from edgectl.testing.faults import Fault
from edgectl.testing.memory_ports import Row
from edgectl.testing.oracle import problems
from edgectl.testing.story import Played, play


@pytest.fixture
def story(policies: Policies) -> Played:
    return play(
        policies,
        40,
        [Fault("overrun", 10, 2)],
        prepare=lambda plant: plant.setpoints.update({"FIC-2103": 9200.0}),
    )


def change_report(played: Played, cycle: int, **changes: Any) -> None:
    k = next(k for k, r in enumerate(played.reports) if r.record.cycle == cycle)
    played.reports[k] = replace(played.reports[k], **changes)


def change_advice(played: Played, cycle: int, **changes: Any) -> None:
    change_report(played, cycle, advice=replace(played.report(cycle).advice, **changes))


def change_target(played: Played, cycle: int, target: float, **changes: Any) -> None:
    moves = played.report(cycle).advice.moves
    change_advice(played, cycle, moves=(replace(moves[0], target=target, **changes), *moves[1:]))


def change_record(played: Played, at: int, **changes: Any) -> None:
    change_report(played, at, record=replace(played.report(at).record, **changes))


def append(played: Played, kind: EntryKind, cycle: int, **body: Any) -> None:
    entry = Entry(kind, cycle, 0.0, body)
    played.journal.rows.append(Row(len(played.journal.rows) + 1, entry, 0.0))


def unknown_move(played: Played) -> None:
    seen = played.sink.log[5]
    assert seen.advice is not None
    played.sink.log[5] = replace(seen, advice=replace(seen.advice, moves=seen.advice.moves[:1]))


BROKEN: list[tuple[str, Callable[[Played], None]]] = [
    ("I1", unknown_move),
    ("I2", lambda p: change_target(p, 20, math.nan)),
    ("I2", lambda p: change_target(p, 20, 9999.0, reason="economics")),
    ("I2", lambda p: change_target(p, 20, 6600.0, reason="no_change")),
    ("I2", lambda p: change_advice(p, 20, reason="")),
    ("I2", lambda p: change_advice(p, 20, confirmed_cycle=19)),
    ("I2", lambda p: change_advice(p, 20, valid_until=0.0)),
    ("I2", lambda p: change_advice(p, 10, valid=True)),
    ("I2", lambda p: change_advice(p, 10, valid=True, standing=Standing.ADVISING)),
    ("I2", lambda p: change_record(p, 20, vetting=("refused",))),
    ("I3", lambda p: change_report(p, 20, heartbeat=99)),
    ("I3", lambda p: change_report(p, 20, progressed=False)),
    ("I4", lambda p: change_report(p, 20, receipt=None)),
    ("I4", lambda p: append(p, EntryKind.DECISION, 20)),
    ("I4", lambda p: append(p, EntryKind.DELIVERY, 20, decision_seq=1, delivery={"valid": True})),
    ("I4", lambda p: append(p, EntryKind.DELIVERY, 7, decision_seq=None, delivery={"valid": True})),
    ("I5", lambda p: append(p, EntryKind.EVENT, 7, event="over_budget", subject="", raised=False)),
    ("I6", lambda p: change_advice(p, 40, valid=False, standing=Standing.HOLDING)),
    ("I7", lambda p: change_advice(p, 2, valid=True)),
    ("I7", lambda p: change_record(p, 20, cycle=22)),
]


def test_a_good_story_has_no_problems(story: Played) -> None:
    assert problems(story) == []


@pytest.mark.parametrize(
    ("invariant", "spoil"), BROKEN, ids=[f"{name}-{k}" for k, (name, _) in enumerate(BROKEN)]
)
def test_a_broken_invariant_is_named(
    story: Played, invariant: str, spoil: Callable[[Played], None]
) -> None:
    spoil(story)
    assert any(problem.startswith(invariant) for problem in problems(story)), problems(story)
