"""A restart carries on from the newest intact decision, if it is young enough.

What comes back: the estimator's memory, which analyser results were used already,
and when a hand was asked for last. What does not: the standing. Every start warms up.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from edgectl.cycle.pace import PaceState
from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import Seen
from edgectl.cycle.state import LoopState
from edgectl.cycle.validation import TagMemory
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.encoding import EncodingError, from_json
from edgectl.records.entries import Json
from edgectl.records.measurements import Verdict


@dataclass(frozen=True, slots=True)
class Restored:
    """Where a runtime begins."""

    state: LoopState
    first_cycle: int
    from_seq: int | None
    words: str
    """`cold: ...` or `memory of cycle N, ...`, for the opening record."""


def cold(why: str, first_cycle: int = 1) -> Restored:
    return Restored(LoopState(), first_cycle, None, f"cold: {why}")


def restored(
    body: Mapping[str, Json] | None,
    seq: int | None,
    model_hash: str | None,
    now: float,
    policies: Policies,
) -> Restored:
    """Where to begin, given the body of the newest intact decision.

    Parameters
    ----------
    body, seq : mapping, int, or None
        None when there is no decision yet.
    model_hash : str or None
        Of the present model; a memory of another model is of no use. None: not known.
    now : float
        Plant time [s].
    """
    if body is None:
        return cold("no decision before this one")
    try:
        record: DecisionRecord = from_json(DecisionRecord, body)
    except EncodingError as error:
        return cold(f"the newest decision cannot be read ({error})")
    following = record.cycle + 1
    memory, memory_at = record.memory_in, record.memory_at
    if record.estimate is not None:
        memory, memory_at = record.estimate.memory, record.made_at
    if model_hash is not None and record.provenance.model_hash != model_hash:
        return cold("the newest decision was made with another model", following)
    if not memory or memory_at is None:
        return cold(f"cycle {record.cycle} has no memory", following)
    age_s = now - memory_at
    most_s = policies.cycle.restore_max_age_s
    if not 0.0 <= age_s <= most_s:
        why = f"the memory of cycle {record.cycle} is {age_s:.0f} s old, {most_s:.0f} s are allowed"
        return cold(why, following)
    state = LoopState(
        seen=_seen(record, policies), memory=memory, memory_at=memory_at, pace=_pace(record)
    )
    words = f"memory of cycle {record.cycle}, {age_s:.0f} s old"
    return Restored(state, following, seq, words)


def _seen(record: DecisionRecord, policies: Policies) -> Seen:
    """Which analyser results were used: an old result must not be taken for a new one."""
    received = {reading.tag: reading for reading in record.readings}
    tags = {}
    for tag, found in record.measurements.items():
        policy = policies.tags.get(tag)
        if policy is None or policy.analyser is None or found.sample_time is None:
            continue
        used_at, result, repeats = found.sample_time + policy.analyser.delay_s, found.value, 1
        if found.verdict is Verdict.FROZEN and tag in received:
            # Dead before the restart, dead after it: its newest repetition is no new result.
            newest = received[tag]
            used_at = used_at if newest.source_time is None else newest.source_time
            result, repeats = newest.value, policy.analyser.repeat_limit
        tags[tag] = TagMemory(
            value=found.value,
            sample_time=found.sample_time,
            received_at=record.made_at,
            source_time=used_at,
            repeats=repeats,
            result=result,
        )
    return Seen(tags=tags)


def _pace(record: DecisionRecord) -> PaceState:
    asked = [m.made_at for m in record.advice.moves if m.made_at is not None]
    if record.advice.made_at is None or not asked:
        return PaceState()
    return replace(PaceState(), asked_at=(record.advice.made_at,))
