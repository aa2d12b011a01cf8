"""What a stretch of the journal adds up to: counts, percentiles, spells, moves."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from edgectl.console.history import History
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import DecisionRecord, LoopLag
from edgectl.records.measurements import Verdict

SETTLED = ("taken", "part_taken", "ignored", "opposed")
"""What a suggestion can end in; `superseded` ones were replaced before anyone had time."""


@dataclass(frozen=True, slots=True)
class Spell:
    """Cycles in a row with one standing for one reason."""

    standing: Standing
    reason: str
    sentence: str
    begin: float
    end: float
    cycles: int


@dataclass(slots=True)
class MadeMove:
    """One suggestion for one MV and what became of it."""

    mv: str
    at: float
    before: float | None
    target: float
    reason: str
    sentence: str
    outcome: str = "pending"
    now: float | None = None


@dataclass(frozen=True, slots=True)
class HeldCycle:
    """A cycle past its budget, and what stood at the advisory nodes meanwhile."""

    record: DecisionRecord
    held: tuple[tuple[str, float | None], ...]


@dataclass(frozen=True, slots=True)
class UnusedTag:
    tag: str
    cycles: int
    why: str
    """The commonest verdict."""
    last_at: float
    unused_now: bool


def percentile(values: Iterable[float], share: float) -> float | None:
    """Linear between neighbours (method 7 of Hyndman & Fan 1996); None without values."""
    ranked = sorted(value for value in values if math.isfinite(value))
    if not ranked:
        return None
    place = share * (len(ranked) - 1)
    below = math.floor(place)
    above = min(below + 1, len(ranked) - 1)
    return ranked[below] + (place - below) * (ranked[above] - ranked[below])


def solve_times_ms(decisions: Iterable[DecisionRecord]) -> list[float]:
    """Wall time of each solve that was asked for, overruns included [ms]."""
    return [d.timings.solve_ms for d in decisions if was_asked(d)]


def was_asked(decision: DecisionRecord) -> bool:
    """Whether a worker was asked in this cycle."""
    return decision.outcome not in ("bad_inputs", "no_data", "not_asked", "solver_warming")


def overheads_ms(history: History) -> list[float]:
    """All that a cycle does beside solving: read, validate, decide, journal, publish [ms]."""
    found = []
    for seq, decision in zip(history.decision_seqs, history.decisions, strict=True):
        spent, delivery = decision.timings, history.deliveries.get(seq)
        if delivery is not None:
            own = spent.read_ms + spent.validate_ms + spent.decide_ms
            found.append(own + delivery.journal_ms + delivery.publish_ms)
    return found


def standing_counts(decisions: Iterable[DecisionRecord]) -> dict[str, int]:
    counts = Counter(decision.advice.standing for decision in decisions)
    return {standing.value: counts[standing] for standing in Standing}


def spells(decisions: Sequence[DecisionRecord]) -> list[Spell]:
    """Oldest first. A spell lasts until the next one begins."""
    found: list[Spell] = []
    for decision in decisions:
        advice, at = decision.advice, decision.made_at
        last = found[-1] if found else None
        if last and (last.standing, last.reason) == (advice.standing, advice.reason):
            found[-1] = replace(last, end=at, cycles=last.cycles + 1)
            continue
        if last:
            found[-1] = replace(last, end=at)
        found.append(Spell(advice.standing, advice.reason, advice.sentence, at, at, 1))
    return found


def stretches(found: Sequence[Spell]) -> list[Spell]:
    """Spells in a row with one standing as one, all their reasons named, the first one's words."""
    merged: list[Spell] = []
    for spell in found:
        last = merged[-1] if merged else None
        if last is None or last.standing is not spell.standing:
            merged.append(spell)
            continue
        reasons = last.reason.split(", ")
        named = reasons if spell.reason in reasons else [*reasons, spell.reason]
        merged[-1] = replace(
            last, end=spell.end, cycles=last.cycles + spell.cycles, reason=", ".join(named)
        )
    return merged


def overruns(decisions: Iterable[DecisionRecord]) -> list[HeldCycle]:
    return [
        HeldCycle(d, tuple((move.mv, move.target) for move in d.advice.moves))
        for d in decisions
        if d.outcome == "overrun"
    ]


def made_moves(decisions: Iterable[DecisionRecord]) -> list[MadeMove]:
    """Every suggestion in the stretch, with the newest word on what the operator did."""
    found: list[MadeMove] = []
    current: dict[str, MadeMove] = {}
    for decision in decisions:
        # A follow-up speaks of the suggestion that stood when the cycle began.
        for follow_up in decision.follow_ups:
            move = current.get(follow_up.mv)
            if move is not None and move.target == follow_up.suggested:
                move.outcome, move.now = follow_up.outcome, follow_up.now
                move.before = follow_up.before
        for suggested in decision.advice.moves:
            if suggested.changed and suggested.target is not None:
                position = decision.positions.get(suggested.mv)
                move = MadeMove(
                    suggested.mv,
                    decision.made_at,
                    position.position if position else None,
                    suggested.target,
                    suggested.reason,
                    suggested.sentence,
                )
                current[suggested.mv] = move
                found.append(move)
    return found


