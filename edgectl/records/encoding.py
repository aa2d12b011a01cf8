"""Records to plain JSON and back, without pickle and without losing a float.

Dataclasses become objects, tuples become lists, enums their words. JSON has no
NaN or infinity (RFC 8259, section 6): they travel as {"float": "nan"},
{"float": "inf"} and {"float": "-inf"}.
"""

from __future__ import annotations

import dataclasses
import json
import math
import types
import typing
from collections.abc import Mapping
from enum import Enum
from functools import lru_cache
from typing import Any, TypeVar, Union, get_args, get_origin

from edgectl.records.entries import Json

T = TypeVar("T")

_NON_FINITE = {"nan": math.nan, "inf": math.inf, "-inf": -math.inf}


class EncodingError(ValueError):
    """The text is not the record it should be; the message names the place."""


def to_json(value: object) -> Json:
    """Plain JSON for a record, a container of records or a number."""
    if value is None or isinstance(value, bool | str | int):
        return value.value if isinstance(value, Enum) else value
    if isinstance(value, float):
        return value if math.isfinite(value) else {"float": _non_finite_name(value)}
    if isinstance(value, Enum):
        return to_json(value.value)
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {f.name: to_json(getattr(value, f.name)) for f in dataclasses.fields(value)}
    if isinstance(value, Mapping):
        return {str(key): to_json(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [to_json(item) for item in value]
    raise EncodingError(f"cannot encode a {type(value).__name__}")


def dumps(value: object) -> bytes:
    """Canonical UTF-8 JSON: sorted keys, no spaces, shortest round-trip floats."""
    text = json.dumps(
        to_json(value), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False
    )
    return text.encode("utf-8")


def loads(kind: type[T], data: bytes) -> T:
    """The record of type `kind` in `data`. Raises EncodingError, naming the place."""
    try:
        raw = json.loads(data)
    except (ValueError, RecursionError) as error:
        raise EncodingError(f"not JSON: {error}") from error
    return from_json(kind, raw)


def from_json(kind: Any, raw: Any, where: str = "$") -> Any:
    """Build `kind` from plain JSON, checking every field. Raises EncodingError."""
    origin = get_origin(kind)
    if kind is Any or kind is object:
        return raw
    if origin in (Union, types.UnionType):
        return _from_union(get_args(kind), raw, where)
    if kind is type(None):
        return _expect(raw is None, None, raw, where, "null")
    if kind is float:
        return _float(raw, where)
    if kind in (bool, str):
        return _expect(isinstance(raw, kind), raw, raw, where, kind.__name__)
    if kind is int:
        return _expect(isinstance(raw, int) and not isinstance(raw, bool), raw, raw, where, "integer")
    if isinstance(kind, type) and issubclass(kind, Enum):
        try:
            return kind(raw)
        except ValueError as error:
            raise EncodingError(f"{where}: {error}") from error
    if origin is tuple:
        return _from_tuple(get_args(kind), raw, where)
    if origin is not None and issubclass(origin, Mapping):
        if not isinstance(raw, dict):
            raise EncodingError(f"{where}: expected an object, found {type(raw).__name__}")
        item = get_args(kind)[1]
        return {key: from_json(item, entry, f"{where}.{key}") for key, entry in raw.items()}
    if dataclasses.is_dataclass(kind):
        return _from_object(kind, raw, where)
    raise EncodingError(f"{where}: no rule for {kind!r}")


def _non_finite_name(value: float) -> str:
    return "nan" if math.isnan(value) else ("inf" if value > 0 else "-inf")


def _expect(good: bool, value: Any, raw: Any, where: str, what: str) -> Any:
    if not good:
        raise EncodingError(f"{where}: expected {what}, found {type(raw).__name__}")
    return value


def _float(raw: Any, where: str) -> float:
    if isinstance(raw, bool):
        raise EncodingError(f"{where}: expected a number, found bool")
    if isinstance(raw, int | float):
        return float(raw)
    if isinstance(raw, dict) and set(raw) == {"float"} and raw["float"] in _NON_FINITE:
        return _NON_FINITE[raw["float"]]
    raise EncodingError(f"{where}: expected a number, found {type(raw).__name__}")


def _from_union(kinds: tuple[Any, ...], raw: Any, where: str) -> Any:
    if raw is None and type(None) in kinds:
        return None
    rest = [kind for kind in kinds if kind is not type(None)]
    if len(rest) == 1:
        return from_json(rest[0], raw, where)
    for kind in rest:
        try:
            return from_json(kind, raw, where)
        except EncodingError:
            continue
    raise EncodingError(f"{where}: fits none of the allowed kinds")


def _from_tuple(kinds: tuple[Any, ...], raw: Any, where: str) -> tuple[Any, ...]:
    if not isinstance(raw, list):
        raise EncodingError(f"{where}: expected a list, found {type(raw).__name__}")
    if len(kinds) == 2 and kinds[1] is Ellipsis:
        return tuple(from_json(kinds[0], item, f"{where}[{i}]") for i, item in enumerate(raw))
    if len(kinds) != len(raw):
        raise EncodingError(f"{where}: expected {len(kinds)} items, found {len(raw)}")
    return tuple(
        from_json(kind, item, f"{where}[{i}]")
        for i, (kind, item) in enumerate(zip(kinds, raw, strict=True))
    )


@lru_cache(maxsize=128)
def _hints(kind: type) -> dict[str, Any]:
    return typing.get_type_hints(kind)


def _from_object(kind: Any, raw: Any, where: str) -> Any:
    if not isinstance(raw, dict):
        raise EncodingError(f"{where}: expected an object, found {type(raw).__name__}")
    hints = _hints(kind)
    unknown = sorted(set(raw) - set(hints))
    if unknown:
        raise EncodingError(f"{where}: unknown field {unknown[0]!r}")
    missing = [
        f.name
        for f in dataclasses.fields(kind)
        if f.name not in raw
        and f.default is dataclasses.MISSING
        and f.default_factory is dataclasses.MISSING
    ]
    if missing:
        raise EncodingError(f"{where}: missing field {missing[0]!r}")
    return kind(**{name: from_json(hints[name], raw[name], f"{where}.{name}") for name in raw})
