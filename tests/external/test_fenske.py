"""Fenske's minimum number of stages against worked values (sources in the data file)."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import pytest

from edgectl.column.shortcut import minimum_stages


@pytest.fixture(scope="module")
def reference() -> dict[str, Any]:
    content: dict[str, Any] = json.loads(
        (Path(__file__).parent / "data" / "column_a.json").read_text()
    )
    return content


def test_column_a(reference: dict[str, Any]) -> None:
    # 99 % pure products at both ends: the ratio of the keys is 99.
    stages = minimum_stages(99.0, 1.0 / 99.0, reference["data"]["alpha"])
    assert stages == pytest.approx(reference["computed"]["fenske_Nmin"], rel=1e-9)
    assert stages < reference["data"]["stages"]


def test_four_components_by_their_keys(reference: dict[str, Any]) -> None:
    case = reference["fenske"]["FUG-1"]
    top, bottom = case["light_key_recovered_at_top"], case["heavy_key_recovered_at_bottom"]
    # Both keys have the same share of the feed, so it cancels.
    stages = minimum_stages(top / (1.0 - bottom), (1.0 - top) / bottom, case["alpha"])
    assert stages == pytest.approx(case["minimum_stages"], rel=case["tolerance"])


@pytest.mark.parametrize(
    ("distillate_ratio", "bottoms_ratio", "relative_volatility"),
    [(0.0, 0.01, 1.5), (99.0, -1.0, 1.5), (99.0, 0.01, 1.0), (math.nan, 0.01, 1.5)],
)
def test_impossible_separations_are_refused(
    distillate_ratio: float, bottoms_ratio: float, relative_volatility: float
) -> None:
    with pytest.raises(ValueError, match="must be"):
        minimum_stages(distillate_ratio, bottoms_ratio, relative_volatility)
