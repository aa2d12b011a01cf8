"""Between OPC UA values and plain ones."""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta

import pytest
from asyncua.ua.uatypes import DataValue, StatusCode, Variant, VariantType
from hypothesis import given
from hypothesis import strategies as st

from edgectl.opcua.values import (
    NUMERIC,
    WRITABLE_TYPES,
    FieldKind,
    Plain,
    UnwritableValueError,
    encode,
    instant_of,
    reading_of,
)

V = VariantType
WRITABLE = sorted({kind for kinds in WRITABLE_TYPES.values() for kind in kinds})


@pytest.mark.parametrize(
    ("value", "kind", "sent"),
    [
        (True, V.Boolean, True),
        (7860.0, V.Double, 7860.0),
        (7860, V.Double, 7860.0),
        (101.5, V.Float, 101.5),
        (12, V.Int32, 12),
        (2**31 + 5, V.Int32, 5),
        (2**32 + 5, V.UInt32, 5),
        (2**40, V.Int64, 2**40),
        ("why", V.String, "why"),
        (1_930_000_000.25, V.DateTime, datetime(2031, 2, 27, 23, 6, 40, 250000, UTC)),
    ],
)
def test_a_value_travels_alone_and_typed(value: Plain, kind: VariantType, sent: object) -> None:
    data = encode(value, kind)
    assert data.StatusCode is None
    assert data.SourceTimestamp is None
    assert data.ServerTimestamp is None
    assert data.Value is not None
    assert (data.Value.Value, data.Value.VariantType) == (sent, kind)


@pytest.mark.parametrize(
    ("value", "kind"),
    [
        (1.0, V.Boolean),
        (1, V.Boolean),
        (True, V.Double),
        (True, V.Int32),
        ("1", V.Double),
        (1.5, V.Int32),
        (1e39, V.Float),
        (1e20, V.DateTime),
        (1.0, V.String),
        (1.0, V.Guid),
    ],
)
def test_what_does_not_fit_is_not_written(value: Plain, kind: VariantType) -> None:
    with pytest.raises(UnwritableValueError):
        encode(value, kind)


@given(st.sampled_from([math.nan, math.inf, -math.inf]), st.sampled_from(WRITABLE))
def test_what_is_not_finite_is_never_encoded(value: float, kind: VariantType) -> None:
    with pytest.raises(UnwritableValueError, match="not finite"):
        encode(value, kind)


@given(st.floats() | st.integers() | st.booleans() | st.text(), st.sampled_from(WRITABLE))
def test_encoding_fits_or_refuses_and_nothing_else(value: Plain, kind: VariantType) -> None:
    try:
        data = encode(value, kind)
    except UnwritableValueError:
        return
    assert data.Value is not None
    assert data.Value.VariantType is kind


def test_a_long_text_is_shortened_and_shows_it() -> None:
    sent = encode("x" * 5000, V.String).Value
    assert sent is not None
    assert len(sent.Value) == 2000
    assert sent.Value.endswith("…")


@pytest.mark.parametrize("kind", sorted(NUMERIC))
def test_every_numeric_type_becomes_a_float(kind: VariantType) -> None:
    reading = reading_of("TI-1", DataValue(Variant(kind is V.Boolean or 1, kind)))
    assert reading.value == 1.0
    assert isinstance(reading.value, float)
    assert reading.status_code == 0


@pytest.mark.parametrize("status", [0x80740000, 0x808C0000, 0x40900000, 0x00960000, 0x00000480])
def test_a_status_code_is_kept_whole(status: int) -> None:
    value = DataValue(Variant(1.0, V.Double), StatusCode(status))
    assert reading_of("TI-1", value).status_code == status


def test_the_bad_status_of_a_text_is_the_servers_own() -> None:
    value = DataValue(Variant("x", V.String), StatusCode(0x808C0000))
    assert reading_of("TI-1", value).status_code == 0x808C0000


def test_a_timestamp_without_a_zone_is_utc() -> None:
    local = datetime(2031, 3, 1, 6, 0)  # noqa: DTZ001 - this is the case in question
    assert instant_of(local) == datetime(2031, 3, 1, 6, 0, tzinfo=UTC).timestamp()
    assert instant_of(None) is None
    late = datetime.max.replace(tzinfo=UTC)
    assert instant_of(late) == pytest.approx(
        (late - datetime(1970, 1, 1, tzinfo=UTC)) / timedelta(seconds=1)
    )


def test_every_kind_of_field_has_a_type() -> None:
    assert set(WRITABLE_TYPES) == set(FieldKind)
