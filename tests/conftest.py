"""What every test shares: calm numerics, the same examples in every run, no task left behind."""

from __future__ import annotations

import asyncio
import functools
import inspect
import os
from collections.abc import Awaitable, Callable
from pathlib import Path
from typing import Any

# Before the first NumPy import: more BLAS threads than cores make timings jump.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("OMP_NUM_THREADS", "1")

import pytest
from hypothesis import settings

# Derandomised: a red suite is red for everyone. `HYPOTHESIS_PROFILE=search` looks further.
settings.register_profile("suite", derandomize=True, deadline=None, database=None, max_examples=50)
settings.register_profile("search", derandomize=False, deadline=None, max_examples=2000)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "suite"))

TURNS_TO_END = 10
"""Turns of the loop in which a cancelled task may end after the test."""


@pytest.fixture(scope="session")
def repo_root() -> Path:
    """The checkout that the suite runs in."""
    return Path(__file__).resolve().parents[1]


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """An async test fails when it leaves a task running: the test runner would hide it."""
    for item in items:
        if isinstance(item, pytest.Function) and inspect.iscoroutinefunction(item.obj):
            item.obj = failing_on_leaks(item.obj)


def failing_on_leaks(test: Callable[..., Awaitable[None]]) -> Callable[..., Awaitable[None]]:
    @functools.wraps(test)
    async def checked(*arguments: Any, **named: Any) -> None:
        before = asyncio.all_tasks()
        await test(*arguments, **named)
        for _ in range(TURNS_TO_END):
            leaked = asyncio.all_tasks() - before
            if not leaked:
                return
            await asyncio.sleep(0)
        raise AssertionError(f"tasks left running: {sorted(task.get_name() for task in leaked)}")

    return checked
