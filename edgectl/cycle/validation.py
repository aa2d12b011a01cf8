"""Which readings are believed: a snapshot and what was seen before give measurements.

Rules, in the order in which they are asked:

1. A bad quality is never used (OPC 10000-4, 7.39.1), an uncertain one only
   where the tag's policy says so; then numbers that are not numbers, then the range.
2. Age is counted from the *source* timestamp: a fresh server timestamp on an old
   value does not make it fresh. Without a source timestamp the receipt counts,
   and the measurement says so; too far in the future is not believed at all.
3. A jump beyond the rate limit is refused, until it has persisted.
4. An analyser's result is new when its *timestamp* changes, never when its value
   does; equal values again and again mean a dead analyser, whatever its status.

Whatever is refused keeps the last usable value beside it, with its age.
"""

from __future__ import annotations

import math
import sys
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Final

from edgectl.cycle.policies import AnalyserPolicy, Policies, TagPolicy
from edgectl.records.measurements import Measurement, Verdict
from edgectl.records.readings import Quality, Reading, TagSnapshot

STEP_BELIEVED_AFTER: Final = 3
"""Samples in a row beyond the rate limit: the next one is believed, and said so."""


@dataclass(frozen=True, slots=True)
class TagMemory:
    """What is kept of one tag from cycle to cycle."""

    value: float | None = None
    """Last usable value."""
    sample_time: float | None = None
    received_at: float | None = None
    source_time: float | None = None
    """Source time of the newest reading, believed or not."""
    too_fast: int = 0
    """Samples refused in a row for their rate."""
    repeats: int = 0
    """Equal analyser results in a row."""
    result: float | None = None
    """Newest analyser result as received."""


NOTHING_SEEN: Final = TagMemory()

TagMemories = Mapping[str, TagMemory]


def measure(
    snapshot: TagSnapshot, seen: TagMemories, policies: Policies
) -> tuple[dict[str, Measurement], dict[str, TagMemory]]:
    """Every tag of the site file, in its order, and what to remember."""
    readings = {reading.tag: reading for reading in snapshot.readings}
    measurements, memories = {}, {}
    for tag, policy in policies.tags.items():
        before = seen.get(tag, NOTHING_SEEN)
        reading = readings.get(tag)
        if reading is None:
            found, after = _refused(policy, before, Verdict.MISSING, snapshot.received_at), before
        else:
            found, after = _judged(
                reading, policy, before, snapshot.received_at, policies.cycle.future_tolerance_s
            )
        measurements[tag] = _substituted(found, policy, snapshot.received_at)
        memories[tag] = after
    return measurements, memories


def bridges(measurement: Measurement, policy: TagPolicy) -> bool:
    """One sample was too fast, and the one before it is still fresh enough to stand in."""
    return (
        measurement.verdict is Verdict.TOO_FAST
        and measurement.value is not None
        and policy.stale_after_s is not None
        and measurement.age_s <= policy.stale_after_s
    )


def _judged(
    reading: Reading, policy: TagPolicy, before: TagMemory, now: float, tolerance_s: float
) -> tuple[Measurement, TagMemory]:
    source = reading.source_time
    if source is not None and not math.isfinite(source):
        source = None
    if policy.analyser is not None:
        return _judged_result(reading, source, policy, policy.analyser, before, now, tolerance_s)
    after = replace(before, source_time=source)
    verdict = _value_verdict(reading, policy) or _time_verdict(source, policy, now, tolerance_s)
    if verdict is not None:
        return _refused(policy, before, verdict, now), replace(after, too_fast=0)
    assert reading.value is not None
    note = "" if source is not None else "no_source_time"
    if reading.quality is Quality.UNCERTAIN:
        note = "uncertain"
    if _too_fast(reading.value, policy, before, now):
        if before.too_fast < STEP_BELIEVED_AFTER:
            after = replace(after, too_fast=before.too_fast + 1)
            return _refused(policy, before, Verdict.TOO_FAST, now), after
        note = "step_accepted"
    sampled_at = now if source is None else source
    used = Measurement(
        tag=policy.tag,
        value=reading.value,
        verdict=Verdict.USED,
        sample_time=sampled_at,
        age_s=max(0.0, now - sampled_at),
        is_new=source is None or source != before.source_time,
        note=note,
    )
    after = TagMemory(reading.value, sampled_at, now, source)
    return used, after


