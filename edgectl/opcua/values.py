"""Between OPC UA values and plain ones; nothing here waits or sends."""

from __future__ import annotations

import math
from collections.abc import Mapping
from datetime import UTC, datetime
from enum import StrEnum
from typing import Final

from asyncua.ua.uatypes import DataValue, Variant, VariantType

from edgectl.opcua.quality import BAD_NO_DATA_AVAILABLE, BAD_TYPE_MISMATCH
from edgectl.records.readings import Quality, Reading, quality_of

NUMERIC: Final = frozenset(
    {
        VariantType.Boolean,
        VariantType.SByte,
        VariantType.Byte,
        VariantType.Int16,
        VariantType.UInt16,
        VariantType.Int32,
        VariantType.UInt32,
        VariantType.Int64,
        VariantType.UInt64,
        VariantType.Float,
        VariantType.Double,
    }
)
"""Types a tag's value may have."""


class FieldKind(StrEnum):
    """What an advisory node holds."""

    FLAG = "flag"
    COUNT = "count"
    INSTANT = "instant"
    TEXT = "text"
    NUMBER = "number"


WRITABLE_TYPES: Final[Mapping[FieldKind, frozenset[VariantType]]] = {
    FieldKind.FLAG: frozenset({VariantType.Boolean}),
    FieldKind.COUNT: frozenset(
        {VariantType.Int32, VariantType.Int64, VariantType.UInt32, VariantType.Double}
    ),
    # A Double holds seconds since the Unix epoch.
    FieldKind.INSTANT: frozenset({VariantType.DateTime, VariantType.Double}),
    FieldKind.TEXT: frozenset({VariantType.String}),
    FieldKind.NUMBER: frozenset({VariantType.Double, VariantType.Float}),
}

_WRAP: Final = {VariantType.Int32: 2**31, VariantType.UInt32: 2**32, VariantType.Int64: 2**63}
_LARGEST_FLOAT: Final = 3.4028234663852886e38
_LONGEST_TEXT: Final = 2000

Plain = bool | int | float | str


class UnwritableValueError(ValueError):
    """A value that must not, or cannot, be written to a node of that type."""


def encode(value: Plain, variant_type: VariantType) -> DataValue:
    """A write of the value alone.

    Servers answer BadWriteNotSupported when a status or a timestamp comes along.
    Raises UnwritableValueError for a value that is not finite or does not fit.
    """
    return DataValue(Variant(_fitted(value, variant_type), variant_type), StatusCode=None)


def _fitted(value: Plain, variant_type: VariantType) -> bool | int | float | str | datetime:
    if isinstance(value, float) and not math.isfinite(value):
        raise UnwritableValueError(f"{value} is not finite")
    if variant_type is VariantType.Boolean and isinstance(value, bool):
        return value
    if variant_type is VariantType.String and isinstance(value, str):
        # A server may refuse a whole write for one long text.
        return value if len(value) <= _LONGEST_TEXT else value[: _LONGEST_TEXT - 1] + "…"
    if isinstance(value, bool | str):
        raise UnwritableValueError(f"a {type(value).__name__} does not fit {variant_type.name}")
    if variant_type in _WRAP and isinstance(value, int):
        return value % _WRAP[variant_type]
    if variant_type is VariantType.Double:
        return float(value)
    if variant_type is VariantType.Float and abs(value) <= _LARGEST_FLOAT:
        return float(value)
    if variant_type is VariantType.DateTime:
        try:
            return datetime.fromtimestamp(value, UTC)
        except (ValueError, OverflowError, OSError) as error:
            raise UnwritableValueError(f"{value} is no date: {error}") from error
    raise UnwritableValueError(f"{value!r} does not fit {variant_type.name}")


def instant_of(stamp: datetime | None) -> float | None:
    """Seconds since the Unix epoch. OPC UA times are UTC, said or not (OPC 10000-6, 5.2.2.5)."""
    if stamp is None:
        return None
    return (stamp if stamp.tzinfo else stamp.replace(tzinfo=UTC)).timestamp()


def reading_of(tag: str, result: DataValue) -> Reading:
    """The reading as received; what is no number becomes None with a Bad status."""
    value = number_of(result)
    status_code = status_of(result)
    if value is None and quality_of(status_code) is not Quality.BAD:
        empty = result.Value is None or result.Value.Value is None
        status_code = BAD_NO_DATA_AVAILABLE if empty else BAD_TYPE_MISMATCH
    return Reading(
        tag=tag,
        value=value,
        status_code=status_code,
        source_time=instant_of(result.SourceTimestamp),
        server_time=instant_of(result.ServerTimestamp),
    )


def number_of(result: DataValue) -> float | None:
    """The value as a float, or None for texts, arrays, structures and nothing."""
    value = plain_of(result)
    return float(value) if isinstance(value, bool | int | float) else None


def plain_of(result: DataValue) -> object:
    """Whatever value came along, or None."""
    return None if result.Value is None else result.Value.Value


def status_of(result: DataValue) -> int:
    """The status code; an absent one means Good (OPC 10000-6, 5.2.2.17)."""
    return 0 if result.StatusCode is None else int(result.StatusCode.value)
