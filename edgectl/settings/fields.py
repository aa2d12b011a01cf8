"""The kinds of value a site file holds, and the words that say what is allowed.

The same words go into an error message and into the reference of every key, so
that the two cannot disagree.
"""

from __future__ import annotations

import math
import types
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import Enum
from types import MappingProxyType
from typing import (
    Annotated,
    Any,
    Final,
    Literal,
    NoReturn,
    TypeAlias,
    TypeVar,
    Union,
    get_args,
    get_origin,
)

import annotated_types as limits
from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Field,
    PlainSerializer,
    PlainValidator,
    WithJsonSchema,
)
from pydantic_core import PydanticCustomError

from edgectl.records.units import UNITS
from edgectl.settings.nodes import NODE_WORDS, NodeTextError, same_node

_LARGEST: Final = 1e12
_LONGEST_TEXT: Final = 300

V = TypeVar("V")


class Section(BaseModel):
    """A table of the site file: frozen, strict, no unknown keys, no NaN."""

    model_config = ConfigDict(
        frozen=True,
        extra="forbid",
        strict=True,
        allow_inf_nan=False,
        use_attribute_docstrings=True,
    )


@dataclass(frozen=True, slots=True)
class Says:
    """Marks a kind of value with the words that say what is allowed."""

    words: str


def _refuse(what: str, mend: str) -> NoReturn:
    raise PydanticCustomError("site_value", "{what}", {"what": what, "mend": mend})


def _moderate(value: float) -> float:
    if not abs(value) <= _LARGEST:
        _refuse("too large a number", f"write a number between -{_LARGEST:g} and {_LARGEST:g}")
    return value


def _text(value: str) -> str:
    if not value.strip():
        _refuse("empty", "write some text")
    if len(value) > _LONGEST_TEXT:
        _refuse("too long", f"shorten it to {_LONGEST_TEXT} characters")
    # These texts reach terminals, pages and logs.
    if not value.isprintable():
        _refuse("not printable", "remove line ends and control characters")
    return value


def _node(value: str) -> str:
    try:
        same_node(value)
    except NodeTextError as error:
        _refuse("not a node id", f"{error}; write {NODE_WORDS}")
    return value


def _unit(value: str) -> str:
    if value not in UNITS:
        _refuse("unknown unit", f"use one of {', '.join(UNITS)}")
    return value


def _number_or_tag(value: object) -> float | str:
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, bool) or not isinstance(value, int | float):
        _refuse("neither a number nor a tag", "write a number, or a tag's name in quotes")
    if isinstance(value, float) and not math.isfinite(value):
        _refuse("not finite", "write a finite number")
    return float(_moderate(value))


Number: TypeAlias = Annotated[float, AfterValidator(_moderate)]
Positive: TypeAlias = Annotated[Number, Field(gt=0)]
NotNegative: TypeAlias = Annotated[Number, Field(ge=0)]
Fraction: TypeAlias = Annotated[Number, Field(gt=0, lt=1)]
Count: TypeAlias = Annotated[int, Field(ge=1, le=10_000)]
Text: TypeAlias = Annotated[str, AfterValidator(_text)]
NodeText: TypeAlias = Annotated[str, AfterValidator(_node), Says(NODE_WORDS)]
UnitName: TypeAlias = Annotated[str, AfterValidator(_unit), Says(f"one of {', '.join(UNITS)}")]
TagName: TypeAlias = Annotated[str, AfterValidator(_text), Says("the name of a tag")]
NumberOrTag: TypeAlias = Annotated[
    float | str,
    PlainValidator(_number_or_tag),
    WithJsonSchema({"anyOf": [{"type": "number"}, {"type": "string"}]}),
    Says("a number, or the name of a tag"),
]
# A dict inside a frozen model could still be changed: the write fence must not be.
Named: TypeAlias = Annotated[
    Mapping[str, V], AfterValidator(MappingProxyType), PlainSerializer(dict)
]


def allowed_words(annotation: Any, metadata: Sequence[Any] = ()) -> str:
    """What a field of this type accepts, in plain words."""
    for mark in metadata:
        if isinstance(mark, Says):
            return mark.words
    origin, args = get_origin(annotation), get_args(annotation)
    if origin is Annotated:
        return allowed_words(args[0], (*args[1:], *metadata))
    if origin in (Union, types.UnionType):
        return " or ".join(allowed_words(kind) for kind in args if kind is not type(None))
    if origin is Literal:
        return _one_of(args)
    if origin is tuple:
        size = "" if args[-1] is Ellipsis else f"{len(args)} of "
        return f"a list, {size}each {allowed_words(args[0])}{_length(metadata)}"
    if isinstance(annotation, type) and issubclass(annotation, Enum):
        return _one_of([member.value for member in annotation])
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return "a section"
    word = {float: "a number", int: "a whole number", bool: "true or false", str: "text"}
    return word.get(annotation, "a section of named sections") + _bounds(metadata)


def _one_of(values: Sequence[object]) -> str:
    quoted = [f'"{value}"' for value in values]
    return quoted[0] if len(quoted) == 1 else "one of " + ", ".join(quoted)


def _flat(metadata: Sequence[Any]) -> list[Any]:
    # A Field(...) inside Annotated keeps its limits in its own metadata.
    return [item for mark in metadata for item in getattr(mark, "metadata", [mark])]


def _bounds(metadata: Sequence[Any]) -> str:
    said = []
    for mark in _flat(metadata):
        match mark:
            case limits.Gt(gt=bound):
                said.append(f"above {bound:g}")
            case limits.Ge(ge=bound):
                said.append(f"at least {bound:g}")
            case limits.Lt(lt=bound):
                said.append(f"below {bound:g}")
            case limits.Le(le=bound):
                said.append(f"at most {bound:g}")
            case _:
                pass
    return (" " if said else "") + " and ".join(said)


def _length(metadata: Sequence[Any]) -> str:
    said = []
    for mark in _flat(metadata):
        if isinstance(mark, limits.MinLen):
            said.append(f"at least {mark.min_length}")
        if isinstance(mark, limits.MaxLen):
            said.append(f"at most {mark.max_length}")
    return f" ({' and '.join(said)} of them)" if said else ""
