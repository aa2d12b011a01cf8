"""The live view, drawn into a string."""

from __future__ import annotations

import io
from collections import deque

import pytest
from rich.console import Console

from edgectl.console.history import SiteWords
from edgectl.console.live import SHELL, LiveView, bar, sparkline
from edgectl.testing.invented_journal import SITE, InventedShift


def console(width: int, *, terminal: bool) -> Console:
    return Console(
        file=io.StringIO(), width=width, height=50, force_terminal=terminal, color_system=None
    )


def drawn(width: int, cycle: int = 90) -> str:
    screen = console(width, terminal=True)
    view = LiveView(screen)
    view.run(3600.0)
    shift = InventedShift()
    for number in range(cycle + 1):
        decision = shift.decision(number)
        view.show(decision, SiteWords(SITE))
    screen.print(view.picture(decision, SiteWords(SITE)))
    output = screen.file
    assert isinstance(output, io.StringIO)
    return output.getvalue()


@pytest.mark.parametrize("width", [40, 80, 100, 160])
def test_it_fits_any_width_and_leads_with_the_sentence(width: int) -> None:
    lines = drawn(width).splitlines()
    assert max(map(len, lines)) <= width
    text = " ".join(" ".join(lines).split())
    assert text.index("Lower the reflux") < text.index("FIC-2103 reflux flow")


def test_the_column_stands_beside_the_words_when_there_is_room() -> None:
    wide = drawn(120)
    assert "╭" + "─" * SHELL + "╮" in wide
    assert "TI-2107" in wide
    assert "feed ─▸│" in wide
    assert "45 min of 1 h" in wide


def test_without_a_terminal_it_says_changes_only() -> None:
    screen = console(100, terminal=False)
    view = LiveView(screen)
    shift = InventedShift()
    with view:
        view.stage("Starting the plant.")
        for number in range(60):
            view.show(shift.decision(number), SiteWords(SITE))
        view.event("06:30 something happened")
    output = screen.file
    assert isinstance(output, io.StringIO)
    lines = output.getvalue().splitlines()
    assert lines[0] == "Starting the plant."
    assert len([line for line in lines if "advising" in line]) < 10
    assert "something happened" in lines[-1]
    assert "\x1b" not in output.getvalue()


def test_markup_in_a_sentence_stays_words() -> None:
    screen = console(100, terminal=False)
    LiveView(screen).event("[red]tag[/red] [bold")
    output = screen.file
    assert isinstance(output, io.StringIO)
    assert "[red]tag[/red] [bold" in output.getvalue()


@pytest.mark.parametrize(("share", "filled"), [(-1.0, 0), (0.0, 0), (0.5, 5), (1.0, 10), (9.0, 10)])
def test_a_bar_is_as_long_as_its_share(share: float, filled: int) -> None:
    assert len(bar(share, 10)) == 10
    assert bar(share, 10).count("█") == filled


def test_a_sparkline_is_full_at_the_budget() -> None:
    assert sparkline(deque([0.0, 50.0, 100.0, 300.0]), 100.0) == "▁▅██"
