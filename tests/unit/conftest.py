"""What the model's tests share: the example site, its steady state and one planner."""

from __future__ import annotations

import itertools
import tomllib
from pathlib import Path
from typing import Any

import pytest

from edgectl.column.steady import SteadyState
from edgectl.optimisation.from_site import steady_from_site
from edgectl.optimisation.planner import Planner


@pytest.fixture(scope="session")
def site_table(repo_root: Path) -> dict[str, Any]:
    """The example site file's tables."""
    return tomllib.loads((repo_root / "deploy/examples/methanol_water.toml").read_text())


@pytest.fixture(scope="session")
def steady(site_table: dict[str, Any]) -> SteadyState:
    return steady_from_site(site_table)


@pytest.fixture(scope="session")
def planner(site_table: dict[str, Any]) -> Planner:
    """A planner whose wall clock counts calls: statistics without a real clock."""
    ticks = itertools.count()
    return Planner(site_table, lambda: next(ticks) * 1e-3)
