"""ruff and mypy find nothing; both are configured in pyproject.toml."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

BAD_SAMPLE = '''"""A sample with faults."""
import os
from datetime import datetime


def stamp(x):
    return datetime.now()
'''


def run_tool(*arguments: str, cwd: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", *arguments], cwd=cwd, capture_output=True, text=True, check=False
    )


def test_ruff_finds_nothing(repo_root: Path) -> None:
    done = run_tool("ruff", "check", "--output-format=concise", ".", cwd=repo_root)
    assert done.returncode == 0, done.stdout + done.stderr


# A first run without a cache reads the stubs of every dependency.
@pytest.mark.timeout(300)
def test_mypy_finds_nothing(repo_root: Path) -> None:
    done = run_tool("mypy", "--strict", "--no-error-summary", cwd=repo_root)
    assert done.returncode == 0, done.stdout + done.stderr


def test_both_find_the_faults_of_a_bad_sample(repo_root: Path, tmp_path: Path) -> None:
    sample = tmp_path / "sample.py"
    sample.write_text(BAD_SAMPLE)
    config = str(repo_root / "pyproject.toml")
    lint = run_tool("ruff", "check", "--no-cache", "--config", config, str(sample), cwd=tmp_path)
    assert lint.returncode == 1
    assert "F401" in lint.stdout
    assert "TID251" in lint.stdout
    types = run_tool(
        "mypy", "--strict", "--config-file", config, "--cache-dir", str(tmp_path / "cache"),
        str(sample), cwd=tmp_path,
    )  # fmt: skip
    assert types.returncode == 1
    assert "no-untyped-def" in types.stdout
