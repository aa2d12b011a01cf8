"""The suite's own guard against tasks that outlive their test bites."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

SAMPLE = """
import asyncio
import pytest

@pytest.mark.asyncio
async def test_leaves_a_task():
    asyncio.create_task(asyncio.Event().wait(), name="forgotten")

@pytest.mark.asyncio
async def test_ends_its_task():
    task = asyncio.create_task(asyncio.Event().wait())
    task.cancel()
"""


def test_a_leaked_task_fails_its_test(repo_root: Path, tmp_path: Path) -> None:
    shutil.copy(repo_root / "tests/conftest.py", tmp_path)
    (tmp_path / "test_sample.py").write_text(SAMPLE)
    done = subprocess.run(
        [sys.executable, "-m", "pytest", "-c", str(repo_root / "pyproject.toml"),
         "--rootdir", str(tmp_path), "-p", "no:cacheprovider", str(tmp_path)],
        cwd=tmp_path, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 1, done.stdout + done.stderr
    assert "1 failed, 1 passed" in done.stdout
    assert "tasks left running: ['forgotten']" in done.stdout
