"""The border's range check."""

from __future__ import annotations

import math

import pytest

from edgectl.properties.ranges import OutsideRangeError, check_range


@pytest.mark.parametrize("temperature_k", [320.0, 350.0, 390.0])
def test_inside_passes(temperature_k: float) -> None:
    check_range("methanol", "vapour pressure", temperature_k, 320.0, 390.0)


@pytest.mark.parametrize("temperature_k", [319.9, 390.1, math.nan, math.inf, -math.inf])
def test_outside_names_component_quantity_and_range(temperature_k: float) -> None:
    with pytest.raises(OutsideRangeError, match=r"vapour pressure of methanol: .* 320 to 390 K"):
        check_range("methanol", "vapour pressure", temperature_k, 320.0, 390.0)
