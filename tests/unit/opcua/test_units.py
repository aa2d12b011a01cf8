"""Units and ranges of nodes against those of the site file."""

from __future__ import annotations

import pytest

from edgectl.opcua.units import (
    RangeMatch,
    ServerRange,
    ServerUnit,
    UnitMatch,
    compare_range,
    compare_unit,
)
from edgectl.records.units import UNECE_NAMESPACE, UNITS

OTHER = "urn:vendor:units"


def unece(code: str, name: str = "") -> ServerUnit:
    return ServerUnit(UNECE_NAMESPACE, int.from_bytes(code.encode(), "big"), name)


@pytest.mark.parametrize("name", UNITS)
def test_each_unit_is_the_same_as_its_own_code(name: str) -> None:
    assert compare_unit(name, unece(UNITS[name].code)) is UnitMatch.SAME


@pytest.mark.parametrize(
    ("site", "server", "match"),
    [
        ("degC", unece("CEL", "°C"), UnitMatch.SAME),
        ("degC", unece("KEL", "K"), UnitMatch.DIFFERENT),
        ("kg/h", unece("E18", "t/h"), UnitMatch.DIFFERENT),
        # One code for three fractions: only the name can tell.
        ("wt %", unece("P1", "mol%"), UnitMatch.DIFFERENT),
        ("wt %", unece("P1", "%"), UnitMatch.SAME),
        ("mol %", unece("P1", "mol%"), UnitMatch.SAME),
        # A number without its namespace means nothing.
        ("degC", ServerUnit(OTHER, 4408652, "degC"), UnitMatch.SAME_BY_NAME),
        ("degC", ServerUnit(OTHER, 4408652, "K"), UnitMatch.DIFFERENT),
        ("degC", ServerUnit(OTHER, 17, "deg. Celsius"), UnitMatch.CANNOT_TELL),
        ("m3/h", ServerUnit("", -1, "m³/h"), UnitMatch.SAME_BY_NAME),
        ("%", ServerUnit("", -1, "wt %"), UnitMatch.SAME_BY_NAME),
        ("wt %", ServerUnit("", -1, "wt ppm"), UnitMatch.DIFFERENT),
        ("kPa", None, UnitMatch.NOT_GIVEN),
        ("kPa", ServerUnit("", -1, ""), UnitMatch.NOT_GIVEN),
        ("-", None, UnitMatch.SAME),
    ],
)
def test_comparing_units(site: str, server: ServerUnit | None, match: UnitMatch) -> None:
    assert compare_unit(site, server) is match


@pytest.mark.parametrize(
    ("low", "high", "server", "match"),
    [
        (50.0, 130.0, ServerRange(0.0, 200.0), RangeMatch.INSIDE),
        (0.0, 100.0, ServerRange(0.0, 100.0), RangeMatch.INSIDE),
        (-1.0, 100.0, ServerRange(0.0, 100.0), RangeMatch.WIDER),
        (0.0, 100.0, ServerRange(0.0, 1.0), RangeMatch.OTHER_SCALE),
        (0.0, 1.0, ServerRange(0.0, 100.0), RangeMatch.OTHER_SCALE),
        (300.0, 400.0, ServerRange(0.0, 200.0), RangeMatch.OTHER_SCALE),
        (0.0, 100.0, ServerRange(0.0, 0.0), RangeMatch.NOT_GIVEN),
        (0.0, 100.0, ServerRange(float("nan"), 1.0), RangeMatch.NOT_GIVEN),
        (0.0, 100.0, None, RangeMatch.NOT_GIVEN),
    ],
)
def test_comparing_ranges(
    low: float, high: float, server: ServerRange | None, match: RangeMatch
) -> None:
    assert compare_range(low, high, server) is match
