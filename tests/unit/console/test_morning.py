"""What is still raised when the morning meeting asks."""

from __future__ import annotations

from edgectl.console.history import Dated, History
from edgectl.console.morning import events_answer
from edgectl.records.cycle_record import EventRecord, OpeningRecord, Provenance


def event(raised: bool) -> EventRecord:
    return EventRecord("plant_unreachable", "", raised, "failure", 1, "The plant is away.")


def opening() -> OpeningRecord:
    return OpeningRecord(Provenance("0", "", "", True), "", "", None, "cold", 1.0, 30.0, 20.0)


def test_a_raised_event_stands_until_it_is_cleared() -> None:
    history = History(events=[Dated(10.0, event(True))], openings=[Dated(0.0, opening())])
    assert len(events_answer(history)) == 1
    history.events.append(Dated(20.0, event(False)))
    assert events_answer(history) == []


def test_what_a_killed_runtime_raised_is_over_with_the_next_start() -> None:
    openings = [Dated(0.0, opening()), Dated(30.0, opening())]
    history = History(events=[Dated(10.0, event(True))], openings=openings)
    assert events_answer(history) == []
    history.events.append(Dated(30.0, event(True)))
    assert len(events_answer(history)) == 1
