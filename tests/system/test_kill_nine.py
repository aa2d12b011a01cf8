"""The runtime killed at drawn instants beside a plant that runs on. Fifty times: tests/bench."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

KILLS = 3
SEED = 4
"""Whose first three kills are aimed at a journal being written, a publication and a start."""


@pytest.mark.timeout(240)
def test_a_killed_runtime_loses_nothing_and_misleads_nobody(
    repo_root: Path, tmp_path: Path
) -> None:
    script, told = repo_root / "tests" / "bench" / "kill_nine.py", tmp_path / "told.json"
    options = ("--kills", str(KILLS), "--seed", str(SEED), "--speed", "25", "--most-cycles", "5")
    command = (sys.executable, str(script), *options, "--keep", str(tmp_path / "kept"))
    done = subprocess.run(
        (*command, "--json", str(told)), capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr
    found = json.loads(told.read_text("utf-8"))
    assert found["problems"] == []
    assert found["kills"] == KILLS
    assert found["journal_intact"] is True
    # It looked at something: lost receipts, orphans and skipped warm-ups could have shown.
    assert found["receipts_checked"] > 0
    assert found["workers_gone"] >= 2
    assert found["starts_with_cycles"] >= 2
    assert sum(found["killed_while"].values()) == KILLS