def _judged_result(
    reading: Reading,
    source: float | None,
    policy: TagPolicy,
    analyser: AnalyserPolicy,
    before: TagMemory,
    now: float,
    tolerance_s: float,
) -> tuple[Measurement, TagMemory]:
    """An analyser: only a changed timestamp is a new result, and each is used once."""
    verdict = _value_verdict(reading, policy)
    if verdict is None:
        # A result without its time cannot be told from the one before.
        late = Verdict.INPUT_STALE if source is None else None
        verdict = late or _time_verdict(source, policy, now, tolerance_s)
    if verdict is not None:
        return _refused(policy, before, verdict, now), before
    assert reading.value is not None
    assert source is not None
    at_most = reading.value <= analyser.detection_limit
    changed = before.source_time is None or source > before.source_time
    after = before
    if changed:
        # At the detection limit every result looks the same, and is none the worse for it.
        again = reading.value == before.result and not at_most
        repeats = before.repeats + 1 if again else 1
        after = replace(before, source_time=source, repeats=repeats, result=reading.value)
    if after.repeats >= analyser.repeat_limit:
        return _refused(policy, before, Verdict.FROZEN, now), after
    if changed:
        value = max(reading.value, analyser.detection_limit)
        after = replace(after, value=value, sample_time=source - analyser.delay_s, received_at=now)
    sample_time = after.sample_time if after.sample_time is not None else now
    used = Measurement(
        tag=policy.tag,
        value=after.value,
        verdict=Verdict.USED,
        sample_time=sample_time,
        age_s=max(0.0, now - sample_time),
        is_new=changed,
        at_most=after.value is not None and after.value <= analyser.detection_limit,
    )
    return used, after


def _value_verdict(reading: Reading, policy: TagPolicy) -> Verdict | None:
    if reading.quality is Quality.BAD:
        return Verdict.BAD_QUALITY
    if reading.quality is Quality.UNCERTAIN and not policy.use_uncertain:
        return Verdict.UNCERTAIN_QUALITY
    value = reading.value
    if value is None or not math.isfinite(value):
        return Verdict.NOT_A_NUMBER
    if 0.0 < abs(value) < sys.float_info.min:
        # No transmitter means a denormal: it is what a mangled word decodes to.
        return Verdict.NOT_A_NUMBER
    if not policy.low <= value <= policy.high:
        return Verdict.OUT_OF_RANGE
    return None


def _time_verdict(
    source: float | None, policy: TagPolicy, now: float, tolerance_s: float
) -> Verdict | None:
    if source is None:
        return None
    if source - now > tolerance_s:
        return Verdict.IN_THE_FUTURE
    if policy.stale_after_s is not None and now - source > policy.stale_after_s:
        return Verdict.INPUT_STALE
    return None


def _too_fast(value: float, policy: TagPolicy, before: TagMemory, now: float) -> bool:
    if policy.rate_limit_per_min is None or before.value is None or before.received_at is None:
        return False
    minutes = max(0.0, now - before.received_at) / 60.0
    return abs(value - before.value) > policy.rate_limit_per_min * minutes


def _refused(policy: TagPolicy, before: TagMemory, verdict: Verdict, now: float) -> Measurement:
    age_s = math.inf if before.sample_time is None else max(0.0, now - before.sample_time)
    at_most = (
        policy.analyser is not None
        and before.value is not None
        and before.value <= policy.analyser.detection_limit
    )
    return Measurement(policy.tag, before.value, verdict, before.sample_time, age_s, False, at_most)


def _substituted(found: Measurement, policy: TagPolicy, now: float) -> Measurement:
    """The configured stand-in where a tag is not usable; its verdict keeps saying why."""
    if found.usable or policy.substitute is None:
        return found
    return replace(found, value=policy.substitute, sample_time=now, age_s=0.0, note="substituted")
