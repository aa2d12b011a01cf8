"""A connection made ready for cycles: nodes resolved and judged, requests built, fence up."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.uaprotocol_auto import ReadParameters
from asyncua.ua.uatypes import DataValue, NodeId

from edgectl.opcua.address import AdviceNodes, TagNode
from edgectl.opcua.connection import Connection, standard_node
from edgectl.opcua.fence import WriteFence
from edgectl.opcua.fit import Finding, NodeFacts, Severity, judge_advisory, judge_tag
from edgectl.opcua.server_view import SERVER_NODES
from edgectl.opcua.survey import survey_nodes

Seen = dict[str, NodeFacts]
"""Facts of the tags as first seen in this run, to notice a unit or range that changes later."""


@dataclass(frozen=True, slots=True)
class Link:
    """What a cycle needs of one connection."""

    connection: Connection
    requests: tuple[ReadParameters, ...]
    asked: tuple[str, ...]
    """Tags in the order of the results, after the server's own nodes."""
    facts: Mapping[str, NodeFacts]
    """What the server says about each tag's node."""
    advisory_facts: Mapping[str, NodeFacts]
    """The same about the advisory nodes."""
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
    unusable = {tag.tag: errors[0] for tag in tags
                if (errors := _errors(tag, facts[tag.tag], first_seen))}  # fmt: skip
    used = [tag for tag in tags if tag.tag not in unusable]
    ids = _resolved(facts)
    nodes = [standard_node(number) for number in SERVER_NODES] + [ids[tag.tag] for tag in used]
    fields = {name: (node, kind) for name, node, kind in advice.fields()} if advice else {}
    advisory_facts = await survey_nodes(
        connection, {name: node for name, (node, _) in fields.items()}, with_units=False
    )
    problems = {name: judge_advisory(advisory_facts[name], kind)
                for name, (_, kind) in fields.items()}  # fmt: skip
    advisory = _resolved(advisory_facts)
    types = {
        name: item.data_type
        for name, item in advisory_facts.items()
        if not problems[name] and item.data_type is not None
    }
    link = Link(
        connection=connection,
        requests=connection.requests([(node, AttributeIds.Value) for node in nodes], True),
        asked=tuple(tag.tag for tag in used),
        unusable=unusable,
        mismatch=_sentence([unusable[t.tag] for t in tags if t.required and t.tag in unusable]),
        facts=facts,
        advisory_facts=advisory_facts,
        advisory={name: advisory[name] for name in types},
        advisory_problem=_sentence([one for found in problems.values() for one in found]),
        fence=WriteFence(connection.client.uaclient, advisory, types, ids, connection.limits.write),
    )
    await link.read()
    return link


def _resolved(facts: Mapping[str, NodeFacts]) -> dict[str, NodeId]:
    return {name: item.node_id for name, item in facts.items() if item.node_id is not None}


def _errors(tag: TagNode, facts: NodeFacts, first_seen: Seen) -> list[Finding]:
    """Why a tag cannot be used; remembers what its node looked like at first."""
    errors = [found for found in judge_tag(tag, facts) if found.severity is Severity.ERROR]
    if facts.found and _rescaled(first_seen.setdefault(tag.tag, facts), facts):
        change = f"changed from {_scale(first_seen[tag.tag])} to {_scale(facts)} while running"
        errors.append(
            Finding(
                Severity.ERROR,
                tag.tag,
                "unit_differs",
                f"tag {tag.tag}: unit or range of node {tag.node} {change}",
                "compare with the site file, then restart",
            )
        )
    return errors


def _rescaled(before: NodeFacts, now: NodeFacts) -> bool:
    """A unit or range that was given and is now another; one that is missing proves nothing."""
    return (None not in (before.unit, now.unit) and before.unit != now.unit) or (
        None not in (before.span, now.span) and before.span != now.span
    )


def _scale(facts: NodeFacts) -> str:
    unit = facts.unit.display_name if facts.unit else "no unit"
    return f"{facts.span.low:g} to {facts.span.high:g} {unit}" if facts.span else unit


def _sentence(findings: Sequence[Finding]) -> str | None:
    """All of them in one line, so that they can be mended at once."""
    return "; ".join(finding.sentence for finding in findings) or None
