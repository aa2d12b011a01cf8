"""Judging: is a node what the site file says? Pure, shared by connecting and by `check`."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from asyncua.ua.uatypes import NodeId, VariantType

from edgectl.opcua.address import TagNode
from edgectl.opcua.quality import (
    BAD_CONFIGURATION_ERROR,
    BAD_NODE_ID_UNKNOWN,
    BAD_TYPE_MISMATCH,
)
from edgectl.opcua.units import (
    RangeMatch,
    ServerRange,
    ServerUnit,
    UnitMatch,
    compare_range,
    compare_unit,
)
from edgectl.opcua.values import NUMERIC, WRITABLE_TYPES, FieldKind

_READ_BIT: Final = 0x01
_WRITE_BIT: Final = 0x02


class Severity(StrEnum):
    ERROR = "error"
    """The tag or node cannot be used as it is."""
    WARNING = "warning"
    """Somebody should look; it can be used."""


@dataclass(frozen=True, slots=True)
class Finding:
    """Something a person should know, and what to do about it."""

    severity: Severity
    subject: str
    """Tag, advisory node or `server`."""
    word: str
    """Stable snake_case word."""
    sentence: str
    next_step: str


@dataclass(frozen=True, slots=True)
class NodeFacts:
    """What the server says about one node."""

    name: str
    node: str
    node_id: NodeId | None
    """None when the server does not know the namespace."""
    found: bool
    data_type: VariantType | None
    """None when the server does not say, or names a type this program does not know."""
    scalar: bool
    access: int | None
    """`UserAccessLevel`: bit 0 read, bit 1 write (OPC 10000-3, 8.57)."""
    unit: ServerUnit | None = None
    span: ServerRange | None = None

    @property
    def readable(self) -> bool | None:
        return None if self.access is None else bool(self.access & _READ_BIT)

    @property
    def writable(self) -> bool | None:
        return None if self.access is None else bool(self.access & _WRITE_BIT)


SUBSTITUTE_STATUS: Final = {
    "node_missing": BAD_NODE_ID_UNKNOWN,
    "wrong_type": BAD_TYPE_MISMATCH,
    "unit_differs": BAD_CONFIGURATION_ERROR,
    "other_scale": BAD_CONFIGURATION_ERROR,
}
"""Status of the reading of a tag that cannot be used, by finding."""


def judge_tag(tag: TagNode, facts: NodeFacts) -> list[Finding]:
    """Existence, type, unit and range of a tag's node."""
    missing = _judge_existence(f"tag {tag.tag}", facts)
    if missing is not None:
        return [missing]
    findings = []
    if not facts.scalar or (facts.data_type is not None and facts.data_type not in NUMERIC):
        findings.append(
            Finding(
                Severity.ERROR,
                tag.tag,
                "wrong_type",
                f"tag {tag.tag}: node {tag.node} is {_type_name(facts)}, not a number",
                "point the tag at a node that holds one number",
            )
        )
    findings += _judge_unit(tag, facts) + _judge_range(tag, facts)
    return findings


def judge_advisory(facts: NodeFacts, kind: FieldKind) -> list[Finding]:
    """Existence and type of an advisory node."""
    missing = _judge_existence(f"advisory node {facts.name}", facts)
    if missing is not None:
        return [missing]
    allowed = WRITABLE_TYPES[kind]
    if facts.scalar and facts.data_type in allowed:
        return []
    names = " or ".join(sorted(item.name for item in allowed))
    return [
        Finding(
            Severity.ERROR,
            facts.name,
            "wrong_type",
            f"advisory node {facts.name} ({facts.node}) is {_type_name(facts)}; it must be {names}",
            "change the node's data type at the server, or name another node",
        )
    ]


def judge_access(facts: NodeFacts, may_be_written: bool) -> list[Finding]:
    """What the server says our user may do with a node; nothing is tried out."""
    findings: list[Finding] = []
    if not facts.found:
        return findings
    if facts.readable is False and not may_be_written:
        findings.append(
            Finding(
                Severity.ERROR,
                facts.name,
                "not_readable",
                f"our user may not read {facts.name} ({facts.node})",
                "have the server grant this user CurrentRead",
            )
        )
    if facts.writable is True and not may_be_written:
        findings.append(
            Finding(
                Severity.WARNING,
                facts.name,
                "account_too_strong",
                f"our user could write {facts.name} ({facts.node}), which this program never does",
                "take the right to write plant nodes from this user: an advisor needs none",
            )
        )
    if facts.writable is False and may_be_written:
        findings.append(
            Finding(
                Severity.ERROR,
                facts.name,
                "not_writable",
                f"our user may not write advisory node {facts.name} ({facts.node})",
                "have the server grant this user CurrentWrite on the advisory nodes alone",
            )
        )
    return findings


def _judge_existence(what: str, facts: NodeFacts) -> Finding | None:
    if facts.node_id is None:
        why = "the server does not know its namespace"
    elif not facts.found:
        why = "the server has no such variable"
    else:
        return None
    return Finding(
        Severity.ERROR,
        facts.name,
        "node_missing",
        f"{what}: node {facts.node} not found ({why})",
        "check the node id in the site file against the server",
    )


def _judge_unit(tag: TagNode, facts: NodeFacts) -> list[Finding]:
    match = compare_unit(tag.unit, facts.unit)
    if match in (UnitMatch.SAME, UnitMatch.SAME_BY_NAME):
        return []
    given = facts.unit.display_name or f"unit id {facts.unit.unit_id}" if facts.unit else ""
    if match is UnitMatch.DIFFERENT:
        return [
            Finding(
                Severity.ERROR,
                tag.tag,
                "unit_differs",
                f"tag {tag.tag}: node {tag.node} is in {given!r}, the site file says {tag.unit!r}",
                "correct the unit in the site file, or the node's EngineeringUnits",
            )
        ]
    what = "declares no unit" if match is UnitMatch.NOT_GIVEN else f"has an unknown unit {given!r}"
    return [
        Finding(
            Severity.WARNING,
            tag.tag,
            "unit_unchecked",
            f"tag {tag.tag}: node {tag.node} {what}; the site file says {tag.unit!r}",
            "make sure of the unit by hand",
        )
    ]


def _judge_range(tag: TagNode, facts: NodeFacts) -> list[Finding]:
    match = compare_range(tag.low, tag.high, facts.span)
    if match in (RangeMatch.INSIDE, RangeMatch.NOT_GIVEN) or facts.span is None:
        return []
    ranges = (
        f"the site file accepts {tag.low:g} to {tag.high:g}, "
        f"the node's EURange is {facts.span.low:g} to {facts.span.high:g}"
    )
    if match is RangeMatch.OTHER_SCALE:
        return [
            Finding(
                Severity.ERROR,
                tag.tag,
                "other_scale",
                f"tag {tag.tag}: {ranges}: this looks like another scale",
                "correct low and high of the tag, or the scaling at the server",
            )
        ]
    return [
        Finding(
            Severity.WARNING,
            tag.tag,
            "range_wider",
            f"tag {tag.tag}: {ranges}",
            "narrow low and high: values beyond the instrument's range mean nothing",
        )
    ]


def _type_name(facts: NodeFacts) -> str:
    name = "of an unknown type" if facts.data_type is None else f"of type {facts.data_type.name}"
    return name if facts.scalar else f"an array {name}"
