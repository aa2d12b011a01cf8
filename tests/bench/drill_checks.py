"""What several drills promise alike: to hold, to say so, to come back without a jump."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

from evidence import Decided, Evidence, Publication, reading_value, targets

from edgectl.records.advice import Standing
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.measurements import Service

BACK_WITHIN = 3
"""Cycles, the first good one included."""
BUSY = frozenset({"overrun", "solver_warming", "worker_lost"})
"""Outcomes that a busy machine can bring into any drill."""


@dataclass(frozen=True)
class Verdict:
    """One promise, and what was measured."""

    promise: str
    kept: bool
    figures: str


Verdicts = Iterator[Verdict]


def hold(
    evidence: Evidence, first: int, reason: str, names: str, *, published: bool = True
) -> Verdicts:
    """The very cycle in which it happens is a hold, at the server too."""
    before, record = evidence.records[first - 1], evidence.records[first]
    seen = evidence.published(record.cycle)
    advice = record.advice
    shown = seen is not None and not seen.valid and seen.values.get("standing") == "holding"
    yield Verdict(
        "hold in the same cycle",
        before.advice.valid
        and advice.standing is Standing.HOLDING
        and advice.reason == reason
        and not advice.valid
        and names in advice.sentence
        and (shown or not published),
        f"cycle {record.cycle}: {advice.standing}, {advice.reason}: {advice.sentence}",
    )


def exactly_the_last_move(evidence: Evidence, held: Sequence[Decided]) -> Verdicts:
    """Bit for bit what stood at the server before, and not valid."""
    seen = [evidence.published(d.record.cycle) for d in held]
    last = evidence.published(held[0].record.cycle - 1)
    same = last is not None and all(
        s is not None and not s.valid and all_targets(s, evidence) == all_targets(last, evidence)
        for s in seen
    )
    values = {} if last is None else all_targets(last, evidence)
    yield Verdict(
        "the advice nodes repeat the last move exactly, valid = false",
        same,
        f"{len(held)} deliveries: {', '.join(f'{mv} {value}' for mv, value in values.items())}",
    )


def all_targets(seen: Publication, evidence: Evidence) -> dict[str, object]:
    return {mv: seen.target(mv) for mv in evidence.site.mv}


def never_valid(evidence: Evidence, first: int, end: int) -> Verdicts:
    cycles = {r.cycle for r in evidence.records[first:end]}
    valid = [s.cycle for s in evidence.publications if s.cycle in cycles and s.valid]
    yield Verdict("never valid meanwhile", not valid, f"{len(valid)} valid of {len(cycles)} cycles")


def one_event(evidence: Evidence, event: str, subject: str) -> Verdicts:
    """One root cause, one event: raised once, cleared once."""
    found = [e for e in evidence.events if e.event == event and e.subject == subject]
    yield Verdict(
        "one event, raised once and cleared once",
        [e.raised for e in found] == [True, False],
        f"{event} {subject}: {', '.join('raised' if e.raised else 'cleared' for e in found)}",
    )


def back(evidence: Evidence, first_good: int, when: str) -> Verdicts:
    """Advising soon, and from where the plant is."""
    following = evidence.records[first_good:]
    waited = next((k for k, r in enumerate(following) if r.advice.valid), None)
    busy = [r.outcome for r in following[: waited or 0] if r.outcome in BUSY]
    yield Verdict(
        f"advising within {BACK_WITHIN} cycles after {when}",
        waited is not None and waited < BACK_WITHIN,
        "never"
        if waited is None
        else f"in cycle {waited + 1} of them"
        + (f" ({', '.join(busy)} on the way)" if busy else ""),
    )
    if waited is not None:
        yield from no_jump(evidence, first_good + waited)


def no_jump(evidence: Evidence, at: int) -> Verdicts:
    """The plan starts where the plant is, and no target is farther from it than one move."""
    record, site = evidence.records[at], evidence.site
    words, good = [], True
    for mv, target in targets(record).items():
        stands = record.positions[mv].position
        setpoint = reading_value(record, site.mv[mv].position)
        planned = next(move.position for move in record.planned if move.mv == mv)
        jump = None if target is None or stands is None else abs(target - stands)
        good = good and stands is not None and setpoint == stands == planned
        good = good and jump is not None and jump <= site.mv[mv].max_move
        words.append(f"{mv} {stands:g} -> {target:g}" if jump is not None else f"{mv} unknown")
    yield Verdict("without a jump, from the plant's position", good, ", ".join(words))


def withheld(
    evidence: Evidence, mv: str, reason: str, service: Service, first: int, end: int
) -> Verdicts:
    """A move that cannot be made is not suggested, and plan and advice say so."""
    records = [r for r in evidence.records[first:end] if r.outcome not in BUSY]
    at = [r.positions[mv] for r in records]
    yield Verdict(
        "in the same cycle it counts as out of service",
        bool(at) and all(p.reason == reason and p.service is service for p in at),
        f"{len(records)} cycles: {mv} {service}, {reason}",
    )
    moved = [r for r in records if asks(evidence, r, mv, service)]
    acted = [
        w for w in evidence.crew_writes(records[0].made_at, records[-1].made_at) if mv in w.node
    ]
    yield Verdict(
        "the move concerned is withheld",
        not moved and not acted,
        f"asked for {len(moved)} times, entered {len(acted)} times",
    )
    if service is Service.FIXED:
        paths = [m for r in records for m in r.planned if m.mv == mv]
        fixed = all(set(m.path) == {m.position} for m in paths)
        yield Verdict("the plan keeps it where it is", bool(paths) and fixed, f"{len(paths)} plans")
    told = [r for r in records if any(mv in notice for notice in r.advice.notices)]
    reasons = {m.reason for r in records for m in r.advice.moves if m.mv == mv}
    example = next((n for n in records[0].advice.notices if mv in n), "no notice")
    yield Verdict(
        "the advice says so",
        len(told) == len(records) and reason in reasons,
        f"{example} (reason of the move: {', '.join(sorted(reasons))})",
    )
    advising = sum(r.advice.valid for r in records)
    yield Verdict(
        "it goes on advising the rest", advising == len(records), f"{advising} of {len(records)}"
    )
    yield from one_event(evidence, "move_withheld", mv)


def asks(evidence: Evidence, record: DecisionRecord, mv: str, service: Service) -> bool:
    """Whether the advice asks for a move that cannot be made.

    A target that only follows the plant may lag behind it, never by a move worth a hand.
    """
    at, move = record.positions[mv].position, next(m for m in record.advice.moves if m.mv == mv)
    if move.changed and service is Service.FIXED:
        return True
    if at is None or move.target is None:
        return False
    if abs(move.target - at) <= evidence.site.mv[mv].worthwhile_move:
        return False
    return service is Service.FIXED or (move.target > at) is (service is Service.LOWER_ONLY)


def bumpless_return(evidence: Evidence, mv: str, end: int) -> Verdicts:
    if end >= len(evidence.records):
        yield Verdict("it comes back", False, "the run ended first")
        return
    free = next(
        (
            k
            for k, r in enumerate(evidence.records[end:], end)
            if r.advice.valid and r.positions[mv].service is Service.FREE
        ),
        None,
    )
    yield Verdict(
        f"in service within {BACK_WITHIN} cycles after it is free again",
        free is not None and free - end < BACK_WITHIN,
        "never" if free is None else f"in cycle {free - end + 1} of them",
    )
    if free is not None:
        yield from no_jump(evidence, free)


def poor_stretches(
    values: Sequence[object], poor: Callable[..., bool]
) -> Iterator[tuple[int, int]]:
    """Stretches of poor values: first index, and the index behind."""
    k = 0
    for is_poor, group in itertools.groupby(values, poor):
        n = len(list(group))
        if is_poor:
            yield k, k + n
        k += n


def reasons_of(held: Sequence[Decided]) -> list[str]:
    return [d.record.advice.reason for d in held]
