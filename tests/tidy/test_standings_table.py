"""The standings table of DEVELOPERS.md is the one that `edgectl/cycle/standing.py` renders."""

from __future__ import annotations

import importlib
import re
from pathlib import Path

import pytest

MARKED = re.compile(r"<!-- standings -->\n(.*?)<!-- /standings -->", re.DOTALL)


def marked_table(text: str) -> str:
    """What stands between the two markers; there must be one such place."""
    (found,) = MARKED.findall(text)
    return str(found).strip()


def test_the_standings_table_is_fresh(repo_root: Path) -> None:
    # TODO(second round): drop this tolerance once the standings are built.
    if not (repo_root / "edgectl/cycle/standing.py").is_file():
        pytest.skip("edgectl/cycle/standing.py is not built yet")
    rendered = importlib.import_module("edgectl.cycle.standing").standings_table()
    assert marked_table((repo_root / "DEVELOPERS.md").read_text()) == rendered.strip()


def test_a_missing_or_doubled_marker_is_seen() -> None:
    once = "<!-- standings -->\n| a |\n<!-- /standings -->\n"
    assert marked_table(f"text\n{once}text\n") == "| a |"
    for broken in ("text", once + once):
        with pytest.raises(ValueError, match="unpack"):
            marked_table(broken)
