"""Records to JSON and back: nothing lost, nothing guessed, every fault named by its place."""

from __future__ import annotations

import dataclasses
import enum
import json
import math
from collections.abc import Mapping
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.records.cycle_record import DecisionRecord, DeliveryRecord, EventRecord
from edgectl.records.encoding import (
    EncodingError,
    canonical,
    dumps,
    from_json,
    loads,
    parse,
    to_json,
)
from edgectl.records.measurements import Measurement, Measurements, Verdict
from edgectl.records.plan import NoPlan, Plan, PlanRequest
from edgectl.records.readings import Reading, TagSnapshot

RECORDS = (Plan, NoPlan, PlanRequest, DecisionRecord, DeliveryRecord, EventRecord, Measurements,
           TagSnapshot)  # fmt: skip

READING = Reading("TI-2107", 78.25, 0, 1_700_000_000.0, None)

plain_json = st.recursive(
    st.none()
    | st.booleans()
    | st.integers()
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
    max_leaves=12,
)


def same(one: Any, other: Any) -> bool:
    """Equal to the last digit, with NaN equal to NaN and any mapping equal to a dict."""
    return repr(plain(one)) == repr(plain(other))


def plain(value: Any) -> Any:
    if dataclasses.is_dataclass(value):
        return [type(value).__name__, *(plain(getattr(value, f.name)) for f in fields_of(value))]
    if isinstance(value, Mapping):
        return {key: plain(value[key]) for key in sorted(value)}
    return type(value)(plain(item) for item in value) if isinstance(value, tuple | list) else value


def fields_of(value: Any) -> tuple[dataclasses.Field[Any], ...]:
    return dataclasses.fields(value)


@pytest.mark.parametrize("kind", RECORDS)
@given(data=st.data())
def test_every_record_comes_back_as_it_went(kind: type, data: st.DataObject) -> None:
    # Floats are drawn with NaN and infinities: they must arrive too.
    record = data.draw(st.from_type(kind))
    assert same(loads(kind, dumps(record)), record)


@given(st.floats())
def test_a_float_keeps_its_bits(value: float) -> None:
    back = loads(float, dumps(value))
    assert same(back, value)
    assert math.copysign(1.0, back) == math.copysign(1.0, value) or math.isnan(value)


@given(plain_json)
def test_plain_json_comes_back_as_it_went(value: Any) -> None:
    assert same(parse(canonical(value)), json.loads(json.dumps(value, sort_keys=True)))


@given(plain_json)
def test_one_value_has_one_text(value: Any) -> None:
    assert canonical(parse(canonical(value))) == canonical(value)


@given(st.binary(max_size=60) | st.text(max_size=60).map(lambda text: text.encode()))
def test_garbage_is_refused_with_the_one_error(data: bytes) -> None:
    with pytest.raises(EncodingError):
        loads(Reading, data)


@given(plain_json)
def test_wrong_json_is_refused_with_the_one_error(raw: Any) -> None:
    with pytest.raises(EncodingError):
        from_json(Plan, raw)


@given(field=st.sampled_from(dataclasses.fields(Measurement)), wrong=plain_json)
def test_a_wrong_field_is_refused_by_its_place_or_taken_as_it_is(
    field: dataclasses.Field[Any], wrong: Any
) -> None:
    good = to_json(Measurement("AI-2110", 0.4, Verdict.USED, 10.0, 2.0, True))
    assert isinstance(good, dict)
    try:
        record = from_json(Measurement, {**good, field.name: wrong})
    except EncodingError as error:
        place = str(error)
    else:
        assert getattr(record, field.name) == wrong
        return
    assert place.startswith(f"$.{field.name}")


@pytest.mark.parametrize(
    ("raw", "message"),
    [
        ([], "$: expected an object, found list"),
        ({"cycle": 1, "received_at": 2.0}, "$: missing field 'readings'"),
        ({"cycle": True, "received_at": 2.0, "readings": []}, "$.cycle: expected integer"),
        ({"cycle": 1.0, "received_at": 2.0, "readings": []}, "$.cycle: expected integer"),
        ({"cycle": 1, "received_at": "2", "readings": []}, "$.received_at: expected a number"),
        ({"cycle": 1, "received_at": True, "readings": []}, "$.received_at: expected a number"),
        ({"cycle": 1, "received_at": 10**400, "readings": []}, "$.received_at: too large"),
        ({"cycle": 1, "received_at": {"float": "NaN"}, "readings": []}, "$.received_at: expected"),
        ({"cycle": 1, "received_at": {"float": []}, "readings": []}, "$.received_at: expected"),
        ({"cycle": 1, "received_at": 2.0, "readings": [{}]}, "$.readings[0]: missing field 'tag'"),
        ({"cycle": 1, "received_at": 2.0, "readings": [], "x": 1}, "$: unknown field 'x'"),
    ],
)
def test_a_fault_is_named_by_its_place(raw: object, message: str) -> None:
    with pytest.raises(EncodingError) as caught:
        from_json(TagSnapshot, raw)
    assert str(caught.value).startswith(message)


