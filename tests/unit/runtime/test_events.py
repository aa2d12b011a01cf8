"""One root cause, one event."""

from __future__ import annotations

from edgectl.cycle.state import Condition
from edgectl.runtime.events import CLEARED_AFTER, EventBook

LATE = Condition("over_budget", "", "out_of_specification", "Too late.")
BAD = Condition("tag_not_used", "TI-2107", "failure", "TI-2107 has bad quality.")


def test_a_cause_is_raised_once_counted_and_cleared_once() -> None:
    book = EventBook()
    raised = [book.update([LATE]) for _ in range(5)]
    assert [len(events) for events in raised] == [1, 0, 0, 0, 0]
    cleared = [book.update([]) for _ in range(CLEARED_AFTER)]
    assert [len(events) for events in cleared] == [0] * (CLEARED_AFTER - 1) + [1]
    event = cleared[-1][0]
    assert (event.raised, event.cycles) == (False, 5)
    assert event.sentence == "Over after 5 cycles: Too late."
    assert book.update([]) == []


def test_a_cause_that_flickers_is_one_cause() -> None:
    book = EventBook()
    events = [
        event for k in range(20) for event in book.update([LATE] if k % CLEARED_AFTER == 0 else [])
    ]
    assert [event.raised for event in events] == [True]


def test_each_subject_is_a_cause_of_its_own() -> None:
    book = EventBook()
    assert [e.subject for e in book.update([BAD, LATE])] == ["TI-2107", ""]
    assert book.update([BAD, BAD]) == []


def test_the_same_cause_again_later_is_a_new_event() -> None:
    book = EventBook()
    book.update([LATE])
    for _ in range(CLEARED_AFTER):
        book.update([])
    assert [event.raised for event in book.update([LATE])] == [True]
