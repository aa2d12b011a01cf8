"""A whole site file to spoil, and the example that is shipped.

The first stays as it is, so that tuning the example does not break tests of single lines.
"""

from __future__ import annotations

from pathlib import Path

import pytest

WHOLE = Path(__file__).parent / "whole.toml"
EXAMPLE = Path(__file__).parents[3] / "deploy" / "examples" / "methanol_water.toml"


@pytest.fixture(scope="session")
def example_path() -> Path:
    return EXAMPLE


@pytest.fixture(scope="session")
def whole() -> str:
    return WHOLE.read_text(encoding="utf-8")
