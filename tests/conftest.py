"""What every test shares: one thread for linear algebra, the same examples in every run."""

from __future__ import annotations

import os
from pathlib import Path

# Before the first NumPy import: more BLAS threads than cores make timings jump.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("OMP_NUM_THREADS", "1")

import pytest
from hypothesis import settings

# Derandomised: a red suite is red for everyone. `HYPOTHESIS_PROFILE=search` looks further.
settings.register_profile("suite", derandomize=True, deadline=None, database=None, max_examples=50)
settings.register_profile("search", derandomize=False, deadline=None, max_examples=2000)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "suite"))


@pytest.fixture(scope="session")
def repo_root() -> Path:
    """The checkout that the suite runs in."""
    return Path(__file__).resolve().parents[1]
