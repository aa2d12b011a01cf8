"""Rules of single tags and of the tags together."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from typing import Final

from edgectl.records.units import UNITS, Basis
from edgectl.settings.column import Column
from edgectl.settings.findings import MISSING, Complaint
from edgectl.settings.lines import Path
from edgectl.settings.nodes import SameNode, same_node
from edgectl.settings.parts import Parts
from edgectl.settings.tags import Role, Tag

EXACTLY_ONE: Final = (Role.FEED_FLOW, Role.REFLUX_FLOW, Role.DISTILLATE_FLOW, Role.TOP_PRESSURE)
AT_MOST_ONE: Final = (
    Role.FEED_TEMPERATURE,
    Role.STEAM_FLOW,
    Role.BOTTOMS_FLOW,
    Role.DIFFERENTIAL_PRESSURE,
    Role.DRUM_LEVEL,
    Role.SUMP_LEVEL,
    Role.ADVICE_SWITCH,
)
_FLOWS: Final = tuple(
    unit.name for unit in UNITS.values() if unit.quantity in ("mass_flow", "molar_flow")
)
UNITS_OF_ROLE: Final[dict[Role, tuple[str, ...]]] = {
    # What the model takes is not converted: another unit would be read as this one.
    Role.FEED_FLOW: ("kg/h",),
    Role.FEED_TEMPERATURE: ("degC",),
    Role.REFLUX_FLOW: ("kg/h",),
    Role.STEAM_FLOW: _FLOWS,
    Role.DISTILLATE_FLOW: ("kg/h",),
    Role.BOTTOMS_FLOW: _FLOWS,
    Role.TRAY_TEMPERATURE: ("degC",),
    Role.TOP_PRESSURE: ("kPa",),
    Role.DIFFERENTIAL_PRESSURE: ("kPa",),
    Role.DRUM_LEVEL: ("%",),
    Role.SUMP_LEVEL: ("%",),
    Role.ANALYSER: ("%", "wt %", "wt ppm"),
    Role.LOOP_SETPOINT: tuple(UNITS),
    Role.LOOP_OUTPUT: ("%",),
    Role.LOOP_MODE: ("-",),
    Role.ADVICE_SWITCH: ("-",),
    Role.LIMIT: tuple(UNITS),
}
_BASIS_OF_UNIT: Final = {
    "wt %": Basis.MASS,
    "wt ppm": Basis.MASS,
    "mol %": Basis.MOLE,
}
_BASIS_OF_QUANTITY: Final = {"mass_flow": Basis.MASS, "molar_flow": Basis.MOLE}


def bases_of(tag: Tag) -> tuple[Basis, ...]:
    """What the basis of a tag may be, by its unit and role."""
    unit = tag.engineering_unit
    if tag.unit in _BASIS_OF_UNIT:
        return (_BASIS_OF_UNIT[tag.unit],)
    if unit.quantity in _BASIS_OF_QUANTITY:
        return (_BASIS_OF_QUANTITY[unit.quantity],)
    if tag.role is Role.TOP_PRESSURE:
        # Nothing here knows the barometer, so a gauge pressure would be 100 kPa wrong.
        return (Basis.ABSOLUTE,)
    if unit.quantity == "pressure" and tag.role is not Role.DIFFERENTIAL_PRESSURE:
        return (Basis.ABSOLUTE, Basis.GAUGE)
    if tag.role is Role.ANALYSER:
        return (Basis.MASS,)
    return (Basis.NONE,)


def units_fit_roles(parts: Parts) -> Iterator[Complaint]:
    """A tag's unit fits its role."""
    for name, tag in parts.tags.items():
        fitting = UNITS_OF_ROLE[tag.role]
        if tag.unit not in fitting:
            yield Complaint(
                ("tags", name, "unit"),
                tag.unit,
                f"for role {tag.role}: {', '.join(fitting)}",
                "correct the unit or the role",
            )


def bases_are_said(parts: Parts) -> Iterator[Complaint]:
    """`basis` is given for flows, fractions and pressures, and for nothing else.

    Flows and fractions are `mass` or `mole`, pressures `absolute` or `gauge`;
    a top pressure must be absolute; a pressure difference has no basis.
    """
    for name, tag in parts.tags.items():
        fitting = bases_of(tag)
        if tag.basis in fitting or tag.unit not in UNITS_OF_ROLE[tag.role]:
            continue
        path = ("tags", name, "basis")
        words = " or ".join(f'"{basis.value}"' for basis in fitting)
        value = tag.basis.value if "basis" in tag.model_fields_set else MISSING
        if fitting == (Basis.NONE,):
            yield Complaint(path, value, f"no basis for {tag.unit}, {tag.role}", "remove it")
        else:
            mend = f"write basis = {words}: the unit {tag.unit} alone does not say"
            if tag.role is Role.TOP_PRESSURE and tag.basis is Basis.GAUGE:
                mend = "a gauge pressure is not converted: read one that is absolute"
            yield Complaint(path, value, words, mend)


