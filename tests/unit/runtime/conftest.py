"""The policies of the example site file with the toy's tuning, and silence in the log."""

from __future__ import annotations

import logging
from collections.abc import Iterator
from pathlib import Path

import pytest
import structlog

from edgectl.cycle.policies import Policies
from edgectl.runtime.policies import policies_from
from edgectl.settings import load_site
from edgectl.testing.toy import toy_policies


@pytest.fixture(scope="session")
def policies(repo_root: Path) -> Policies:
    example = load_site(repo_root / "deploy/examples/methanol_water.toml")
    return toy_policies(policies_from(example))


@pytest.fixture(autouse=True)
def quiet_log() -> Iterator[None]:
    structlog.configure(wrapper_class=structlog.make_filtering_bound_logger(logging.CRITICAL))
    yield
    structlog.reset_defaults()
