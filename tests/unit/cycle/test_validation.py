"""Which readings are believed, tag by tag."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import pytest

from edgectl.cycle.policies import Policies, TagPolicy
from edgectl.cycle.validation import STEP_BELIEVED_AFTER, TagMemory, measure
from edgectl.records.measurements import Measurement, Verdict
from edgectl.records.readings import Reading, TagSnapshot

NOW = 1_000_000.0
BAD, UNCERTAIN = 0x808C0000, 0x40900000


class Watch:
    """One tag read again and again."""

    def __init__(self, policies: Policies, tag: str, **changes: object) -> None:
        policy: TagPolicy = replace(policies.tags[tag], **changes)  # type: ignore[arg-type]  # test helper
        self.policies = replace(policies, tags={tag: policy})
        self.tag = tag
        self.seen: Mapping[str, TagMemory] = {}
        self.cycle = 0

    def read(
        self,
        value: float | None,
        at: float = NOW,
        *,
        source: float | None = math.nan,
        status: int = 0,
    ) -> Measurement:
        """NaN for the source time: the same as the receipt."""
        given = at if source is not None and math.isnan(source) else source
        reading = Reading(self.tag, value, status, given, at)
        return self.take(TagSnapshot(self.cycle, at, (reading,)))

    def take(self, snapshot: TagSnapshot) -> Measurement:
        self.cycle += 1
        found, self.seen = measure(snapshot, self.seen, self.policies)
        return found[self.tag]


def test_a_good_value_is_used_as_it_is(policies: Policies) -> None:
    found = Watch(policies, "FIC-2101").read(18_000.0, source=NOW - 1.0)
    assert found == Measurement("FIC-2101", 18_000.0, Verdict.USED, NOW - 1.0, 1.0, True)


@pytest.mark.parametrize(
    ("value", "status", "verdict"),
    [
        (18_000.0, BAD, Verdict.BAD_QUALITY),
        (18_000.0, UNCERTAIN, Verdict.UNCERTAIN_QUALITY),
        (None, 0, Verdict.NOT_A_NUMBER),
        (math.nan, 0, Verdict.NOT_A_NUMBER),
        (math.inf, 0, Verdict.NOT_A_NUMBER),
        (-math.inf, 0, Verdict.NOT_A_NUMBER),
        (5e-324, 0, Verdict.NOT_A_NUMBER),
        (1e300, 0, Verdict.OUT_OF_RANGE),
        (-0.1, 0, Verdict.OUT_OF_RANGE),
        (25_000.1, 0, Verdict.OUT_OF_RANGE),
    ],
)
def test_what_is_refused_keeps_the_last_usable_value(
    policies: Policies, value: float | None, status: int, verdict: Verdict
) -> None:
    watch = Watch(policies, "FIC-2101")
    watch.read(17_900.0)
    found = watch.read(value, NOW + 30.0, status=status)
    assert (found.verdict, found.value, found.age_s) == (verdict, 17_900.0, 30.0)
    assert not found.usable
    assert not found.is_new


def test_nothing_seen_is_nothing_known(policies: Policies) -> None:
    found = Watch(policies, "FIC-2101").read(math.nan)
    assert (found.value, found.sample_time, found.age_s) == (None, None, math.inf)


def test_a_tag_that_was_not_delivered_is_missing(policies: Policies) -> None:
    watch = Watch(policies, "FIC-2101")
    watch.read(18_000.0)
    assert watch.take(TagSnapshot(1, NOW + 30.0, ())).verdict is Verdict.MISSING


def test_zero_is_a_number(policies: Policies) -> None:
    assert Watch(policies, "FIC-2101").read(0.0).usable


def test_age_counts_from_the_source_not_from_the_receipt(policies: Policies) -> None:
    watch = Watch(policies, "FIC-2101")
    assert watch.read(18_000.0, source=NOW - 60.0).usable
    assert watch.read(18_000.0, NOW + 1.0, source=NOW - 60.0).verdict is Verdict.INPUT_STALE


def test_without_a_source_time_the_receipt_counts_and_it_is_said(policies: Policies) -> None:
    found = Watch(policies, "FIC-2101").read(18_000.0, source=None)
    assert (found.verdict, found.sample_time, found.note) == (Verdict.USED, NOW, "no_source_time")


def test_a_source_time_that_is_not_a_number_is_none(policies: Policies) -> None:
    watch = Watch(policies, "FIC-2101")
    assert watch.read(18_000.0, source=math.inf).note == "no_source_time"


def test_a_little_ahead_is_tolerated_and_much_is_not(policies: Policies) -> None:
    tolerance_s = policies.cycle.future_tolerance_s
    near = Watch(policies, "FIC-2101").read(18_000.0, source=NOW + tolerance_s)
    assert (near.verdict, near.age_s) == (Verdict.USED, 0.0)
    far = Watch(policies, "FIC-2101").read(18_000.0, source=NOW + tolerance_s + 1.0)
    assert far.verdict is Verdict.IN_THE_FUTURE


def test_one_sample_beyond_the_rate_limit_is_refused_and_one_that_stays_is_believed(
    policies: Policies,
) -> None:
    watch = Watch(policies, "TI-2107", rate_limit_per_min=0.1)
    watch.read(100.0)
    for k in range(1, STEP_BELIEVED_AFTER + 1):
        found = watch.read(110.0, NOW + 30.0 * k)
        assert (found.verdict, found.value) == (Verdict.TOO_FAST, 100.0)
    found = watch.read(110.0, NOW + 30.0 * (STEP_BELIEVED_AFTER + 1))
    assert (found.value, found.note) == (110.0, "step_accepted")
    assert watch.read(110.0, NOW + 200.0).note == ""


def test_a_single_spike_leaves_no_trace(policies: Policies) -> None:
    watch = Watch(policies, "TI-2107", rate_limit_per_min=1.0)
    watch.read(100.0)
    assert watch.read(125.0, NOW + 30.0).verdict is Verdict.TOO_FAST
    assert watch.read(100.2, NOW + 60.0).usable
    assert watch.seen["TI-2107"].too_fast == 0


def test_a_substitute_stands_in_and_the_verdict_keeps_saying_why(policies: Policies) -> None:
    found = Watch(policies, "TI-2102").read(70.0, status=BAD)
    assert (found.value, found.verdict, found.note) == (65.0, Verdict.BAD_QUALITY, "substituted")
    assert not found.usable


def test_uncertain_is_used_only_where_the_policy_says_so(policies: Policies) -> None:
    assert Watch(policies, "TI-2109").read(74.0, status=UNCERTAIN).note == "uncertain"
    refused = Watch(policies, "TI-2109", use_uncertain=False).read(74.0, status=UNCERTAIN)
    assert refused.verdict is Verdict.UNCERTAIN_QUALITY


# -- analysers --------------------------------------------------------------------------

CYCLE_S, DELAY_S = 600.0, 690.0


def test_a_result_is_new_by_its_time_and_belongs_to_its_sample(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    first = watch.read(150.0, source=NOW)
    assert (first.is_new, first.sample_time) == (True, NOW - DELAY_S)
    again = watch.read(150.0, NOW + 30.0, source=NOW)
    assert (again.verdict, again.is_new, again.age_s) == (Verdict.USED, False, DELAY_S + 30.0)
    # A changed value under the same time is no new result.
    assert not watch.read(155.0, NOW + 60.0, source=NOW).is_new
    assert watch.read(155.0, NOW + CYCLE_S, source=NOW + CYCLE_S).is_new


def test_a_result_from_the_past_is_not_new(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    watch.read(150.0, source=NOW)
    assert not watch.read(140.0, NOW + 30.0, source=NOW - CYCLE_S).is_new


def test_equal_results_with_new_times_are_a_dead_analyser(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    verdicts = [
        watch.read(150.0, NOW + k * CYCLE_S, source=NOW + k * CYCLE_S).verdict for k in range(5)
    ]
    assert verdicts == [Verdict.USED] * 2 + [Verdict.FROZEN] * 3
    alive = watch.read(151.0, NOW + 5 * CYCLE_S, source=NOW + 5 * CYCLE_S)
    assert (alive.verdict, alive.is_new, alive.value) == (Verdict.USED, True, 151.0)


def test_reading_the_same_result_often_is_not_a_repeat(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    for k in range(40):
        assert watch.read(150.0, NOW + 30.0 * k, source=NOW).usable


def test_results_at_the_detection_limit_are_at_most_and_never_frozen(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    for k in range(6):
        found = watch.read(0.0, NOW + k * CYCLE_S, source=NOW + k * CYCLE_S)
        assert (found.verdict, found.at_most, found.value) == (Verdict.USED, True, 5.0)


def test_a_result_is_stale_after_two_and_a_half_cycles(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    watch.read(150.0, source=NOW)
    assert watch.read(150.0, NOW + 2.5 * CYCLE_S, source=NOW).usable
    stale = watch.read(150.0, NOW + 2.5 * CYCLE_S + 1.0, source=NOW)
    assert (stale.verdict, stale.value) == (Verdict.INPUT_STALE, 150.0)


def test_laboratory_results_may_be_late(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116", stale_after_s=None)
    watch.read(150.0, source=NOW)
    assert watch.read(150.0, NOW + 50_000.0, source=NOW).usable


def test_a_result_without_its_time_is_not_believed(policies: Policies) -> None:
    found = Watch(policies, "AI-2116").read(150.0, source=None)
    assert (found.verdict, found.is_new) == (Verdict.INPUT_STALE, False)


def test_a_bad_result_keeps_the_last_good_one_and_its_age(policies: Policies) -> None:
    watch = Watch(policies, "AI-2116")
    watch.read(150.0, source=NOW)
    bad = watch.read(900.0, NOW + CYCLE_S, source=NOW + CYCLE_S, status=BAD)
    assert (bad.verdict, bad.value, bad.age_s) == (Verdict.BAD_QUALITY, 150.0, CYCLE_S + DELAY_S)
    # When it is good again, it still counts as new.
    assert watch.read(160.0, NOW + CYCLE_S + 30.0, source=NOW + CYCLE_S).is_new