def roles_are_filled(parts: Parts) -> Iterator[Complaint]:
    """Exactly one tag for feed, reflux and distillate flow and top pressure.

    At most one for feed temperature, steam and bottoms flow, differential
    pressure, the two levels and the advice switch.
    """
    roles = parts.roles()
    counts = Counter(roles.values())
    for role in (*EXACTLY_ONE, *AT_MOST_ONE):
        names = [name for name, found in roles.items() if found == role]
        for name in names[1:]:
            yield Complaint(
                ("tags", name, "role"),
                role.value,
                "one tag with this role",
                f"tag {names[0]} has it already; correct one of the two",
            )
    # A misspelt role is one finding, not two.
    if len(roles) == len(parts.names("tags")):
        for role in EXACTLY_ONE:
            if not counts[role.value] and parts.names("tags"):
                yield Complaint(
                    ("tags",),
                    MISSING,
                    f"exactly one tag with role {role}",
                    f'add a tag with role = "{role}"',
                )


def substitutes_fit(parts: Parts) -> Iterator[Complaint]:
    """A required tag has no substitute; a substitute lies in the tag's range.

    A tag with a role that the model cannot do without (feed, reflux and
    distillate flow, top pressure) is required or has a substitute.
    """
    for name, tag in parts.tags.items():
        path = ("tags", name, "substitute")
        if tag.substitute is None:
            if tag.role in EXACTLY_ONE and not tag.required:
                yield Complaint(
                    ("tags", name, "required"),
                    False if "required" in tag.model_fields_set else MISSING,
                    "true, or a `substitute`",
                    f"the model needs the {tag.role}: write required = true",
                )
        elif tag.required:
            yield Complaint(
                path,
                tag.substitute,
                "no substitute where required = true",
                "remove the substitute, or write required = false",
            )
        elif not in_range(tag, tag.substitute):
            yield Complaint(
                path, tag.substitute, _range(tag), "give a substitute that the tag could read"
            )


def the_switch_is_required(parts: Parts) -> Iterator[Complaint]:
    """The operator's switch for advice is required and has no substitute.

    While nobody can read whether advice is wanted, none is given.
    """
    for name, tag in parts.tags.items():
        if tag.role is Role.ADVICE_SWITCH and not tag.required:
            yield Complaint(
                ("tags", name, "required"),
                False if "required" in tag.model_fields_set else MISSING,
                "true",
                "write required = true: an unread switch must not count as on",
            )


def tag_details_fit(parts: Parts) -> Iterator[Complaint]:
    """A role has the keys it needs and no others.

    `stage` belongs to tray temperatures; `[tags.*.analyser]` to analysers,
    which have no `stale_after_s` (2.5 of their cycles count instead); every
    other tag needs `stale_after_s`.
    """
    for name, tag in parts.tags.items():
        is_analyser, is_tray = tag.role is Role.ANALYSER, tag.role is Role.TRAY_TEMPERATURE
        yield from _belongs(name, tag, "analyser", is_analyser)
        yield from _belongs(name, tag, "stale_after_s", not is_analyser)
        yield from _belongs(name, tag, "stage", is_tray)
        limit = None if tag.analyser is None else tag.analyser.detection_limit
        if limit is not None and not (in_range(tag, limit) and limit != tag.high):
            yield Complaint(
                ("tags", name, "analyser", "detection_limit"),
                limit,
                _range(tag),
                "give it in the tag's own unit",
            )


def _belongs(name: str, tag: Tag, key: str, wanted: bool) -> Iterator[Complaint]:
    path: Path = ("tags", name, key)
    value = getattr(tag, key)
    if wanted and value is None:
        yield Complaint(path, MISSING, f"needed for role {tag.role}", f"add `{key}`")
    if not wanted and value is not None:
        shown = {} if key == "analyser" else value
        yield Complaint(path, shown, f"not for role {tag.role}", "remove it, or correct the role")


def stages_exist(parts: Parts) -> Iterator[Complaint]:
    """The `stage` of a tag is a stage of the column."""
    column = parts.section(Column)
    if column is None:
        return
    for name, tag in parts.tags.items():
        if tag.stage is not None and tag.stage >= column.stages:
            yield Complaint(
                ("tags", name, "stage"),
                tag.stage,
                f"0 (drum) to {column.stages - 1} (reboiler)",
                "stages count from the top; correct it or `column.stages`",
            )


def nodes_are_read_once(parts: Parts) -> Iterator[Complaint]:
    """No two tags read the same node."""
    seen: dict[SameNode, str] = {}
    for name, tag in parts.tags.items():
        first = seen.setdefault(same_node(tag.node), name)
        if first != name:
            yield Complaint(
                ("tags", name, "node"),
                tag.node,
                "a node that no other tag reads",
                f"tag {first} reads it already; was it copied?",
            )


def in_range(tag: Tag, value: float) -> bool:
    """Whether the tag could read this value; a range that is itself wrong excludes nothing."""
    return tag.low >= tag.high or tag.low <= value <= tag.high


def _range(tag: Tag) -> str:
    return f"inside the tag's range, {tag.low:g} to {tag.high:g} {tag.unit}"


RULES: Final[tuple[Callable[[Parts], Iterator[Complaint]], ...]] = (
    units_fit_roles,
    bases_are_said,
    roles_are_filled,
    substitutes_fit,
    the_switch_is_required,
    tag_details_fit,
    stages_exist,
    nodes_are_read_once,
)
