"""Engineering units: UNECE Rec. 20 common codes and what they measure.

The OPC UA unit id is the common code's characters as a big-endian integer
(OPC 10000-8, 5.6.3). An OPC UA unit cannot tell mass from mole fractions or
absolute from gauge pressure; that is the `basis` of a tag in the site file.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

UNECE_NAMESPACE: Final = "http://www.opcfoundation.org/UA/units/un/cefact"


class Basis(StrEnum):
    """What a unit alone does not say."""

    NONE = "none"
    MASS = "mass"
    MOLE = "mole"
    ABSOLUTE = "absolute"
    GAUGE = "gauge"


@dataclass(frozen=True, slots=True)
class Unit:
    """One engineering unit as the site file spells it."""

    name: str
    code: str
    """UNECE common code; also the source of the OPC UA unit id."""
    quantity: str
    scale: float
    """Multiply by this, then add `offset`, to reach the quantity's SI unit."""
    offset: float = 0.0

    @property
    def unit_id(self) -> int:
        return int.from_bytes(self.code.encode("ascii"), "big")


UNITS: Final[dict[str, Unit]] = {
    unit.name: unit
    for unit in (
        Unit("degC", "CEL", "temperature", 1.0, 273.15),
        Unit("K", "KEL", "temperature", 1.0),
        Unit("kPa", "KPA", "pressure", 1e3),
        Unit("bar", "BAR", "pressure", 1e5),
        Unit("kg/h", "E93", "mass_flow", 1.0 / 3600.0),
        Unit("t/h", "E18", "mass_flow", 1.0 / 3.6),
        Unit("kmol/h", "K58", "molar_flow", 1.0 / 3.6),
        Unit("m3/h", "MQH", "volume_flow", 1.0 / 3600.0),
        Unit("%", "P1", "fraction", 1e-2),
        Unit("wt %", "P1", "fraction", 1e-2),
        Unit("mol %", "P1", "fraction", 1e-2),
        Unit("wt ppm", "59", "fraction", 1e-6),
        Unit("kW", "KWT", "power", 1e3),
        Unit("min", "MIN", "time", 60.0),
        Unit("s", "SEC", "time", 1.0),
        Unit("-", "C62", "dimensionless", 1.0),
    )
}