def uptake(moves: Iterable[MadeMove]) -> dict[str, float] | None:
    """Share of the settled suggestions by outcome; None when none is settled."""
    counts = Counter(move.outcome for move in moves if move.outcome in SETTLED)
    total = sum(counts.values())
    return {word: counts[word] / total for word in SETTLED} if total else None


def refused_plans(decisions: Iterable[DecisionRecord]) -> list[DecisionRecord]:
    """Cycles whose plan did not pass the vetting."""
    return [decision for decision in decisions if decision.vetting]


def unused_tags(decisions: Sequence[DecisionRecord]) -> list[UnusedTag]:
    """Tags that validation refused, most often refused first."""
    verdicts: dict[str, Counter[str]] = {}
    last_at: dict[str, float] = {}
    for decision in decisions:
        for tag, measurement in decision.measurements.items():
            if measurement.verdict is not Verdict.USED:
                verdicts.setdefault(tag, Counter())[measurement.verdict.value] += 1
                last_at[tag] = decision.made_at
    newest = decisions[-1].made_at if decisions else math.nan
    found = [
        UnusedTag(
            tag, sum(why.values()), why.most_common(1)[0][0], last_at[tag], last_at[tag] == newest
        )
        for tag, why in verdicts.items()
    ]
    return sorted(found, key=lambda tag: (-tag.cycles, tag.tag))


def percentiles_ms(values: Sequence[float], *shares: float) -> dict[str, float | None]:
    """`{"p50": ..., "max": ...}` rounded to a microsecond; share 1 is called `max` [ms]."""
    found = {}
    for share in shares:
        value = percentile(values, share)
        name = "max" if share == 1.0 else f"p{share * 100:g}"
        found[name] = None if value is None else round(value, 3)
    return found


def loop_lag_ms(decisions: Sequence[DecisionRecord]) -> dict[str, float | None]:
    """The p99 of all samples, bounded from above, and the worst of all [ms]."""
    lags = [decision.loop_lag for decision in decisions]
    p99 = pooled_p99_ms(lags)
    worst = max((lag.max_ms for lag in lags), default=None)
    return {
        "p99": None if p99 is None else round(p99, 3),
        "max": None if worst is None else round(worst, 3),
    }


def pooled_p99_ms(lags: Sequence[LoopLag]) -> float | None:
    """An upper bound of the p99 of all samples: cycles keep three ranks, not their samples.

    The smallest lag that at most 1 % of all samples can lie above, each cycle counted at its
    worst. None without samples.
    """
    total = sum(lag.samples for lag in lags)
    if total == 0:
        return None
    ranks = sorted({rank for lag in lags for rank in (lag.p90_ms, lag.p99_ms, lag.max_ms)})
    return ranks[
        bisect_left(
            ranks, True, key=lambda x: sum(_most_above(lag, x) for lag in lags) <= 0.01 * total
        )
    ]


def _most_above(lag: LoopLag, limit_ms: float) -> int:
    """How many samples of a cycle can lie above `limit_ms`."""
    if lag.max_ms <= limit_ms:
        return 0
    if lag.p99_ms <= limit_ms:
        return lag.samples - math.ceil(0.99 * lag.samples)
    if lag.p90_ms <= limit_ms:
        return lag.samples - math.ceil(0.90 * lag.samples)
    return lag.samples


def record_bytes(history: History) -> int | None:
    """Median size of a decision in the journal [bytes]."""
    sizes = [d.previous_record_bytes for d in history.deliveries.values()]
    middle = percentile((float(size) for size in sizes if size > 0), 0.5)
    return None if middle is None else round(middle)


def summary(history: History) -> dict[str, object]:
    """The figures that the demo, the report and their JSON share."""
    decisions = history.decisions
    standings = standing_counts(decisions)
    moves = made_moves(decisions)
    latest = history.latest
    return {
        "cycles": len(decisions),
        **standings,
        "overruns": len(overruns(decisions)),
        "solve_ms": percentiles_ms(solve_times_ms(decisions), 0.5, 0.95, 0.99, 1.0),
        "budget_ms": latest.budget_ms if latest else None,
        "cycle_overhead_ms": percentiles_ms(overheads_ms(history), 0.5, 0.95),
        "loop_lag_ms": loop_lag_ms(decisions),
        "record_bytes": record_bytes(history),
        "suggestions": len({move.at for move in moves}),
        "moves_taken": sum(move.outcome == "taken" for move in moves),
        "uptake": uptake(moves),
    }
