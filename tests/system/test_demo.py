"""`edgectl demo` end to end: real processes, real OPC UA on loopback, and nothing left behind."""

from __future__ import annotations

import json
import os
import secrets
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

MARK = "EDGECTL_TEST_MARK"
pytestmark = pytest.mark.timeout(150)


@pytest.fixture
def mark() -> Iterator[str]:
    """A word in the environment that every process started from here on inherits."""
    word = secrets.token_hex(8)
    yield word
    left = processes_with(word)
    for pid in left:
        os.kill(pid, signal.SIGKILL)
    assert not left, "the demo left processes behind"


def processes_with(word: str) -> list[int]:
    found = []
    for entry in Path("/proc").iterdir():
        if not entry.name.isdigit():
            continue
        try:
            environment = (entry / "environ").read_bytes()
        except (OSError, PermissionError):
            # It ended while we looked, or is not ours.
            continue
        if f"{MARK}={word}".encode() in environment.split(b"\0"):
            found.append(int(entry.name))
    return found


def start_demo(mark: str, folder: Path, *options: str) -> subprocess.Popen[str]:
    command = (sys.executable, "-m", "edgectl.console", "demo", "--keep", str(folder), *options)
    return subprocess.Popen(
        command,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, MARK: mark, "NO_COLOR": "1"},
    )


def test_a_short_demo_advises_and_ends_by_itself(mark: str, tmp_path: Path) -> None:
    demo = start_demo(mark, tmp_path / "kept", "--hours", "0.05", "--speed", "10", "--json", "-")
    said, progress = demo.communicate()
    assert demo.returncode == 0, progress
    told: dict[str, Any] = json.loads(said)
    assert told["schema"] == "edgectl.demo/1"
    assert told["cycles"] == 6
    assert told["starting"] == 3
    assert told["advising"] == 3
    assert (told["holding"], told["silent"], told["overruns"]) == (0, 0, 0)
    assert (told["writes_outside_fence"], told["refused_writes"]) == (0, 0)
    assert told["writes"] > 20
    assert told["journal_intact"] is True
    assert 0.0 < told["solve_ms"]["p50"] <= told["solve_ms"]["max"] < told["budget_ms"]
    assert told["cycle_overhead_ms"]["p95"] < 600.0
    assert told["loop_lag_ms"]["max"] >= told["loop_lag_ms"]["p99"] > 0.0
    assert 5_000 < told["record_bytes"] < 100_000
    assert told["cv"]["AI-2116"]["role"] == "quality"
    assert told["cv"]["AI-2115"]["in_limits_fraction"] == 1.0
    assert 600.0 < told["energy_kwh_per_t_distillate"] < 900.0
    assert Path(told["report"]).read_text("utf-8").startswith("<!doctype html>")
    assert "No cycle ran over its budget." in progress
    assert "The chain is intact" in progress


def test_ctrl_c_stops_everything_and_still_sums_up(mark: str, tmp_path: Path) -> None:
    demo = start_demo(mark, tmp_path / "kept", "--hours", "1", "--speed", "10")
    assert demo.stdout is not None
    for line in demo.stdout:
        if " starting " in line:
            break
    assert len(processes_with(mark)) >= 4, "this one, the plant, the runtime, its workers"
    demo.send_signal(signal.SIGINT)
    said, errors = demo.communicate()
    assert demo.returncode == 130, errors
    assert "Advice withdrawn" in said
    assert "The chain is intact" in said
    assert "Traceback" not in said + errors


def test_stopping_before_the_plant_is_up_leaves_nothing(mark: str, tmp_path: Path) -> None:
    demo = start_demo(mark, tmp_path / "kept", "--hours", "1", "--speed", "10")
    assert demo.stdout is not None
    assert "Building the column model" in demo.stdout.readline()
    demo.send_signal(signal.SIGTERM)
    said, errors = demo.communicate()
    assert demo.returncode == 130, errors
    assert "Stopped before the first cycle" in said
    assert "Traceback" not in said + errors


def test_a_folder_that_is_not_empty_is_refused(mark: str, tmp_path: Path) -> None:
    (tmp_path / "something").write_text("of mine")
    demo = start_demo(mark, tmp_path)
    _, errors = demo.communicate()
    assert demo.returncode == 2
    assert "is not empty" in errors
