"""What a morning meeting asks, answered in sentences."""

from __future__ import annotations

import math

from edgectl.console.charts import OUTCOME_WORDS
from edgectl.console.figures import (
    MadeMove,
    Spell,
    made_moves,
    overruns,
    refused_plans,
    spells,
    stretches,
    unused_tags,
    uptake,
)
from edgectl.console.history import History, SiteWords
from edgectl.console.svg import clock_words, number_words
from edgectl.records.advice import Standing, SuggestedMove

LONGEST_LIST = 6
ASKING = ("economics", "limit_reached", "setpoint", "only_together")
"""Reasons at a move that ask for a hand; with any other the target only says where it stands."""


def duration_words(seconds: float) -> str:
    """`4 min 30 s`, `2 h 05 min`: two steps, rounded to the lower one."""
    total = round(seconds)
    if total < 60:
        return f"{total} s"
    minutes, rest = divmod(total, 60)
    if minutes < 60:
        return f"{minutes} min {rest:02d} s" if rest else f"{minutes} min"
    hours, minutes = divmod(round(total / 60), 60)
    return f"{hours} h {minutes:02d} min" if minutes else f"{hours} h"


def repeated(count: int) -> str:
    """`once`, `twice`, `3 times`."""
    return {1: "once", 2: "twice"}.get(count, f"{count} times")


def counted(count: int, noun: str) -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def value_words(site: SiteWords, name: str, value: float | None) -> str:
    """A value with its unit."""
    if value is None:
        return "nothing"
    return f"{number_words(value)} {site.unit(name)}".rstrip()


def asks(move: SuggestedMove) -> bool:
    """Whether a hand is asked for: not once it was taken, withheld, or nothing shall change."""
    return move.target is not None and move.reason in ASKING


def suggestion_words(site: SiteWords, move: SuggestedMove, position: float | None) -> str:
    """`FIC-2103 reflux flow: 7,900 kg/h, now at 8,000 kg/h`."""
    name = f"{move.mv} {site.description(move.mv)}"
    target = value_words(site, move.mv, move.target)
    there = value_words(site, move.mv, position)
    if position is None:
        return f"{name}: {target}"
    if there == target or not asks(move):
        return f"{name}: stays at {there}"
    return f"{name}: {target}, now at {there}"


def holds_answer(history: History) -> str:
    """Did it hold, how long, and why?"""
    found = stretches(spells(history.decisions))
    held = [s for s in found if s.standing is Standing.HOLDING]
    silent = [s for s in found if s.standing is Standing.SILENT]
    if not held and not silent:
        return "No hold: every cycle after the start ended in advice."
    said = []
    for kind, word in ((held, "held the last move"), (silent, "fell silent")):
        if kind:
            longest = max(kind, key=_length)
            said.append(
                f"It {word} {repeated(len(kind))}, at the longest for"
                f" {duration_words(_length(longest))} from {clock_words(longest.begin)}"
                f" ({longest.reason})."
            )
    return " ".join(said)


def _length(spell: Spell) -> float:
    return spell.end - spell.begin


def budget_answer(history: History) -> str:
    """Was it in time?"""
    late = overruns(history.decisions)
    skipped = sum(decision.skipped_cycles for decision in history.decisions)
    said = (
        f"{counted(len(late), 'cycle')} ran over the budget."
        if late
        else "No cycle ran over its budget."
    )
    return said + (f" {counted(skipped, 'cycle')} skipped." if skipped else "")


def tags_answer(history: History) -> str:
    """Which tags could not be used?"""
    found = unused_tags(history.decisions)
    blind = sum(decision.outcome == "no_data" for decision in history.decisions)
    away = f"The plant could not be read in {counted(blind, 'cycle')}. " if blind else ""
    if not found:
        return f"{away}Every tag was usable in every cycle{' that read it' if blind else ''}."
    named = "; ".join(
        f"{tag.tag} in {counted(tag.cycles, 'cycle')} ({tag.why}"
        f"{', and still now' if tag.unused_now else f', last at {clock_words(tag.last_at)}'})"
        for tag in found[:LONGEST_LIST]
    )
    more = len(found) - LONGEST_LIST
    return f"{away}Not used: {named}{f'; and {more} more' if more > 0 else ''}."


def moves_answer(history: History) -> str:
    """What did the operators do with the suggestions, and what was never suggested?"""
    moves = made_moves(history.decisions)
    refused = refused_plans(history.decisions)
    said = [_uptake_words(moves)]
    if refused:
        said.append(
            f"The vetting refused {counted(len(refused), 'plan')}, the last at"
            f" {clock_words(refused[-1].made_at)}: {refused[-1].vetting[0]}."
        )
    return " ".join(said)


def _uptake_words(moves: list[MadeMove]) -> str:
    if not moves:
        return "No suggestion was made."
    counts = {word: sum(m.outcome == word for m in moves) for word in OUTCOME_WORDS}
    named = ", ".join(f"{count} {OUTCOME_WORDS[word]}" for word, count in counts.items() if count)
    shares = uptake(moves)
    taken = f" Of those settled, {shares['taken']:.0%} were taken in full." if shares else ""
    return f"{counted(len(moves), 'move')} suggested: {named}.{taken.replace('%', ' %')}"


def events_answer(history: History) -> list[str]:
    """Causes that are still raised at the end of the stretch.

    A runtime that was killed cleared nothing: what the newest start has not raised anew is over.
    """
    standing: dict[tuple[str, str], str] = {}
    started = history.openings[-1].at if history.openings else -math.inf
    for dated in history.events:
        if dated.at < started:
            continue
        record = dated.record
        key = (getattr(record, "event", ""), getattr(record, "subject", ""))
        if getattr(record, "raised", False):
            standing[key] = f"since {clock_words(dated.at)}: {getattr(record, 'sentence', '')}"
        else:
            standing.pop(key, None)
    return list(standing.values())
