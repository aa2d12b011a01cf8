"""Where a restart begins."""

from __future__ import annotations

from dataclasses import replace

import pytest

from edgectl.cycle.policies import Policies
from edgectl.cycle.validation import measure
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.encoding import to_json
from edgectl.records.entries import EntryKind, Json
from edgectl.records.measurements import Verdict
from edgectl.records.readings import TagSnapshot
from edgectl.runtime.restore import Restored, restored
from edgectl.testing.story import WHO, play


@pytest.fixture(scope="module")
def record(policies: Policies) -> DecisionRecord:
    return play(
        policies, 30, prepare=lambda plant: plant.setpoints.update({"FIC-2103": 9200.0})
    ).decisions[-1]


def body_of(record: DecisionRecord) -> dict[str, Json]:
    body = to_json(record)
    assert isinstance(body, dict)
    return body


def begin(record: DecisionRecord, policies: Policies, later_s: float = 60.0) -> Restored:
    return restored(body_of(record), 77, WHO.model_hash, record.made_at + later_s, policies)


def test_a_young_memory_goes_on(record: DecisionRecord, policies: Policies) -> None:
    found = begin(record, policies)
    assert record.estimate is not None
    assert found.state.memory == record.estimate.memory
    assert (found.state.memory_at, found.from_seq, found.first_cycle) == (record.made_at, 77, 31)
    assert found.words == "memory of cycle 30, 60 s old"
    assert found.state.standing.good_cycles == 0, "the standing does not come back"
    assert found.state.advice is None


def test_results_that_were_used_are_not_used_again(
    record: DecisionRecord, policies: Policies
) -> None:
    used = record.measurements["AI-2116"].sample_time
    assert used is not None
    tag = begin(record, policies).state.seen.tags["AI-2116"]
    assert tag.source_time == used + 690.0
    assert tag.result == record.measurements["AI-2116"].value


def test_an_analyser_that_was_dead_stays_dead(record: DecisionRecord, policies: Policies) -> None:
    tag, analyser = "AI-2116", policies.tags["AI-2116"].analyser
    assert analyser is not None
    newest = next(reading for reading in record.readings if reading.tag == tag)
    assert newest.source_time is not None
    frozen = replace(record.measurements[tag], verdict=Verdict.FROZEN, is_new=False)
    # The result last used is older than the one that was refused as a repetition.
    frozen = replace(frozen, sample_time=newest.source_time - analyser.delay_s - 1200.0)
    dead = replace(record, measurements={**record.measurements, tag: frozen})
    seen = begin(dead, policies).state.seen.tags
    again = replace(newest, source_time=newest.source_time + 600.0)
    for reading in (newest, again):
        found, _ = measure(TagSnapshot(31, record.made_at + 600.0, (reading,)), seen, policies)
        assert (found[tag].verdict, found[tag].is_new) == (Verdict.FROZEN, False)


def test_the_last_suggestion_still_counts_for_the_pace(
    record: DecisionRecord, policies: Policies
) -> None:
    assert record.advice.made_at is not None
    assert begin(record, policies).state.pace.asked_at == (record.advice.made_at,)


def test_the_memory_of_a_cycle_without_estimate_is_the_one_it_was_given(
    record: DecisionRecord, policies: Policies
) -> None:
    held = replace(record, estimate=None, memory_at=record.made_at - 300.0)
    found = begin(held, policies)
    assert found.state.memory == record.memory_in
    assert found.state.memory_at == record.made_at - 300.0
    assert begin(replace(held, memory_at=None), policies).words == "cold: cycle 30 has no memory"


@pytest.mark.parametrize(("later_s", "cold"), [(900.0, False), (901.0, True), (-1.0, True)])
def test_an_old_memory_or_one_from_the_future_is_not_used(
    record: DecisionRecord, policies: Policies, later_s: float, cold: bool
) -> None:
    found = begin(record, policies, later_s)
    assert (found.state.memory == {}) == cold
    assert found.words.startswith("cold: the memory of cycle 30 is") == cold
    assert found.first_cycle == 31, "numbers go on in any case"


def test_the_memory_of_another_model_is_not_used(
    record: DecisionRecord, policies: Policies
) -> None:
    other = replace(record, provenance=replace(WHO, model_hash="2" * 64))
    assert begin(other, policies).words == "cold: the newest decision was made with another model"


def test_no_record_or_an_unreadable_one_is_a_cold_start(policies: Policies) -> None:
    assert restored(None, None, None, 0.0, policies).words == "cold: no decision before this one"
    found = restored({"cycle": 3}, 5, None, 0.0, policies)
    assert found.words.startswith("cold: the newest decision cannot be read")


def test_decisions_are_journalled_whole(record: DecisionRecord, policies: Policies) -> None:
    played = play(policies, 4)
    body = played.journal.bodies(EntryKind.DECISION)[-1]
    assert set(body) == set(body_of(record))
