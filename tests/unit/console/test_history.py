"""What the journal says stood at the plant, not what was meant to."""

from __future__ import annotations

from typing import Any

import pytest

from edgectl.console.history import History, history_from
from edgectl.journal.reader import StoredEntry
from edgectl.records.advice import Delivery, Standing
from edgectl.records.cycle_record import DecisionRecord, DeliveryRecord
from edgectl.records.encoding import to_json
from edgectl.records.entries import EntryKind


def journal_of(decision: DecisionRecord, delivery: Delivery, seq: int | None) -> list[StoredEntry]:
    delivered = DeliveryRecord(delivery, seq, 1.0, 1.0, 0)
    rows: list[tuple[EntryKind, Any]] = [
        (EntryKind.DECISION, to_json(decision)),
        (EntryKind.DELIVERY, to_json(delivered)),
    ]
    return [
        StoredEntry(n, kind, decision.cycle, decision.made_at, body, "", 0)
        for n, (kind, body) in enumerate(rows, start=1)
    ]


@pytest.fixture(scope="module")
def advising(shift: History) -> DecisionRecord:
    return next(d for d in reversed(shift.decisions) if d.advice.valid)


@pytest.mark.parametrize(
    ("complete", "seq", "reason"),
    [(False, 1, "not_published"), (True, None, "not_journalled")],
)
def test_advice_that_was_not_delivered_was_a_hold(
    advising: DecisionRecord, complete: bool, seq: int | None, reason: str
) -> None:
    delivery = Delivery(advising.cycle, False, complete, (), None if complete else "refused")
    found = history_from(journal_of(advising, delivery, seq)).latest
    assert found is not None
    assert (found.advice.standing, found.advice.valid) == (Standing.HOLDING, False)
    assert found.advice.reason == reason
    assert not any(move.changed for move in found.advice.moves)


def test_advice_that_was_delivered_or_meant_for_nobody_stays(advising: DecisionRecord) -> None:
    for valid, problem in ((True, None), (False, "no advisory section: not published")):
        delivery = Delivery(advising.cycle, valid, True, (), problem)
        found = history_from(journal_of(advising, delivery, 1)).latest
        assert found is not None
        assert found.advice == advising.advice
