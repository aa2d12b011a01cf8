"""One look at the plant through the eyes of `check`: connect, survey, read, time, leave."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from edgectl.opcua.address import AdviceNodes, ServerAddress, TagNode
from edgectl.opcua.connection import LINK_ERRORS, open_connection
from edgectl.opcua.fit import Finding, NodeFacts, judge_access, judge_advisory, judge_tag
from edgectl.opcua.link import make_link
from edgectl.opcua.server_view import SERVER_NODES, view_server
from edgectl.opcua.values import reading_of
from edgectl.ports import Clock, PlantUnreachableError
from edgectl.records.readings import Reading


@dataclass(frozen=True, slots=True)
class Inspection:
    """What was found, before anybody judges values and ages."""

    facts: Mapping[str, NodeFacts]
    advisory_facts: Mapping[str, NodeFacts]
    readings: Mapping[str, Reading]
    """Of the tags that can be read; a tag whose node does not fit has none."""
    findings: tuple[Finding, ...]
    """Existence, types, units, ranges, access."""
    round_trips_ms: tuple[float, ...]
    """Wall milliseconds of each read of all tags [ms]."""
    server_time: float | None
    """The server's clock at the last read, seconds since the Unix epoch [s]."""
    clock_offset_s: float | None
    """That minus plant time [s]."""
    server_problem: str | None


async def inspect_plant(
    address: ServerAddress,
    tags: Sequence[TagNode],
    advice: AdviceNodes | None,
    clock: Clock,
    reads: int = 20,
) -> Inspection:
    """Look at every node and read all tags `reads` times. Writes nothing.

    Raises ConnectRefusedError, PlantUnreachableError, or PlantMismatchError when
    a node id is malformed or an advisory node is read as a tag as well.
    """
    connection = await open_connection(address)
    try:
        link = await make_link(connection, tags, advice, {})
        trips = []
        for _ in range(reads):
            began = clock.wall()
            asked_at = clock.plant_time()
            results = await link.read()
            middle = 0.5 * (asked_at + clock.plant_time())
            trips.append(1e3 * (clock.wall() - began))
    except LINK_ERRORS as error:
        raise PlantUnreachableError(
            f"{address.endpoint}: connected, but a call failed ({error or type(error).__name__})"
        ) from error
    finally:
        await connection.close()
    server = view_server(results[: len(SERVER_NODES)])
    values = zip(link.asked, results[len(SERVER_NODES) :], strict=True)
    return Inspection(
        facts=link.facts,
        advisory_facts=link.advisory_facts,
        readings={tag: reading_of(tag, result) for tag, result in values},
        findings=_findings(tags, advice, link.facts, link.advisory_facts),
        round_trips_ms=tuple(trips),
        server_time=server.time,
        clock_offset_s=None if server.time is None else server.time - middle,
        server_problem=server.problem,
    )


def _findings(
    tags: Sequence[TagNode],
    advice: AdviceNodes | None,
    facts: Mapping[str, NodeFacts],
    advisory_facts: Mapping[str, NodeFacts],
) -> tuple[Finding, ...]:
    found: list[Finding] = []
    for tag in tags:
        found += judge_tag(tag, facts[tag.tag])
        found += judge_access(facts[tag.tag], may_be_written=False)
    for name, _, kind in advice.fields() if advice else ():
        found += judge_advisory(advisory_facts[name], kind)
        found += judge_access(advisory_facts[name], may_be_written=True)
    return tuple(found)
