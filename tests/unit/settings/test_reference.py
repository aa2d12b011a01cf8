"""The reference of every key is what the models say."""

from __future__ import annotations

from pathlib import Path

from edgectl.settings.checks import RULES
from edgectl.settings.reference import site_file_reference
from edgectl.settings.site import Site

PAGE = Path(__file__).parents[3] / "deploy" / "notes" / "site-file.md"


def test_the_page_is_not_stale() -> None:
    assert PAGE.read_text(encoding="utf-8") == site_file_reference(), (
        "renew it: python -m edgectl.settings.reference > deploy/notes/site-file.md"
    )


def test_every_key_has_a_meaning() -> None:
    page = site_file_reference()
    rows = [line for line in page.splitlines() if line.startswith("| `")]
    assert len(rows) > 130
    assert not [row for row in rows if row.endswith("|  |")]
    for section in Site.model_fields:
        assert f"`[{section}" in page


def test_every_rule_has_a_line() -> None:
    assert all(rule.__doc__ for rule in RULES)
