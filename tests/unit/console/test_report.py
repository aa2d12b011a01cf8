"""The page: complete, self-contained, safe."""

from __future__ import annotations

import csv
import io
import json
import re
from html.parser import HTMLParser
from pathlib import Path

import pytest
from click.testing import CliRunner

from edgectl.console.cautions import CAUTIONS
from edgectl.console.commands import main
from edgectl.console.cycle_table import write_cycle_table
from edgectl.console.history import History, read_history
from edgectl.console.report import ChainWords, report_page
from edgectl.records.cycle_record import OpeningRecord
from edgectl.testing.invented_journal import BEGIN

CHAIN = ChainWords(True, "The chain is intact.", 963, "ab" * 32)
VOID = {"meta", "rect", "line", "path", "circle", "br"}


class Tags(HTMLParser):
    """Refuses a page whose elements do not close in order; collects what it would load."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.seen: set[str] = set()
        self.loads: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.seen.add(tag)
        self.loads += [f"{tag} {name}" for name, _ in attrs if name in ("src", "href")]
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        if tag not in VOID:
            assert self.open.pop() == tag

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.seen.add(tag)


def drawing_with(page: str, words: str) -> str:
    (found,) = [svg for svg in re.findall("<svg.*?</svg>", page, re.DOTALL) if words in svg]
    return str(found)


@pytest.fixture(scope="module")
def page(shift: History) -> str:
    return report_page(shift, CHAIN, "shift.journal")


def test_the_page_is_whole_and_loads_nothing(page: str) -> None:
    tags = Tags()
    tags.feed(page)
    assert tags.open == []
    assert tags.loads == []
    assert not tags.seen & {"script", "link", "img", "iframe", "object"}
    assert "url(" not in page
    assert "@import" not in page


def test_the_page_opens_with_the_suggestion_and_the_four_answers(page: str) -> None:
    order = [
        "Lower the reflux and keep tray 30",
        "Did it hold?",
        "It held the last move twice",
        "Which tags could not be used?",
        "AI-2116 in 79 cycles (frozen, and still now)",
        "12 moves suggested: 8 taken, 4 not taken.",
        "Every overrun, and what was held",
        "FIC-2103 7,940 kg/h; TIC-2107 101.5 °C",
        "Advice withdrawn: TI-2107 has been bad",
        "BOTTOMS, bottoms methanol [wt ppm]",
        "The chain is intact.",
        "ab" * 32,
    ]
    places = [page.index(words) for words in order]
    assert places == sorted(places)


def test_the_page_says_every_caution(page: str) -> None:
    assert all(caution.replace("'", "&#x27;") in page for caution in CAUTIONS)


def test_each_cv_has_its_limits_and_predictions(page: str) -> None:
    chart = drawing_with(page, 'aria-label="bottoms methanol over time"')
    for class_, count in (("limit", 1), ("prediction", 1), ("untouched", 1), ("earlier", 5)):
        assert chart.count(f'class="{class_}"') == count, class_


def test_the_column_shows_every_stage_and_its_readings(page: str) -> None:
    drawing = drawing_with(page, 'aria-label="The column now')
    assert drawing.count('class="shelf"') == 38
    assert "TI-2107, stage 30" in drawing
    assert "suggested 101.5" in drawing


def test_hostile_words_from_the_plant_stay_words(shift: History) -> None:
    history = History(**{name: getattr(shift, name) for name in History.__dataclass_fields__})
    opening = shift.opening
    assert isinstance(opening, OpeningRecord)
    bad = "</style><script>alert(1)</script>"
    content = json.loads(json.dumps(opening.site_content).replace("bottoms methanol", bad))
    history.openings = [type(shift.openings[0])(BEGIN, _with_site(opening, content))]
    page = report_page(history, CHAIN, f"{bad}.journal")
    assert "<script" not in page
    assert "&lt;script&gt;" in page


def _with_site(opening: OpeningRecord, content: dict[str, object]) -> OpeningRecord:
    fields = {name: getattr(opening, name) for name in opening.__dataclass_fields__}
    return OpeningRecord(**{**fields, "site_content": content})


def test_a_journal_without_a_cycle_still_makes_a_page() -> None:
    page = report_page(History(), CHAIN, "new.journal")
    assert "No cycle in this stretch" in page
    tags = Tags()
    tags.feed(page)
    assert tags.open == []


def test_a_stretch_is_cut_in_time_and_keeps_its_site(shift_journal: Path) -> None:
    history = read_history(shift_journal, BEGIN + 3600.0, BEGIN + 3900.0)
    assert [d.cycle for d in history.decisions] == list(range(120, 130))
    assert history.site.unit("BOTTOMS") == "wt ppm"


def test_the_table_has_one_row_per_cycle(shift: History) -> None:
    text = io.StringIO()
    assert write_cycle_table(shift, text) == 480
    rows = list(csv.DictReader(io.StringIO(text.getvalue())))
    assert [int(row["cycle"]) for row in rows] == list(range(480))
    assert rows[150]["outcome"] == "overrun"
    assert rows[150]["FIC-2103 target"] == "7940.0"
    assert rows[150]["BOTTOMS estimate"] == ""
    assert not any(re.match(r"[=+@]", cell) for row in rows for cell in row.values())


def test_the_command_writes_page_table_and_json(shift_journal: Path, tmp_path: Path) -> None:
    out, table, data = (tmp_path / name for name in ("r.html", "r.csv", "r.json"))
    arguments = ["report", str(shift_journal), "--out", str(out), "--csv", str(table)]
    result = CliRunner().invoke(main, [*arguments, "--json", str(data)])
    assert result.exit_code == 0, result.output
    found = json.loads(data.read_text())
    assert found["schema"] == "edgectl.report/1"
    assert found["cycles"] == 480
    assert found["journal_intact"] is True
    assert "It held the last move twice" in out.read_text()
    assert table.read_text().count("\n") == 481


def test_the_command_refuses_a_time_that_is_none(shift_journal: Path, tmp_path: Path) -> None:
    arguments = ["report", str(shift_journal), "--out", str(tmp_path / "r.html")]
    result = CliRunner().invoke(main, [*arguments, "--from", "yesterday"])
    assert result.exit_code == 2
    assert "not a time" in result.output


def test_a_file_that_is_no_journal_is_a_finding(tmp_path: Path) -> None:
    path = tmp_path / "x.journal"
    path.write_text("words")
    result = CliRunner().invoke(main, ["report", str(path), "--out", str(tmp_path / "r.html")])
    assert result.exit_code == 1
    assert "The chain is broken" in result.output
    assert result.exception is None or isinstance(result.exception, SystemExit)


def test_a_held_cycle_shows_the_newest_profile_and_says_how_old(shift_journal: Path) -> None:
    history = read_history(shift_journal, BEGIN, BEGIN + 30.0 * 252)
    latest = history.latest
    assert latest is not None
    assert latest.estimate is None
    page = report_page(history, CHAIN, "shift.journal")
    assert drawing_with(page, 'aria-label="The column now').count('class="shelf"') == 38
    assert "The profile is the newest estimate, of 07:59." in page
    assert "Advice withdrawn: TI-2107 has been bad for 5 min." in page
    assert "<b>FIC-2103" not in page, "nothing is suggested while it is silent"
