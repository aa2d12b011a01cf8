"""Are a node's engineering unit and range what the site file says?

`EngineeringUnits` and `EURange` of an AnalogItemType (OPC 10000-8, 5.3.2.3) are
compared with the tag's unit and limits. A unit id counts only together with its
namespace; without a known one the display name is all there is.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from edgectl.records.units import UNECE_NAMESPACE, UNITS

OTHER_SCALE_RATIO: Final = 50.0
"""Spans that differ by more are taken for another scale (0-1 for 0-100)."""


@dataclass(frozen=True, slots=True)
class ServerUnit:
    """`EUInformation` of a node."""

    namespace: str
    unit_id: int
    display_name: str


@dataclass(frozen=True, slots=True)
class ServerRange:
    """`EURange` of a node."""

    low: float
    high: float


class UnitMatch(StrEnum):
    SAME = "same"
    SAME_BY_NAME = "same_by_name"
    """No known unit id; the display name agrees."""
    DIFFERENT = "different"
    NOT_GIVEN = "not_given"
    CANNOT_TELL = "cannot_tell"


class RangeMatch(StrEnum):
    INSIDE = "inside"
    """The site's range lies within the server's."""
    WIDER = "wider"
    """The site accepts values that the instrument cannot show."""
    OTHER_SCALE = "other_scale"
    NOT_GIVEN = "not_given"


def _folded(name: str) -> str:
    return name.casefold().replace(" ", "").replace("°", "deg").replace("³", "3")


_SITE_NAMES: Final = {_folded(name): name for name in UNITS}
_PLAIN_FRACTION: Final = "%"


def compare_unit(site_unit: str, server: ServerUnit | None) -> UnitMatch:
    """Compare a unit name of `UNITS` with what the node declares."""
    if server is None or (server.unit_id <= 0 and not server.display_name):
        return UnitMatch.SAME if site_unit == "-" else UnitMatch.NOT_GIVEN
    named = _SITE_NAMES.get(_folded(server.display_name))
    if server.namespace == UNECE_NAMESPACE and server.unit_id > 0:
        if server.unit_id != UNITS[site_unit].unit_id:
            return UnitMatch.DIFFERENT
        # wt % and mol % share a code: only the display name may tell them apart.
        return UnitMatch.DIFFERENT if _other_basis(site_unit, named) else UnitMatch.SAME
    if named is None:
        return UnitMatch.CANNOT_TELL
    same = named == site_unit or (UNITS[named].code == UNITS[site_unit].code and
                                  not _other_basis(site_unit, named))  # fmt: skip
    return UnitMatch.SAME_BY_NAME if same else UnitMatch.DIFFERENT


def _other_basis(site_unit: str, named: str | None) -> bool:
    if named is None or _PLAIN_FRACTION in (named, site_unit):
        return False
    return UNITS[named].quantity == "fraction" and named != site_unit


def compare_range(low: float, high: float, server: ServerRange | None) -> RangeMatch:
    """Compare a tag's `low..high` with `EURange`, both in the tag's unit."""
    if server is None or not server.high > server.low:
        return RangeMatch.NOT_GIVEN
    ratio = (high - low) / (server.high - server.low)
    apart = low > server.high or high < server.low
    if apart or not 1.0 / OTHER_SCALE_RATIO < ratio < OTHER_SCALE_RATIO:
        return RangeMatch.OTHER_SCALE
    return RangeMatch.INSIDE if low >= server.low and high <= server.high else RangeMatch.WIDER
