"""Rules of MVs, CVs and DVs and the tags they name."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator
from typing import Final, TypeAlias

from edgectl.settings.checks_tags import in_range
from edgectl.settings.findings import MISSING, Complaint, dotted, nearest
from edgectl.settings.goals import ControlledVariable, ManipulatedVariable
from edgectl.settings.lines import Path
from edgectl.settings.parts import Parts
from edgectl.settings.tags import Role, Tag

Goal: TypeAlias = ManipulatedVariable | ControlledVariable

_MEASURED_BY: Final = {
    "reflux": Role.REFLUX_FLOW,
    "tray_temperature_setpoint": Role.TRAY_TEMPERATURE,
    "bottoms_light_impurity": Role.ANALYSER,
    "distillate_heavy_impurity": Role.ANALYSER,
    "tray_temperature": Role.TRAY_TEMPERATURE,
    "feed_flow": Role.FEED_FLOW,
    "feed_temperature": Role.FEED_TEMPERATURE,
}
_LIMITS: Final = ("hard_low", "low", "setpoint", "high", "hard_high")
# Inner, outer, and whether the outer one is a lower limit.
_NESTED: Final = (
    ("low", "hard_low", True),
    ("setpoint", "low", True),
    ("setpoint", "high", False),
    ("high", "hard_high", False),
    ("setpoint", "hard_low", True),
    ("setpoint", "hard_high", False),
)
_QUALITY_ONLY: Final = (
    *_LIMITS,
    "weight",
    "soft_linear",
    "soft_quadratic",
    "bias_filter",
    "innovation_clip",
    "bias_max_age_s",
    "tighten_per_h",
)


def mv_tags_fit(parts: Parts) -> Iterator[Complaint]:
    """An MV's tags exist, have fitting roles, and the MV's unit and one basis.

    `position` is a loop_setpoint, `output` a loop_output, `mode` a loop_mode,
    `measured` the reflux_flow or a tray_temperature, `in_ratio_to` the feed_flow;
    `loop.stage` is the stage of `measured`; the tags of `position` and `mode` are required.
    """
    for name, mv in parts.mv.items():
        path = ("mv", name)
        position = yield from _named(
            parts, (*path, "position"), mv.position, Role.LOOP_SETPOINT, mv.unit
        )
        measured_by = _MEASURED_BY[mv.kind]
        measured = yield from _named(parts, (*path, "measured"), mv.measured, measured_by, mv.unit)
        yield from _named(parts, (*path, "output"), mv.output, Role.LOOP_OUTPUT, None)
        mode = yield from _named(parts, (*path, "mode"), mv.mode, Role.LOOP_MODE, None)
        for key, tag in (("position", position), ("mode", mode)):
            if tag is not None and not tag.required:
                # Nobody may be told to move what nobody knows the place of.
                words = "a tag with required = true"
                yield Complaint((*path, key), getattr(mv, key), words, "write it in the tag")
        if measured is not None and position is not None and measured.basis != position.basis:
            yield Complaint(
                (*path, "position"),
                mv.position,
                f"the same basis as tag {mv.measured}, {measured.basis}",
                f"its basis is {position.basis}; correct one of the two tags",
            )
        if mv.in_ratio_to is not None:
            yield from _named(
                parts, (*path, "in_ratio_to"), mv.in_ratio_to, Role.FEED_FLOW, mv.unit
            )
        yield from _loop_stage_fits(path, mv, measured)
        for index, value in enumerate(mv.automatic_modes):
            place = (*path, "automatic_modes", index)
            if value in mv.automatic_modes[:index]:
                yield Complaint(place, value, "each mode once", "remove it")
            if mode is not None and not in_range(mode, value):
                words = f"inside the range of tag {mv.mode}, {mode.low:g} to {mode.high:g}"
                yield Complaint(place, value, words, "correct it or the tag's range")


def _loop_stage_fits(
    path: Path, mv: ManipulatedVariable, measured: Tag | None
) -> Iterator[Complaint]:
    if mv.loop is None or measured is None or measured.stage in (None, mv.loop.stage):
        return
    yield Complaint(
        (*path, "loop", "stage"),
        mv.loop.stage,
        f"the stage of tag {mv.measured}, {measured.stage}",
        "correct the stage, or measure the loop's own tray",
    )


def mv_details_fit(parts: Parts) -> Iterator[Complaint]:
    """A kind of MV occurs once and has the keys it needs and no others.

    `[mv.*.loop]` belongs to a temperature setpoint; `in_ratio_to` to reflux,
    together with `ratio_filter_min`. The model needs a temperature setpoint.
    """
    if parts.mv and len(parts.mv) == len(parts.names("mv")):
        kinds = {mv.kind for mv in parts.mv.values()}
        if "tray_temperature_setpoint" not in kinds:
            yield Complaint(
                ("mv",),
                MISSING,
                "an MV of kind tray_temperature_setpoint",
                "the model follows the column through that loop: add it",
            )
    seen: dict[str, str] = {}
    for name, mv in parts.mv.items():
        path = ("mv", name)
        first = seen.setdefault(mv.kind, name)
        if first != name:
            yield Complaint(
                (*path, "kind"), mv.kind, "each kind of MV once", f"MV {first} has it already"
            )
        wants_loop = mv.kind == "tray_temperature_setpoint"
        if wants_loop and mv.loop is None:
            mend = f"add a section [mv.{name}.loop]"
            yield Complaint((*path, "loop"), MISSING, f"needed for {mv.kind}", mend)
        if not wants_loop and mv.loop is not None:
            yield Complaint((*path, "loop"), {}, f"not for {mv.kind}", "remove the section")
        if mv.in_ratio_to is not None and wants_loop:
            yield Complaint(
                (*path, "in_ratio_to"), mv.in_ratio_to, f"not for {mv.kind}", "remove it"
            )
        if (mv.in_ratio_to is None) != (mv.ratio_filter_min is None):
            key = "in_ratio_to" if mv.in_ratio_to is None else "ratio_filter_min"
            other = "ratio_filter_min" if mv.in_ratio_to is None else "in_ratio_to"
            yield Complaint(
                (*path, key), MISSING, "both keys or neither", f"add `{key}`, or remove `{other}`"
            )


def loops_are_apart(parts: Parts) -> Iterator[Complaint]:
    """No two MVs share a `position`, `measured`, `output` or `mode` tag."""
    seen: dict[str, str] = {}
    for name, mv in parts.mv.items():
        for key in ("position", "measured", "output", "mode"):
            tag = getattr(mv, key)
            first = seen.setdefault(tag, name)
            if first != name:
                yield Complaint(
                    ("mv", name, key),
                    tag,
                    "a tag of this MV's own loop",
                    f"MV {first} has it already; was it copied?",
                )


def move_sizes_fit(parts: Parts) -> Iterator[Complaint]:
    """`increment` <= `worthwhile_move` <= `max_move` <= `high` - `low`."""
    for name, mv in parts.mv.items():
        path = ("mv", name)
        if mv.increment > mv.worthwhile_move:
            yield Complaint(
                (*path, "increment"),
                mv.increment,
                f"at most `worthwhile_move`, which is {mv.worthwhile_move:g}",
                "a worthwhile move must be one that can be entered",
            )
        if mv.worthwhile_move > mv.max_move:
            yield Complaint(
                (*path, "worthwhile_move"),
                mv.worthwhile_move,
                f"at most `max_move`, which is {mv.max_move:g}",
                "or no suggestion would ever be made",
            )
        if isinstance(mv.low, float) and isinstance(mv.high, float):
            room = mv.high - mv.low
            if 0 < room < mv.max_move:
                yield Complaint(
                    (*path, "max_move"),
                    mv.max_move,
                    f"at most `high` - `low`, which is {room:g}",
                    "lower it",
                )


def limits_fit(parts: Parts) -> Iterator[Complaint]:
    """Limits and setpoints lie inside the range of the tag they limit.

    One that names a tag names one with role `limit`, the same unit and the
    same basis.
    """
    places: list[tuple[Path, Goal, str]] = [
        (("mv", name), mv, mv.position) for name, mv in parts.mv.items()
    ]
    places += [(("cv", name), cv, cv.measured) for name, cv in parts.cv.items()]
    for path, goal, tag_name in places:
        tag = parts.tags.get(tag_name)
        for key in _LIMITS:
            limit = getattr(goal, key, None)
            if isinstance(limit, str):
                held = yield from _named(parts, (*path, key), limit, Role.LIMIT, goal.unit)
                if held is not None and tag is not None and held.basis != tag.basis:
                    yield Complaint(
                        (*path, key),
                        limit,
                        f"the same basis as tag {tag_name}, {tag.basis}",
                        f"its basis is {held.basis}; correct one of the two tags",
                    )
            elif limit is not None and tag is not None and tag.unit == goal.unit:
                words = f"inside the range of tag {tag_name}, {tag.low:g} to {tag.high:g}"
                if not in_range(tag, limit):
                    yield Complaint((*path, key), limit, words, "correct it or the tag's range")


def cv_tags_fit(parts: Parts) -> Iterator[Complaint]:
    """A CV's tag exists, has a fitting role and the CV's unit.

    Impurities are measured by an analyser, tray temperatures by a
    tray_temperature.
    """
    for name, cv in parts.cv.items():
        path = ("cv", name, "measured")
        yield from _named(parts, path, cv.measured, _MEASURED_BY[cv.kind], cv.unit)


def cv_roles_fit(parts: Parts) -> Iterator[Complaint]:
    """An impurity is `quality`, a tray temperature is `tracking`.

    A tracking CV has no limits, setpoint or tuning; a quality CV has at least
    one limit or a setpoint, and a weight exactly if it has a setpoint; in a
    linear coordinate it states its `innovation_clip`.
    """
    for name, cv in parts.cv.items():
        path = ("cv", name)
        fitting = "tracking" if cv.kind == "tray_temperature" else "quality"
        if cv.role != fitting:
            yield Complaint((*path, "role"), cv.role, f'"{fitting}" for {cv.kind}', "correct it")
        elif cv.role == "tracking":
            for key in _QUALITY_ONLY:
                if key in cv.model_fields_set and getattr(cv, key) is not None:
                    value = getattr(cv, key)
                    yield Complaint((*path, key), value, "not for role tracking", "remove it")
        else:
            yield from _quality_fits(path, cv)


def _quality_fits(path: Path, cv: ControlledVariable) -> Iterator[Complaint]:
    if cv.low is None and cv.high is None and cv.setpoint is None:
        yield Complaint(
            (*path, "high"), MISSING, "at least one of low, high and setpoint", "add one"
        )
    if cv.setpoint is not None and cv.weight == 0:
        yield Complaint(
            (*path, "weight"),
            cv.weight if "weight" in cv.model_fields_set else MISSING,
            "above 0 with a setpoint",
            "give a weight, or remove the setpoint",
        )
    if cv.setpoint is None and cv.weight > 0:
        yield Complaint(
            (*path, "weight"), cv.weight, "0 without a setpoint", "add a setpoint, or write 0"
        )
    if cv.coordinate == "linear" and "innovation_clip" not in cv.model_fields_set:
        yield Complaint(
            (*path, "innovation_clip"),
            MISSING,
            f"needed in a linear coordinate, in {cv.unit}",
            "add `innovation_clip`: the default is meant for logarithms",
        )


def cv_limits_nest(parts: Parts) -> Iterator[Complaint]:
    """Planned limits lie inside the specification, the setpoint inside the planned limits.

    In a logarithmic coordinate all of them are above 0.
    """
    for name, cv in parts.cv.items():
        path = ("cv", name)
        given = [(key, getattr(cv, key)) for key in _LIMITS]
        numbers = [(key, value) for key, value in given if isinstance(value, float)]
        for key, value in numbers:
            if cv.coordinate == "logarithmic" and value <= 0:
                yield Complaint(
                    (*path, key), value, "above 0 in a logarithmic coordinate", "correct it"
                )
        limits = dict(numbers)
        for inner, outer, is_low in _NESTED:
            if inner not in limits or outer not in limits:
                continue
            own, bound = limits[inner], limits[outer]
            if own < bound if is_low else own > bound:
                yield Complaint(
                    (*path, inner),
                    own,
                    f"at {'least' if is_low else 'most'} `{outer}`, which is {bound:g}",
                    "the setpoint lies inside the planned limits, these inside the specification",
                )


def dv_tags_fit(parts: Parts) -> Iterator[Complaint]:
    """A DV's tag exists, its role is the DV's kind, and it is required or has a substitute.

    Each kind of DV occurs once. A feed_flow has a `filter_min`, a feed_temperature none.
    """
    seen: dict[str, str] = {}
    for name, dv in parts.dv.items():
        path = ("dv", name)
        tag = yield from _named(
            parts, (*path, "measured"), dv.measured, _MEASURED_BY[dv.kind], None
        )
        if tag is not None and not tag.required and tag.substitute is None:
            yield Complaint(
                (*path, "measured"),
                dv.measured,
                "a tag that is required or has a substitute",
                f"say so in [tags.{dv.measured}]",
            )
        first = seen.setdefault(dv.kind, name)
        if first != name:
            yield Complaint(
                (*path, "kind"), dv.kind, "each kind of DV once", f"DV {first} has it already"
            )
        elif dv.kind == "feed_flow" and dv.filter_min is None:
            yield Complaint(
                (*path, "filter_min"), MISSING, f"needed for {dv.kind}", "add `filter_min`"
            )
        elif dv.kind != "feed_flow" and dv.filter_min is not None:
            yield Complaint((*path, "filter_min"), dv.filter_min, f"not for {dv.kind}", "remove it")


def _named(
    parts: Parts, path: Path, name: str, role: Role, unit: str | None
) -> Generator[Complaint, None, Tag | None]:
    """The tag of that name, after complaints about its role and unit; None when there is none."""
    tag = parts.tags.get(name)
    if tag is None:
        if name not in parts.names("tags"):
            guess = nearest(name, parts.names("tags")) or "add it under [tags], or name another"
            yield Complaint(path, name, "the name of a tag in this file", guess)
        return None
    if tag.role is not role:
        yield Complaint(
            path, name, f"a tag with role {role}", f"its role is {tag.role}; name another tag"
        )
        return None
    if unit is not None and tag.unit != unit:
        yield Complaint(
            path,
            name,
            f"a tag in {unit}, the unit of {dotted(path[:2])}",
            f"its unit is {tag.unit}; make the units the same",
        )
        return None
    return tag


RULES: Final[tuple[Callable[[Parts], Iterator[Complaint]], ...]] = (
    mv_tags_fit,
    mv_details_fit,
    loops_are_apart,
    move_sizes_fit,
    limits_fit,
    cv_tags_fit,
    cv_roles_fit,
    cv_limits_nest,
    dv_tags_fit,
)
