"""The report: one self-contained page from the journal alone.

No script, no link, no font from elsewhere: it can be mailed, printed and kept.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from importlib import resources

from edgectl.console import charts, morning
from edgectl.console.cautions import CAUTIONS
from edgectl.console.column_drawing import column_drawing
from edgectl.console.figures import (
    MadeMove,
    loop_lag_ms,
    made_moves,
    overheads_ms,
    overruns,
    percentile,
    record_bytes,
    solve_times_ms,
    spells,
    standing_counts,
    stretches,
)
from edgectl.console.history import History
from edgectl.console.svg import clock_words, escaped, number_words
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import DecisionRecord

LONG_SENTENCE = 100
"""Characters; longer ones are set smaller."""
MOST_ROWS = 60
"""Longer lists show their newest part, and say so."""


@dataclass(frozen=True, slots=True)
class ChainWords:
    """What verifying the journal said."""

    intact: bool
    sentence: str
    entries: int
    newest_hash: str


def report_page(history: History, chain: ChainWords, journal: str) -> str:
    """The whole page as text."""
    latest = history.latest
    body = [_head(history, journal)]
    if latest is None:
        body.append("<p class='lede'>No cycle in this stretch of the journal.</p>")
    else:
        moves = made_moves(history.decisions)
        body += [
            _opening(history, latest),
            _solves(history),
            _standings(history),
            _cvs(history, latest),
            _mvs(history, latest, moves),
        ]
    body += [_record(history, chain, journal), _cautions()]
    style = resources.files("edgectl.console").joinpath("report.css").read_text("utf-8")
    title = escaped(f"{history.site.title}: report")
    return (
        "<!doctype html>\n<html lang='en-GB'><head><meta charset='utf-8'>"
        "<meta name='viewport' content='width=device-width, initial-scale=1'>"
        f"<title>{title}</title><style>{style}</style></head><body><main>"
        + "\n".join(body)
        + "</main></body></html>\n"
    )


def _p(words: str, class_: str = "") -> str:
    return f"<p class='{class_}'>{escaped(words)}</p>" if class_ else f"<p>{escaped(words)}</p>"


def _list(items: Iterable[str], class_: str = "") -> str:
    return f"<ul class='{class_}'>" + "".join(f"<li>{escaped(i)}</li>" for i in items) + "</ul>"


def _table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    shown = rows[-MOST_ROWS:]
    cells = "".join(f"<th>{escaped(word)}</th>" for word in head)
    lines = "".join(
        "<tr>" + "".join(f"<td>{escaped(cell)}</td>" for cell in row) + "</tr>" for row in shown
    )
    left_out = len(rows) - len(shown)
    note = _p(f"The newest {len(shown)} of {len(rows)}.", "quiet") if left_out else ""
    return f"<table><thead><tr>{cells}</tr></thead><tbody>{lines}</tbody></table>{note}"


def _key(*marks: tuple[str, str]) -> str:
    """What each line or dot means, drawn with the same styles."""
    said = []
    for class_, words in marks:
        if class_.startswith(("result", "outcome", "reading")):
            mark = f"<circle cx='15' cy='6' r='4' class='{class_}'/>"
        elif class_.startswith(("standing", "bar")):
            mark = f"<rect x='4' y='1' width='22' height='10' class='{class_}'/>"
        else:
            mark = f"<path d='M1 6H29' class='{class_}'/>"
        said.append(f"<svg viewBox='0 0 30 12' aria-hidden='true'>{mark}</svg>{escaped(words)}")
    return f"<p class='key'>{' '.join(said)}</p>"


def _head(history: History, journal: str) -> str:
    where = f"Made from {journal} alone. Times are plant time, UTC."
    if history.decisions:
        first, last = history.decisions[0].made_at, history.decisions[-1].made_at
        where = (
            f"{clock_words(first, with_date=True)} to {clock_words(last, with_date=True)},"
            f" {morning.counted(len(history.decisions), 'cycle')}. {where}"
        )
    insecure = history.latest is not None and history.latest.provenance.insecure
    warning = _p("Made over a session without security: for testing only.") if insecure else ""
    return f"<h1>{escaped(history.site.title)}</h1>{_p(where, 'quiet')}{warning}"


def _opening(history: History, latest: DecisionRecord) -> str:
    advice, site = latest.advice, history.site
    stands = {
        Standing.ADVISING: "Advising",
        Standing.HOLDING: "Holding the last move",
        Standing.SILENT: "Silent: nothing is suggested",
        Standing.STARTING: "Starting: no advice yet",
    }[advice.standing]
    since = stretches(spells(history.decisions))[-1].begin
    stood = f"{stands}, since {clock_words(since)}. Reason: {advice.reason}."
    targets = []
    for move in advice.moves:
        if move.target is None or advice.standing not in (Standing.ADVISING, Standing.HOLDING):
            continue
        position = latest.positions.get(move.mv)
        words = morning.suggestion_words(site, move, position.position if position else None)
        since_words = f" Since {clock_words(move.made_at)}." if move.made_at else ""
        detail = escaped(f"{move.sentence}{since_words}")
        targets.append(f"<li><b>{escaped(words)}</b><br>{detail}</li>")
    notices = "".join(_p(notice, "notice") for notice in advice.notices)
    still = "".join(_p(f"Still open {words}", "notice") for words in morning.events_answer(history))
    answers = (
        ("Did it hold?", morning.holds_answer(history)),
        ("Was it in time?", morning.budget_answer(history)),
        ("Which tags could not be used?", morning.tags_answer(history)),
        ("What became of the suggestions?", morning.moves_answer(history)),
    )
    asked = "".join(f"<dt>{escaped(q)}</dt><dd>{escaped(a)}</dd>" for q, a in answers)
    return (
        "<section class='opening'><div>"
        + _p(advice.sentence, "lede long" if len(advice.sentence) > LONG_SENTENCE else "lede")
        + _p(stood, "standing-line")
        + f"<ul class='targets'>{''.join(targets)}</ul>"
        + notices
        + still
        + f"<dl class='asked'>{asked}</dl></div><div>{_column(history, latest)}</div></section>"
    )


def _column(history: History, latest: DecisionRecord) -> str:
    estimated = history.newest_estimate
    profile = estimated.estimate.profile if estimated and estimated.estimate else ()
    drawing = column_drawing(latest, profile, history.site)
    if not drawing or estimated is None:
        return _p("No cycle of this stretch has an estimate, so there is no profile.", "quiet")
    key = _key(
        ("curve", "temperature, estimated"),
        ("reading", "temperature, measured"),
        ("bar light", "light component in the liquid, mole share of the shelf"),
    )
    old = estimated.made_at < latest.made_at
    when = f"The profile is the newest estimate, of {clock_words(estimated.made_at)}."
    return drawing + key + (_p(when, "notice") if old else "")


def _solves(history: History) -> str:
    times = solve_times_ms(history.decisions)
    if not times:
        return "<h2>Time</h2>" + _p("No solve was asked for in this stretch.")
    budget = history.decisions[-1].budget_ms
    overhead = percentile(overheads_ms(history), 0.95)
    lag = loop_lag_ms(history.decisions)["max"]
    said = ", ".join(
        f"{name} within {number_words(percentile(times, share) or 0.0)} ms"
        for name, share in (("half", 0.5), ("95 %", 0.95), ("99 %", 0.99))
    )
    words = f"Of {morning.counted(len(times), 'solve')}, {said}; the slowest took"
    words += f" {number_words(max(times))} ms. The budget, as enforced, is"
    words += f" {number_words(budget)} ms."
    if overhead is not None:
        words += (
            f" All else in a cycle (reading, checking, deciding, journal, writing) took at most"
            f" {number_words(overhead)} ms in 95 % of the cycles."
        )
    if lag is not None:
        words += f" The event loop was never later than {number_words(lag)} ms."
    return (
        "<h2>Time</h2>" + _p(words) + f"<div class='pair'><div><h3>How often it took how long</h3>"
        f"{charts.solve_histogram(times, budget)}</div>"
        f"<div><h3>How far the tail reaches</h3>{charts.solve_tail(times, budget)}</div></div>"
        + "<h3>Every overrun, and what was held</h3>"
        + _overruns(history)
    )


def _overruns(history: History) -> str:
    late = overruns(history.decisions)
    if not late:
        return _p("None.")
    rows = []
    for found in late:
        held = "; ".join(
            f"{mv} {morning.value_words(history.site, mv, target)}" for mv, target in found.held
        )
        record = found.record
        rows.append(
            (
                clock_words(record.made_at),
                f"{record.cycle}",
                f"{number_words(record.budget_ms)} ms",
                held or "nothing had been suggested yet",
                record.advice.sentence,
            )
        )
    return _table(("at", "cycle", "budget", "held", "what was said"), rows)


def _standings(history: History) -> str:
    found = spells(history.decisions)
    begin, end = history.decisions[0].made_at, history.decisions[-1].made_at
    counts = standing_counts(history.decisions)
    total = len(history.decisions)
    shares = ", ".join(f"{word} {100 * n / total:.1f} %" for word, n in counts.items() if n)
    rows = [
        (
            clock_words(spell.begin),
            morning.duration_words(spell.end - spell.begin),
            spell.standing.value,
            spell.reason,
            spell.sentence,
        )
        for spell in stretches(found)
        if spell.standing is not Standing.ADVISING
    ]
    listed = (
        _table(("from", "for", "standing", "reasons", "what was said first"), rows)
        if rows
        else _p("It advised throughout.")
    )
    return (
        "<h2>Standing</h2>"
        + _p(f"Share of the cycles: {shares}. The taller, the more it vouched for.")
        + charts.standing_ribbon(found, begin, end)
        + _key(*((f"standing {s.value}", s.value) for s in charts.HEIGHT_OF))
        + listed
    )


def _cvs(history: History, latest: DecisionRecord) -> str:
    names = list(dict.fromkeys(limits.cv for d in (latest,) for limits in d.limits))
    parts = [
        "<h2>What is controlled, against its limits</h2>",
        _key(
            ("curve", "estimate"),
            ("result", "result, at its sample time"),
            ("limit", "specification"),
            ("planned-limit", "limit as planned, backed off"),
            ("setpoint", "setpoint"),
            ("prediction", "newest prediction, with the moves"),
            ("untouched", "the same without them"),
            ("earlier", "earlier predictions"),
        ),
    ]
    for name in names:
        drawing = charts.cv_chart(history, name)
        if drawing:
            unit = history.site.unit(name)
            head = f"{name}, {history.site.description(name)}{f' [{unit}]' if unit else ''}"
            parts.append(f"<h3>{escaped(head)}</h3>{drawing}")
    return "".join(parts)


def _mvs(history: History, latest: DecisionRecord, moves: list[MadeMove]) -> str:
    parts = [
        "<h2>What was advised, and what the operator did</h2>",
        _key(
            ("position", "where it stood"),
            ("suggested", "suggestion, valid"),
            ("held", "suggestion, not valid"),
            ("outcome taken", "taken"),
            ("outcome part_taken", "in part"),
            ("outcome ignored", "not taken"),
            ("outcome opposed", "the other way"),
            ("outcome pending", "open or replaced"),
        ),
    ]
    for name in latest.positions:
        drawing = charts.mv_chart(history, name, moves)
        if drawing:
            unit = history.site.unit(name)
            head = f"{name}, {history.site.description(name)}{f' [{unit}]' if unit else ''}"
            parts.append(f"<h3>{escaped(head)}</h3>{drawing}")
    rows = [
        (
            clock_words(move.at),
            move.mv,
            f"{morning.value_words(history.site, move.mv, move.before)} to"
            f" {morning.value_words(history.site, move.mv, move.target)}",
            charts.OUTCOME_WORDS.get(move.outcome, move.outcome),
            move.sentence,
        )
        for move in moves
    ]
    if rows:
        parts.append(_table(("at", "move", "from, to", "operator", "why it was suggested"), rows))
    return "".join(parts)


def _record(history: History, chain: ChainWords, journal: str) -> str:
    rows = [
        ("journal", journal),
        ("chain", chain.sentence),
        ("entries", f"{chain.entries}"),
        ("newest hash (keep it elsewhere)", chain.newest_hash),
    ]
    latest, opening = history.latest, history.opening
    if latest is not None:
        who = latest.provenance
        rows += [
            ("edgectl", who.edgectl_version),
            ("site file", who.site_hash),
            ("model", who.model_hash),
        ]
    if opening is not None:
        rows += [
            ("engine", opening.engine),
            ("newest start", f"{clock_words(history.openings[-1].at, True)}, {opening.restored}"),
            ("pace", f"speed {opening.speed:g}, period {opening.period_s:g} s of plant time"),
        ]
    size = record_bytes(history)
    if size is not None:
        rows.append(("size of a decision", f"{size} bytes"))
    lines = "".join(
        f"<tr><td>{escaped(name)}</td><td><code>{escaped(value)}</code></td></tr>"
        for name, value in rows
    )
    return f"<h2>The record</h2>{_p(chain.sentence)}<table>{lines}</table>"


def _cautions() -> str:
    return "<h2>Cautions</h2>" + _list(CAUTIONS)
