"""Records to plain JSON and back, without pickle and without losing a float.

Dataclasses become objects, tuples become lists, enums their words. JSON has no
NaN or infinity (RFC 8259, section 6): they travel as {"float": "nan"},
{"float": "inf"} and {"float": "-inf"}.

Two pairs of doors: `dumps` and `loads` for records, `canonical` and `parse` for
what is plain JSON already. There is one text for one value, so a hash of the
text is a hash of the value.
"""

from __future__ import annotations

import dataclasses
import json
import math
import types
import typing
from collections.abc import Callable, Iterator, Mapping
from enum import Enum
from functools import lru_cache
from typing import Any, TypeVar, Union, get_args, get_origin

from edgectl.records.entries import Json

T = TypeVar("T")

_NON_FINITE = {"nan": math.nan, "inf": math.inf, "-inf": -math.inf}


class EncodingError(ValueError):
    """The text is not the record it should be; the message names the place."""


def dumps(value: object) -> bytes:
    """Canonical UTF-8 JSON of a record. Raises EncodingError."""
    return canonical(to_json(value))


def loads(kind: type[T], data: bytes) -> T:
    """The record of type `kind` in `data`. Raises EncodingError, naming the place."""
    record: T = from_json(kind, parse(data))
    return record


def canonical(value: Json) -> bytes:
    """Canonical UTF-8 JSON: sorted keys, no spaces, shortest round-trip floats.

    Unlike `dumps` it refuses NaN and infinities: in plain JSON they are a
    mistake of the caller. Raises EncodingError, naming the place.
    """
    try:
        text = json.dumps(
            value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False
        )
        return text.encode("utf-8")
    except (TypeError, ValueError, RecursionError) as error:
        place = next(_faults(value, "$"), None)
        raise EncodingError(place or f"$: {error}") from error


def parse(data: bytes) -> Json:
    """Plain JSON, strictly: UTF-8, no NaN or infinity, no key twice. Raises EncodingError."""
    try:
        text = data.decode("utf-8")
        value: Json = json.loads(text, parse_constant=_refuse, object_pairs_hook=_object)
    except (ValueError, RecursionError) as error:
        raise EncodingError(f"not JSON: {error}") from error
    return value


def to_json(value: object, where: str = "$") -> Json:
    """Plain JSON for a record, a container of records or a number. Raises EncodingError."""
    if value is None or isinstance(value, bool | str | int):
        return value.value if isinstance(value, Enum) else value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else {"float": _non_finite_name(value)}
    if isinstance(value, Enum):
        return to_json(value.value, where)
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {
            name: to_json(getattr(value, name), f"{where}.{name}")
            for name in _field_names(type(value))
        }
    if isinstance(value, Mapping):
        return {_key(key, where): to_json(item, f"{where}.{key}") for key, item in value.items()}
    if isinstance(value, list | tuple):
        if _all_finite_floats(value):
            return list(value)
        return [to_json(item, f"{where}[{i}]") for i, item in enumerate(value)]
    raise EncodingError(f"{where}: cannot encode a {type(value).__name__}")


def from_json(kind: Any, raw: Any, where: str = "$") -> Any:
    """Build `kind` from plain JSON, checking every field. Raises EncodingError."""
    return _decoder(kind)(raw, where)


# -- encoding ---------------------------------------------------------------------------


@lru_cache(maxsize=128)
def _field_names(kind: type) -> tuple[str, ...]:
    return tuple(f.name for f in dataclasses.fields(kind))


def _key(key: object, where: str) -> str:
    if not isinstance(key, str):
        # 1 and "1" would become the same key.
        raise EncodingError(f"{where}: a key must be text, found {key!r}")
    return str(key.value) if isinstance(key, Enum) else key


def _non_finite_name(value: float) -> str:
    return "nan" if math.isnan(value) else ("inf" if value > 0 else "-inf")


def _all_finite_floats(items: list[Any] | tuple[Any, ...]) -> bool:
    """True for the rows of numbers that make up most of a record: they need no second look."""
    return all(type(item) is float and math.isfinite(item) for item in items)


def _faults(value: object, where: str) -> Iterator[str]:
    """Why a value is not plain JSON, place by place."""
    if isinstance(value, float) and not math.isfinite(value):
        yield f"{where}: {value} is not JSON"
    elif isinstance(value, str) and any(0xD800 <= ord(sign) <= 0xDFFF for sign in value):
        yield f"{where}: half a surrogate pair is not text"
    elif isinstance(value, dict):
        for key, item in value.items():
            if not isinstance(key, str):
                yield f"{where}: a key must be text, found {key!r}"
            yield from _faults(key, f"{where}, key {key!r}")
            yield from _faults(item, f"{where}.{key}")
    elif isinstance(value, list | tuple):
        for i, item in enumerate(value):
            yield from _faults(item, f"{where}[{i}]")
    elif value is not None and not isinstance(value, bool | int | float | str):
        yield f"{where}: a {type(value).__name__} is not JSON"


# -- decoding ---------------------------------------------------------------------------


def _refuse(constant: str) -> float:
    raise ValueError(f"{constant} is not JSON")


