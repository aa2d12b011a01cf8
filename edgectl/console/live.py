"""The live view of a run on a terminal; plain lines where there is no terminal.

It is told decisions, wherever they come from, and only draws. The suggestion
leads; the column's own profile stands beside it.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Iterator
from types import TracebackType
from typing import Final, Self

from rich.console import Console, Group, RenderableType
from rich.live import Live
from rich.table import Table
from rich.text import Text

from edgectl.console.figures import was_asked
from edgectl.console.history import SiteWords
from edgectl.console.morning import duration_words, suggestion_words
from edgectl.console.svg import clock_words, number_words
from edgectl.records.advice import Advice, Standing
from edgectl.records.cycle_record import DecisionRecord
from edgectl.records.plan import ProfileStage

NARROW: Final = 92
"""Below so many characters the column stands under the words."""
COLUMN_WIDTH: Final = 48
SHELL: Final = 16
MOST_ROWS: Final = 19
BARS: Final = "▁▂▃▄▅▆▇█"
PARTS: Final = " ▏▎▍▌▋▊▉█"
PLAIN_EVERY: Final = 20
"""Without a terminal: a line at each change, and one every so many cycles."""

STANDING_STYLE: Final = {
    Standing.ADVISING: "bold cyan",
    Standing.HOLDING: "bold yellow",
    Standing.SILENT: "bold magenta",
    Standing.STARTING: "bold",
}


class LiveView:
    """Shows one decision after another. Use it as a context manager.

    `run` says how long the run will be; without it there is no progress to show.
    """

    def __init__(self, console: Console) -> None:
        self._console = console
        self._begin: float | None = None
        self._plant_s: float | None = None
        self._events: deque[str] = deque(maxlen=5)
        self._solves: deque[float] = deque(maxlen=32)
        self._profile: tuple[ProfileStage, ...] = ()
        self._said: tuple[object, ...] = ()
        self._quiet_cycles = 0
        self._live = Live(console=console, auto_refresh=False, transient=False)

    def __enter__(self) -> Self:
        if self._console.is_terminal:
            self._live.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._console.is_terminal:
            self._live.stop()

    def stage(self, words: str) -> None:
        """What is being prepared, before the first cycle."""
        if self._console.is_terminal:
            self._live.update(Text(words, style="bold"), refresh=True)
        else:
            self._console.print(Text(words), soft_wrap=True)

    def run(self, plant_s: float) -> None:
        """From the first decision on, the run lasts so long [plant s]."""
        self._plant_s = plant_s

    def event(self, words: str) -> None:
        self._events.append(words)
        if not self._console.is_terminal:
            self._console.print(Text(f"  {words}"), soft_wrap=True)

    def show(self, decision: DecisionRecord, site: SiteWords) -> None:
        if decision.estimate is not None and decision.estimate.profile:
            self._profile = decision.estimate.profile
        self._begin = decision.made_at if self._begin is None else self._begin
        if was_asked(decision):
            self._solves.append(decision.timings.solve_ms)
        if self._console.is_terminal:
            self._live.update(self.picture(decision, site), refresh=True)
        else:
            self._plain(decision, site)

    def _plain(self, decision: DecisionRecord, site: SiteWords) -> None:
        advice = decision.advice
        now = (advice.standing, advice.reason, tuple(move.target for move in advice.moves))
        self._quiet_cycles += 1
        if now == self._said and self._quiet_cycles < PLAIN_EVERY:
            return
        self._said, self._quiet_cycles = now, 0
        line = Text(f"{clock_words(decision.made_at)}  {advice.standing.value:<9} ")
        line.append(f"{_solve_words(decision)}  {advice.sentence}")
        self._console.print(line, soft_wrap=True)
        for words in _targets(decision, site):
            self._console.print(Text(f"       {words}"), soft_wrap=True)

    # -- the picture ----------------------------------------------------------------------

    def picture(self, decision: DecisionRecord, site: SiteWords) -> RenderableType:
        """Everything at once, as wide as the terminal is."""
        words = Group(*self._words(decision, site))
        column = Text("\n").join(column_lines(self._profile, decision, site))
        if self._console.width < NARROW:
            return Group(words, Text(), column)
        grid = Table.grid(padding=(0, 3, 0, 0))
        grid.add_column(ratio=1)
        grid.add_column(width=COLUMN_WIDTH, no_wrap=True)
        grid.add_row(words, column)
        return grid

    def _words(self, decision: DecisionRecord, site: SiteWords) -> Iterator[Text]:
        advice = decision.advice
        yield Text(f"{site.title}, {clock_words(decision.made_at)} plant time", style="dim")
        yield Text()
        yield Text(advice.sentence, style="bold")
        yield _standing_line(advice)
        yield Text()
        for words in _targets(decision, site):
            yield Text(words)
        for notice in advice.notices[:3]:
            yield Text(notice, style="yellow")
        yield Text()
        yield self._solve_line(decision)
        yield from self._progress(decision)
        if self._events:
            yield Text()
        for words in self._events:
            yield Text(words, style="dim", overflow="ellipsis", no_wrap=True)

    def _solve_line(self, decision: DecisionRecord) -> Text:
        spent = decision.timings.solve_ms if was_asked(decision) else 0.0
        budget = decision.budget_ms
        line = Text("solve  ")
        line.append(bar(spent / budget if budget > 0 else 0.0, 20), style="cyan")
        line.append(f" {_solve_words(decision)}")
        if len(self._solves) > 1:
            line.append("\nbefore ", style="dim")
            line.append(sparkline(self._solves, budget), style="cyan")
            line.append(" █ is the budget", style="dim")
        return line

    def _progress(self, decision: DecisionRecord) -> Iterator[Text]:
        if self._plant_s is None or self._begin is None:
            return
        total = max(self._plant_s, 1e-9)
        done = min(max(decision.made_at - self._begin, 0.0), total)
        line = Text("run    ")
        line.append(bar(done / total, 20))
        line.append(f" {duration_words(done)} of {duration_words(total)}")
        yield line


def _solve_words(decision: DecisionRecord) -> str:
    budget = number_words(decision.budget_ms)
    if not was_asked(decision):
        return f"no solve, {budget} ms allowed"
    return f"{number_words(decision.timings.solve_ms)} of {budget} ms"


def _standing_line(advice: Advice) -> Text:
    line = Text(advice.standing.value, style=STANDING_STYLE[advice.standing])
    line.append(f", reason {advice.reason}", style="not bold")
    if advice.made_at is not None:
        line.append(f", suggested at {clock_words(advice.made_at)}", style="not bold")
    return line


def _targets(decision: DecisionRecord, site: SiteWords) -> Iterator[str]:
    if decision.advice.standing is Standing.SILENT:
        return
    for move in decision.advice.moves:
        if move.target is not None:
            where = decision.positions.get(move.mv)
            yield suggestion_words(site, move, where.position if where else None)


def column_lines(
    profile: tuple[ProfileStage, ...], decision: DecisionRecord, site: SiteWords
) -> list[Text]:
    """The column drawn with characters: its filling is the light component, the dot the heat."""
    if len(profile) < 2:
        return [Text("No profile estimated yet.", style="dim")]
    size = math.ceil(len(profile) / MOST_ROWS)
    rows = [profile[start : start + size] for start in range(0, len(profile), size)]
    left, right = _beside(decision, site)
    low = min(stage.temperature_degc for stage in profile)
    span = max(max(stage.temperature_degc for stage in profile) - low, 1e-9)
    lines = [Text(" " * 14 + "╭" + "─" * SHELL + "╮")]
    for index, row in enumerate(rows):
        middle = row[len(row) // 2]
        stages = {stage.stage for stage in row}
        line = Text(_first(left, stages).rjust(14)[-14:])
        line.append("│")
        line.append_text(_filled(middle, (middle.temperature_degc - low) / span))
        line.append("│ ")
        reading = _first(right, stages)
        own = f"{middle.temperature_degc:.1f}" if index % 4 == 0 or index == len(rows) - 1 else ""
        line.append(reading or own, style="bold" if reading else "dim")
        lines.append(line)
    lines.append(Text(" " * 14 + "╰" + "─" * SHELL + "╯"))
    lines.append(Text(" " * 14 + "filled: light component, ● °C", style="dim"))
    return lines


def _beside(decision: DecisionRecord, site: SiteWords) -> tuple[dict[int, str], dict[int, str]]:
    """Words at the left (feed, moves) and at the right (measured temperatures), by stage."""
    left: dict[int, str] = {}
    if site.feed_stage is not None:
        left[site.feed_stage] = "feed ─▸"
    for mv in decision.positions:
        left[site.stage_of_mv(mv)] = f"{mv} ─▸"
    right: dict[int, str] = {}
    for tag, stage in site.tray_tags().items():
        measurement = decision.measurements.get(tag)
        if measurement is not None and measurement.usable and measurement.value is not None:
            right[stage] = f"{measurement.value:.1f} {tag}"
    return left, right


def _first(words: dict[int, str], stages: set[int]) -> str:
    return next((words[stage] for stage in sorted(stages) if stage in words), "")


def _filled(stage: ProfileStage, warmth: float) -> Text:
    """One row of the shell: filled from the left, with the temperature's dot on it."""
    shelf = bar(stage.liquid_fraction, SHELL)
    place = min(max(round(warmth * (SHELL - 1)), 0), SHELL - 1)
    text = Text(shelf[:place], style="cyan")
    text.append("●", style="bold magenta")
    text.append(shelf[place + 1 :], style="cyan")
    return text


def bar(share: float, width: int) -> str:
    """A bar of exactly `width` characters, filled to an eighth of one."""
    eighths = round(min(max(share, 0.0), 1.0) * width * 8)
    whole, part = divmod(eighths, 8)
    filled = "█" * whole + (PARTS[part] if part else "")
    return filled.ljust(width, "·")


def sparkline(values: deque[float], full: float) -> str:
    """One character a value; the highest stands for `full` and above."""
    top = len(BARS) - 1
    shares = (min(max(value / full, 0.0), 1.0) if full > 0 else 0.0 for value in values)
    return "".join(BARS[round(share * top)] for share in shares)
