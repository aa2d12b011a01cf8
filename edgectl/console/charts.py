"""The report's charts: solve times, standings, and each CV and MV over time."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from edgectl.console.figures import MadeMove, Spell, percentile
from edgectl.console.history import History
from edgectl.console.svg import (
    Drawing,
    Point,
    Scale,
    clock_words,
    number_words,
    thinned,
    time_ticks,
)
from edgectl.records.advice import Standing
from edgectl.records.cycle_record import DecisionRecord

WIDTH = 1000.0
LEFT, RIGHT = 64.0, 984.0
AHEAD_S = 3600.0
EARLIER_PREDICTIONS = 5

HEIGHT_OF = {
    Standing.ADVISING: 1.0,
    Standing.HOLDING: 0.62,
    Standing.STARTING: 0.34,
    Standing.SILENT: 0.14,
}
"""The ribbon is as tall as the runtime vouches for: it reads without colour too."""

OUTCOME_WORDS = {
    "taken": "taken",
    "part_taken": "taken in part",
    "ignored": "not taken",
    "opposed": "moved the other way",
    "superseded": "replaced before it was due",
    "pending": "still open",
}


@dataclass(frozen=True, slots=True)
class Frame:
    """The plotting area shared by the charts over time."""

    drawing: Drawing
    across: Scale
    top: float
    bottom: float

    @classmethod
    def over(cls, begin: float, end: float, height: float, title: str) -> Frame:
        drawing = Drawing(WIDTH, height, title)
        return cls(drawing, Scale(begin, end, LEFT, RIGHT), 10.0, height - 28.0)

    def time_axis(self) -> None:
        self.drawing.line((LEFT, self.bottom), (RIGHT, self.bottom), "axis")
        for tick in time_ticks(self.across.low, self.across.high):
            x = self.across(tick)
            self.drawing.line((x, self.bottom), (x, self.bottom + 5), "axis")
            self.drawing.text(x, self.bottom + 19, clock_words(tick), "small", "middle")

    def value_axis(self, up: Scale, most: int = 4) -> None:
        for tick in up.ticks(most):
            self.drawing.line((LEFT, up(tick)), (RIGHT, up(tick)), "rule")
            self.drawing.text(LEFT - 8, up(tick) + 4, number_words(tick), "small", "end")

    def now(self, at: float) -> None:
        x = self.across(at)
        self.drawing.line((x, self.top), (x, self.bottom), "now")
        self.drawing.text(x + 4, self.top + 9, "end of the stretch", "small")


def solve_histogram(times_ms: Sequence[float], budget_ms: float) -> str:
    """How often a solve took how long, up to the budget."""
    drawing = Drawing(490, 230, "How long the solves took, against the budget")
    top, bottom, left, right = 22.0, 190.0, 44.0, 478.0
    highest = max([*times_ms, budget_ms]) * 1.04
    across = Scale(0.0, highest, left, right)
    bins = 40
    counts = [0] * bins
    for value in times_ms:
        counts[min(int(value / highest * bins), bins - 1)] += 1
    up = Scale(0.0, max(counts, default=0) or 1, bottom, top)
    for tick in (tick for tick in up.ticks(4) if tick == int(tick)):
        drawing.line((left, up(tick)), (right, up(tick)), "rule")
        drawing.text(left - 6, up(tick) + 4, f"{tick:g}", "small", "end")
    for index, count in enumerate(counts):
        if count:
            x, x2 = across(index * highest / bins), across((index + 1) * highest / bins)
            inside = (index + 1) * highest / bins <= budget_ms
            hint = f"{count} solves, {number_words(index * highest / bins)} ms and more"
            drawing.rectangle(
                x + 0.5,
                up(count),
                x2 - x - 1,
                bottom - up(count),
                "bar" if inside else "bar late",
                hint,
            )
    _budget_mark(drawing, across(budget_ms), top, bottom)
    _wall_axis(drawing, across, bottom, left, right)
    return str(drawing)


def solve_tail(times_ms: Sequence[float], budget_ms: float) -> str:
    """The share of solves that took longer than so long: the tail, on a logarithmic scale."""
    drawing = Drawing(490, 230, "Share of the solves that took longer, against the budget")
    top, bottom, left, right = 22.0, 190.0, 56.0, 478.0
    ranked = sorted(times_ms)
    count = len(ranked)
    lowest = 10.0 ** math.floor(math.log10(0.5 / max(count, 1)))
    across = Scale(0.0, max([*ranked, budget_ms]) * 1.04, left, right)
    up = Scale(lowest, 1.0, bottom, top, logarithmic=True)
    for tick in up.ticks():
        drawing.line((left, up(tick)), (right, up(tick)), "rule")
        drawing.text(left - 6, up(tick) + 4, f"{100 * tick:g} %", "small", "end")
    steps: list[Point] = [(across(0.0), up(1.0))]
    for index, value in enumerate(ranked):
        before, after = 1.0 - index / count, max(1.0 - (index + 1) / count, lowest)
        steps += [(across(value), up(before)), (across(value), up(after))]
    drawing.path(steps, "curve")
    for share in (0.5, 0.99):
        slow = percentile(ranked, share)
        if slow is not None:
            x, y = across(slow), up(max(1.0 - share, lowest))
            drawing.dot(x, y, 3.5, "reading")
            words = f"{100 * share:g} % took at most {number_words(slow)} ms"
            anchor = "start" if x < 0.5 * (left + right) else "end"
            drawing.text(x + (8 if anchor == "start" else -8), y - 5, words, "small", anchor)
    _budget_mark(drawing, across(budget_ms), top, bottom)
    _wall_axis(drawing, across, bottom, left, right)
    return str(drawing)


def _budget_mark(drawing: Drawing, x: float, top: float, bottom: float) -> None:
    drawing.line((x, top - 4), (x, bottom), "limit")
    drawing.text(x - 5, top + 5, "budget", "small strong", "end")


def _wall_axis(drawing: Drawing, across: Scale, bottom: float, left: float, right: float) -> None:
    drawing.line((left, bottom), (right, bottom), "axis")
    for tick in across.ticks(6):
        drawing.line((across(tick), bottom), (across(tick), bottom + 5), "axis")
        drawing.text(across(tick), bottom + 19, number_words(tick), "small", "middle")
    drawing.text(right, bottom + 36, "wall milliseconds for estimate and plan", "small", "end")


def standing_ribbon(spells: Sequence[Spell], begin: float, end: float) -> str:
    """What the runtime vouched for, over the whole stretch."""
    frame = Frame.over(begin, end, 118.0, "Standing over time")
    span = frame.bottom - frame.top
    for spell in spells:
        x, x2 = frame.across(spell.begin), frame.across(spell.end)
        height = HEIGHT_OF[spell.standing] * span
        hint = (
            f"{clock_words(spell.begin)} to {clock_words(spell.end)}: {spell.standing},"
            f" {spell.reason}. {spell.sentence}"
        )
        # A single cycle must stay visible on a day's page.
        frame.drawing.rectangle(
            x, frame.bottom - height, max(x2 - x, 1.5), height, f"standing {spell.standing}", hint
        )
    frame.time_axis()
    return str(frame.drawing)


def cv_chart(history: History, cv: str) -> str:
    """One CV: results, estimate, limits, the newest prediction and a few earlier ones."""
    begin, now = history.decisions[0].made_at, history.decisions[-1].made_at
    # Room for the newest prediction, but most of the width belongs to what happened.
    end = now + min(AHEAD_S, max(600.0, 0.4 * (now - begin)))
    traces = CvTraces.of(history, cv)
    site = history.site.cv(cv)
    logarithmic = site.get("coordinate") == "logarithmic"
    hard = [limit for limit in (site.get("hard_low"), site.get("hard_high")) if limit is not None]
    values = [*traces.shown_values(end), *hard]
    if not values:
        return ""
    frame = Frame.over(begin, end, 230.0, f"{history.site.description(cv)} over time")
    up = _value_scale(values, frame, logarithmic)
    frame.value_axis(up)
    for limit in hard:
        frame.drawing.line((LEFT, up(limit)), (RIGHT, up(limit)), "limit")
        frame.drawing.text(LEFT + 6, up(limit) - 5, f"specification {limit:g}", "small strong")

    def placed(points: Sequence[Point]) -> list[Point]:
        return [(frame.across(t), up(v)) if t <= end else (math.nan, math.nan) for t, v in points]

    for limit_line in (traces.low, traces.high):
        frame.drawing.path(placed(thinned(limit_line)), "planned-limit")
    frame.drawing.path(placed(traces.setpoint), "setpoint")
    for prediction in traces.earlier:
        frame.drawing.path(placed(prediction), "earlier")
    frame.drawing.path(placed(thinned(traces.estimate)), "curve")
    for t, value in traces.results:
        if begin <= t <= end:
            frame.drawing.dot(frame.across(t), up(value), 2.6, "result")
    frame.drawing.path(placed(traces.without), "untouched")
    frame.drawing.path(placed(traces.newest), "prediction")
    frame.now(now)
    frame.time_axis()
    return str(frame.drawing)


def _value_scale(values: Sequence[float], frame: Frame, logarithmic: bool) -> Scale:
    if logarithmic:
        above = [value for value in values if value > 0.0] or [1.0]
        low, high = min(above) / 1.15, max(above) * 1.15
    else:
        margin = 0.08 * (max(values) - min(values)) or 1.0
        low, high = min(values) - margin, max(values) + margin
    return Scale(low, high, frame.bottom, frame.top, logarithmic)


@dataclass(slots=True)
class CvTraces:
    """Points over plant time for one CV."""

    estimate: list[Point]
    results: list[Point]
    low: list[Point]
    high: list[Point]
    setpoint: list[Point]
    earlier: list[list[Point]]
    newest: list[Point]
    without: list[Point]

    @classmethod
    def of(cls, history: History, cv: str) -> CvTraces:
        traces = cls([], [], [], [], [], [], [], [])
        measured = history.site.cv(cv).get("measured", "")
        for decision in history.decisions:
            traces._add(decision, cv, measured)
        predicting = [d for d in history.decisions if any(p.cv == cv for p in d.predictions)]
        if predicting:
            traces.newest, traces.without = _predicted(predicting[-1], cv)
            if predicting[-1].made_at < history.decisions[-1].made_at:
                traces.newest, traces.without = [], []
            gap = max(1, len(predicting) // (EARLIER_PREDICTIONS + 1))
            chosen = predicting[gap:-1:gap][:EARLIER_PREDICTIONS]
            traces.earlier = [_predicted(decision, cv)[0] for decision in chosen]
        return traces

    def _add(self, decision: DecisionRecord, cv: str, measured: str) -> None:
        at = decision.made_at
        believed = None
        if decision.estimate is not None:
            believed = next((c for c in decision.estimate.cvs if c.cv == cv), None)
        self.estimate.append((at, believed.value if believed else math.nan))
        self.low.append((at, _or_gap(believed.low if believed else None)))
        self.high.append((at, _or_gap(believed.high if believed else None)))
        limits = next((found for found in decision.limits if found.cv == cv), None)
        self.setpoint.append((at, _or_gap(limits.setpoint if limits else None)))
        result = decision.measurements.get(measured)
        if result is not None and result.is_new and result.usable:
            assert result.value is not None
            self.results.append((result.sample_time or at, result.value))

    def shown_values(self, end: float) -> Iterator[float]:
        lines = (self.estimate, self.results, self.low, self.high, self.setpoint)
        ahead = (*self.earlier, self.newest, self.without)
        for points in (*lines, *ahead):
            yield from (v for t, v in points if t <= end and math.isfinite(v))


def _or_gap(value: float | None) -> float:
    return math.nan if value is None else value


def _predicted(decision: DecisionRecord, cv: str) -> tuple[list[Point], list[Point]]:
    """With and without the moves, starting from the estimate at that instant."""
    found = next(p for p in decision.predictions if p.cv == cv)
    times = [decision.made_at + 60.0 * minutes for minutes in decision.times_min]
    start: list[Point] = []
    if decision.estimate is not None:
        start = [(decision.made_at, c.value) for c in decision.estimate.cvs if c.cv == cv]
    with_moves = start + list(zip(times, found.with_moves, strict=False))
    return with_moves, start + list(zip(times, found.without_moves, strict=False))


def mv_chart(history: History, mv: str, moves: Sequence[MadeMove]) -> str:
    """One MV: where it stood, what was suggested, what came of it."""
    begin, end = history.decisions[0].made_at, history.decisions[-1].made_at
    position, suggested, held = _mv_points(history.decisions, mv)
    values = [v for _, v in (*position, *suggested, *held) if math.isfinite(v)]
    if not values:
        return ""
    frame = Frame.over(begin, end, 200.0, f"{history.site.description(mv)} over time")
    up = _value_scale(values, frame, logarithmic=False)
    frame.value_axis(up)

    def placed(points: Sequence[Point]) -> list[Point]:
        return [(frame.across(t), up(v)) for t, v in points]

    frame.drawing.path(placed(_stairs(held)), "held")
    frame.drawing.path(placed(_stairs(suggested)), "suggested")
    frame.drawing.path(placed(_stairs(position)), "position")
    for move in moves:
        if move.mv == mv:
            x, y = frame.across(move.at), up(move.target)
            frame.drawing.dot(x, y, 4.0, f"outcome {move.outcome}")
    frame.time_axis()
    return str(frame.drawing)


def _mv_points(
    decisions: Sequence[DecisionRecord], mv: str
) -> tuple[list[Point], list[Point], list[Point]]:
    """Position, suggestion while valid, suggestion while only held."""
    position: list[Point] = []
    suggested: list[Point] = []
    held: list[Point] = []
    for decision in decisions:
        at = decision.made_at
        where = decision.positions.get(mv)
        position.append((at, _or_gap(where.position if where else None)))
        target = next((m.target for m in decision.advice.moves if m.mv == mv), None)
        valid = decision.advice.valid
        suggested.append((at, _or_gap(target) if valid else math.nan))
        held.append((at, math.nan if valid else _or_gap(target)))
    return position, suggested, held


def _stairs(points: Sequence[Point]) -> list[Point]:
    """Each value holds until the next one; only corners are kept."""
    found: list[Point] = []
    for index, (at, value) in enumerate(points):
        if index and math.isfinite(points[index - 1][1]):
            before = points[index - 1][1]
            is_last = index == len(points) - 1
            if before == value and not is_last:
                continue
            found.append((at, before))
        found.append((at, value))
    return found
