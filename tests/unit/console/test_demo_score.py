"""Counting the plant's own log of our writes."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from edgectl.console.demo import example_site_text
from edgectl.console.demo_score import count_writes, cv_scores
from edgectl.settings import parse_site

SITE = parse_site(example_site_text(), "example")


def line(user: str, node: str, accepted: bool = True) -> str:
    return json.dumps({"user": user, "node": node, "accepted": accepted}) + "\n"


def test_writes_are_counted_by_what_became_of_them() -> None:
    found = count_writes(
        [
            line("advisor", "ADV.valid"),
            line("advisor", "ADV.FIC-2103.target"),
            line("advisor", "ADV.valid", accepted=False),
            line("advisor", "FIC-2103.SP", accepted=False),
            line("advisor", "ADV.valid#AccessLevel"),
            line("board (crew)", "FIC-2103.SP"),
        ],
        SITE.write_fence(),
    )
    assert (found.accepted, found.refused, found.outside_fence) == (3, 2, 2)


def test_a_last_line_cut_off_by_a_kill_is_passed_over() -> None:
    assert count_writes([line("advisor", "ADV.valid"), '{"user": "adv'], frozenset()).accepted == 1


def test_a_damaged_log_is_not_passed_over() -> None:
    with pytest.raises(ValueError, match="Expecting"):
        count_writes(["nonsense\n"], frozenset())


def test_scores_are_given_by_tag_with_the_role_of_their_cv() -> None:
    quality = {"name": "BOTTOMS", "in_spec_fraction": 0.9, "mean": 100.0, "mean_abs_error": 5.0}
    other = {"name": "NOT-OURS", "in_spec_fraction": 1.0, "mean": 1.0, "mean_abs_error": None}
    assert cv_scores(SITE, {"qualities": [quality, other]}) == {
        "AI-2116": {
            "cv": "BOTTOMS",
            "role": "quality",
            "unit": "wt ppm",
            "in_limits_fraction": 0.9,
            "mean": 100.0,
            "mean_abs_error": 5.0,
        }
    }


def test_the_example_is_the_one_in_deploy(repo_root: Path) -> None:
    assert example_site_text() == (repo_root / "deploy/examples/methanol_water.toml").read_text()
