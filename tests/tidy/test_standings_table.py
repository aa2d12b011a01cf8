"""The standings table of DEVELOPERS.md is the one that `edgectl/cycle/standing.py` renders."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from edgectl.cycle.standing import as_markdown

MARKED = re.compile(r"<!-- standings -->\n(.*?)<!-- /standings -->", re.DOTALL)


def marked_table(text: str) -> str:
    """What stands between the two markers; there must be one such place."""
    (found,) = MARKED.findall(text)
    return str(found).strip()


def test_the_standings_table_is_fresh(repo_root: Path) -> None:
    marked = marked_table((repo_root / "DEVELOPERS.md").read_text())
    assert marked == as_markdown().strip(), "renew it: python -m edgectl.cycle.standing"


def test_a_missing_or_doubled_marker_is_seen() -> None:
    once = "<!-- standings -->\n| a |\n<!-- /standings -->\n"
    assert marked_table(f"text\n{once}text\n") == "| a |"
    for broken in ("text", once + once):
        with pytest.raises(ValueError, match="unpack"):
            marked_table(broken)
