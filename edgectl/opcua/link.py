"""A connection made ready for cycles: nodes resolved and judged, requests built, fence up."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final

from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.uaprotocol_auto import ReadParameters
from asyncua.ua.uatypes import DataValue, NodeId

from edgectl.opcua.address import AdviceNodes, TagNode
from edgectl.opcua.connection import Connection, standard_node
from edgectl.opcua.fence import WriteFence
from edgectl.opcua.fit import Finding, NodeFacts, Severity, judge_advisory, judge_tag
from edgectl.opcua.survey import survey_nodes

SERVER_NODES: Final = (
    ObjectIds.Server_ServerStatus_State,
    ObjectIds.Server_ServerStatus_CurrentTime,
    ObjectIds.Server_ServiceLevel,
)
"""Read in the same call as the tags, before them."""

Seen = dict[str, NodeFacts]
"""Facts of the tags as first seen in this run, to notice a unit or range that changes later."""


@dataclass(frozen=True, slots=True)
class Link:
    """What a cycle needs of one connection."""

    connection: Connection
    requests: tuple[ReadParameters, ...]
    asked: tuple[str, ...]
    """Tags in the order of the results, after the server's own nodes."""
    unusable: Mapping[str, Finding]
    """Tags that are not asked for, and why."""
    mismatch: str | None
    """Required tags that cannot be used: no readings until that is mended."""
    advisory: Mapping[str, NodeId]
    """Usable advisory nodes by name."""
    advisory_problem: str | None
    """Advisory nodes that cannot be used: nothing valid is published until that is mended."""
    fence: WriteFence

    @property
    def complete(self) -> bool:
        return not self.unusable and self.advisory_problem is None

    async def read(self) -> list[DataValue]:
        """Server nodes and tags in one call (or as few as the server accepts)."""
        return await self.connection.read(self.requests)


async def make_link(
    connection: Connection, tags: Sequence[TagNode], advice: AdviceNodes | None, first_seen: Seen
) -> Link:
    """Survey the nodes and test the session with a good read.

    Raises LINK_ERRORS, or PlantMismatchError when the fence cannot be built.
    """
    await connection.learn_namespaces()
    facts = await survey_nodes(connection, {tag.tag: tag.node for tag in tags}, with_units=True)
    unusable: dict[str, Finding] = {}
    for tag in tags:
        seen = first_seen.setdefault(tag.tag, facts[tag.tag]) if facts[tag.tag].found else None
        errors = [f for f in judge_tag(tag, facts[tag.tag]) if f.severity is Severity.ERROR]
        errors += _changes(tag, seen, facts[tag.tag])
        if errors:
            unusable[tag.tag] = errors[0]
    used = [tag for tag in tags if tag.tag not in unusable]
    ids = {name: item.node_id for name, item in facts.items() if item.node_id is not None}
    nodes = [standard_node(number) for number in SERVER_NODES] + [ids[tag.tag] for tag in used]
    advisory, problems, fence = await _raise_fence(connection, advice, ids)
    link = Link(
        connection=connection,
        requests=connection.requests([(node, AttributeIds.Value) for node in nodes], True),
        asked=tuple(tag.tag for tag in used),
        unusable=unusable,
        mismatch=_sentence([unusable[t.tag] for t in tags if t.required and t.tag in unusable]),
        advisory=advisory,
        advisory_problem=_sentence(problems),
        fence=fence,
    )
    await link.read()
    return link


async def _raise_fence(
    connection: Connection, advice: AdviceNodes | None, tag_ids: Mapping[str, NodeId]
) -> tuple[dict[str, NodeId], list[Finding], WriteFence]:
    fields = {name: (node, kind) for name, node, kind in advice.fields()} if advice else {}
    facts = await survey_nodes(
        connection, {name: node for name, (node, _) in fields.items()}, with_units=False
    )
    problems = {name: judge_advisory(facts[name], kind) for name, (_, kind) in fields.items()}
    usable = {
        name: (item.node_id, item.data_type)
        for name, item in facts.items()
        if not problems[name] and item.node_id is not None and item.data_type is not None
    }
    fence = WriteFence(connection.client.uaclient, usable, tag_ids, connection.limits.write)
    nodes = {name: node for name, (node, _) in usable.items()}
    return nodes, [finding for found in problems.values() for finding in found], fence


def _changes(tag: TagNode, before: NodeFacts | None, now: NodeFacts) -> list[Finding]:
    """Unit or range that changed since this run first saw the node: somebody re-scaled it."""
    if before is None or (before.unit, before.span) == (now.unit, now.span):
        return []
    return [
        Finding(
            Severity.ERROR,
            tag.tag,
            "unit_differs",
            f"tag {tag.tag}: unit or range of node {tag.node} changed from "
            f"{_scale(before)} to {_scale(now)} while running",
            "compare with the site file, then restart",
        )
    ]


def _scale(facts: NodeFacts) -> str:
    unit = facts.unit.display_name if facts.unit else "no unit"
    return f"{facts.span.low:g} to {facts.span.high:g} {unit}" if facts.span else unit


def _sentence(findings: Sequence[Finding]) -> str | None:
    """All of them in one line, so that they can be mended at once."""
    return "; ".join(finding.sentence for finding in findings) or None