def _object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    found = dict(pairs)
    if len(found) != len(pairs):
        raise ValueError("an object has a key twice")
    return found


Decode = Callable[[Any, str], Any]


# A closed set: one entry per type that occurs in the records.
@lru_cache(maxsize=512)
def _decoder(kind: Any) -> Decode:
    """How to build `kind`, worked out once per type: a plan has a thousand numbers."""
    origin = get_origin(kind)
    if kind is Any or kind is object:
        return lambda raw, where: raw
    if kind is float:
        return _float
    if kind is type(None) or kind in (bool, int, str):
        return _plain(kind)
    if origin in (Union, types.UnionType):
        return _union(get_args(kind))
    if isinstance(kind, type) and issubclass(kind, Enum):
        return _enum(kind)
    if origin is tuple:
        return _tuple(get_args(kind))
    if origin is not None and issubclass(origin, Mapping):
        return _mapping(get_args(kind)[1])
    if dataclasses.is_dataclass(kind):
        return _record(kind)
    raise EncodingError(f"no rule for {kind!r}")


def _expected(what: str, raw: Any, where: str) -> EncodingError:
    return EncodingError(f"{where}: expected {what}, found {type(raw).__name__}")


def _float(raw: Any, where: str) -> float:
    if isinstance(raw, int | float) and not isinstance(raw, bool):
        try:
            value = float(raw)
        except OverflowError as error:
            raise EncodingError(f"{where}: too large for a float") from error
        # 1e999 parses to infinity; an infinity that is meant says so in words.
        if math.isfinite(value):
            return value
    if isinstance(raw, dict) and set(raw) == {"float"}:
        word = raw["float"]
        if isinstance(word, str) and word in _NON_FINITE:
            return _NON_FINITE[word]
    raise _expected("a number", raw, where)


def _plain(kind: type) -> Decode:
    name = "null" if kind is type(None) else {"int": "integer"}.get(kind.__name__, kind.__name__)

    def decode(raw: Any, where: str) -> Any:
        if not isinstance(raw, kind) or (kind is int and isinstance(raw, bool)):
            raise _expected(name, raw, where)
        return raw

    return decode


def _enum(kind: type[Enum]) -> Decode:
    def decode(raw: Any, where: str) -> Enum:
        try:
            return kind(raw)
        except ValueError as error:
            raise EncodingError(f"{where}: {error}") from error

    return decode


def _union(kinds: tuple[Any, ...]) -> Decode:
    optional = type(None) in kinds
    rest = [kind for kind in kinds if kind is not type(None)]
    only = _decoder(rest[0]) if len(rest) == 1 else None

    def decode(raw: Any, where: str) -> Any:
        if raw is None and optional:
            return None
        if only is not None:
            return only(raw, where)
        problems = []
        for kind in rest:
            try:
                return _decoder(kind)(raw, where)
            except EncodingError as error:
                problems.append(f"as {getattr(kind, '__name__', kind)}: {error}")
        raise EncodingError(f"{where}: fits none of the allowed kinds ({'; '.join(problems)})")

    return decode


def _tuple(kinds: tuple[Any, ...]) -> Decode:
    uniform = len(kinds) == 2 and kinds[1] is Ellipsis

    def decode(raw: Any, where: str) -> tuple[Any, ...]:
        if not isinstance(raw, list):
            raise _expected("a list", raw, where)
        if uniform and kinds[0] is float and _all_finite_floats(raw):
            return tuple(raw)
        if not uniform and len(kinds) != len(raw):
            raise EncodingError(f"{where}: expected {len(kinds)} items, found {len(raw)}")
        each = [kinds[0]] * len(raw) if uniform else kinds
        return tuple(
            _decoder(kind)(item, f"{where}[{i}]")
            for i, (kind, item) in enumerate(zip(each, raw, strict=True))
        )

    return decode


def _mapping(item: Any) -> Decode:
    decode_item = _decoder(item)

    def decode(raw: Any, where: str) -> dict[str, Any]:
        if not isinstance(raw, dict):
            raise _expected("an object", raw, where)
        return {key: decode_item(entry, f"{where}.{key}") for key, entry in raw.items()}

    return decode


def _record(kind: Any) -> Decode:
    hints = typing.get_type_hints(kind)
    fields = {f.name: _decoder(hints[f.name]) for f in dataclasses.fields(kind)}
    required = [
        f.name
        for f in dataclasses.fields(kind)
        if f.default is dataclasses.MISSING and f.default_factory is dataclasses.MISSING
    ]

    def decode(raw: Any, where: str) -> Any:
        if not isinstance(raw, dict):
            raise _expected("an object", raw, where)
        for name in raw:
            if name not in fields:
                raise EncodingError(f"{where}: unknown field {name!r}")
        for name in required:
            if name not in raw:
                raise EncodingError(f"{where}: missing field {name!r}")
        values = {name: fields[name](item, f"{where}.{name}") for name, item in raw.items()}
        try:
            return kind(**values)
        except ValueError as error:
            # A record that checks itself: what it says about the values, and where they stood.
            raise EncodingError(f"{where}: {error}") from error

    return decode