def test_a_fault_deep_inside_is_named_by_its_place() -> None:
    raw = to_json(TagSnapshot(1, 2.0, (READING, READING)))
    raw["readings"][1]["status_code"] = "good"  # type: ignore[index, call-overload]  # it is there
    with pytest.raises(EncodingError, match=r"^\$\.readings\[1\]\.status_code: expected integer"):
        from_json(TagSnapshot, raw)


def test_a_word_that_is_not_in_the_enum_is_refused() -> None:
    raw = to_json(Measurement("T", 1.0, Verdict.USED, 0.0, 0.0, True))
    raw["verdict"] = "fine"  # type: ignore[index, call-overload]  # an object, as written above
    with pytest.raises(EncodingError, match=r"^\$\.verdict: 'fine' is not a valid Verdict"):
        from_json(Measurement, raw)


def test_a_union_says_why_it_fits_none_of_its_kinds() -> None:
    with pytest.raises(EncodingError, match=r"as Plan: .*unknown field 'x'.*as NoPlan: .*'x'"):
        from_json(Plan | NoPlan, {"x": 1})


@pytest.mark.parametrize(
    ("text", "why"),
    [
        (b"NaN", "NaN is not JSON"),
        (b'{"a": -Infinity}', "-Infinity is not JSON"),
        (b'{"a": 1, "a": 2}', "a key twice"),
        (b"\xff\xfe1\x00", "utf-8"),
        ("1".encode("utf-16"), "utf-8"),
        (b"[" * 100_000, "recursion"),
        (b"", "Expecting value"),
    ],
)
def test_what_only_looks_like_json_is_refused(text: bytes, why: str) -> None:
    with pytest.raises(EncodingError, match=why):
        parse(text)


def test_a_number_beyond_the_floats_is_not_infinity() -> None:
    with pytest.raises(EncodingError, match="expected a number"):
        loads(float, b"1e999")


@pytest.mark.parametrize(
    ("value", "place"),
    [
        ({"a": [1.0, math.nan]}, r"^\$\.a\[1\]: nan is not JSON"),
        ({"a": {"b": math.inf}}, r"^\$\.a\.b: inf is not JSON"),
        ({"a": "\ud800"}, r"^\$\.a: half a surrogate pair"),
        ({"a": {1, 2}}, r"^\$\.a: a set is not JSON"),
    ],
)
def test_canonical_refuses_what_is_not_json_by_its_place(value: Any, place: str) -> None:
    with pytest.raises(EncodingError, match=place):
        canonical(value)


def test_a_record_that_holds_what_json_cannot_is_refused_by_its_place() -> None:
    with pytest.raises(EncodingError, match=r"^\$\.tag: cannot encode a bytes"):
        to_json(dataclasses.replace(READING, tag=b"TI"))  # type: ignore[arg-type]  # on purpose
    with pytest.raises(EncodingError, match="a key must be text, found 1"):
        to_json({1: "one", "1": "one too"})


def test_a_record_that_refuses_its_values_is_a_fault_of_the_text() -> None:
    @dataclasses.dataclass(frozen=True)
    class Range:
        low: float
        high: float

        def __post_init__(self) -> None:
            if self.low > self.high:
                raise ValueError(f"low {self.low} above high {self.high}")

    # Local classes have no importable annotations, so the hints are given by value.
    Range.__annotations__ = {"low": float, "high": float}
    with pytest.raises(EncodingError, match=r"^\$: low 2.0 above high 1.0"):
        from_json(Range, {"low": 2.0, "high": 1.0})


def test_words_travel_as_their_values() -> None:
    class Word(enum.IntEnum):
        ONE = 1

    assert to_json({Verdict.USED: Word.ONE}) == {"used": 1}


def test_a_field_with_a_default_may_be_left_out() -> None:
    raw = to_json(Measurement("T", 1.0, Verdict.USED, 0.0, 0.0, True))
    assert isinstance(raw, dict)
    del raw["at_most"]
    assert from_json(Measurement, raw).at_most is False
