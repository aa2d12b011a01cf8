"""`edgectl check`: is everything as the site file says? Looks, and writes nothing.

`run_check` returns a result that renders as a table and as JSON. Values and ages
are judged here; existence, types, units, ranges and access in `opcua`.
"""

from __future__ import annotations

import statistics
from collections.abc import Awaitable, Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Final

from edgectl.opcua.address import ServerAddress, TagNode
from edgectl.opcua.connection import ConnectRefusedError
from edgectl.opcua.fit import Finding, Severity
from edgectl.opcua.from_site import advice_nodes, server_address, tag_nodes
from edgectl.opcua.inspection import Inspection, inspect_plant
from edgectl.opcua.quality import describe_status
from edgectl.ports import Clock, PlantMismatchError, PlantUnreachableError
from edgectl.records.encoding import to_json
from edgectl.records.entries import Json
from edgectl.records.readings import Quality, Reading
from edgectl.settings.site import Site

SCHEMA: Final = 1
EXIT_GOOD: Final = 0
EXIT_FINDING: Final = 1
EXIT_UNREACHABLE: Final = 75
EXIT_SITE_FILE: Final = 78

OperatingPoint = Mapping[str, Json]
"""What the worker found: `converged`, `message`, temperatures, duties, `ms`."""
SolveOperatingPoint = Callable[[], Awaitable[OperatingPoint]]

_FUTURE_TOLERANCE_S: Final = 2.0


@dataclass(frozen=True, slots=True)
class TagCheck:
    """What was found of one tag."""

    tag: str
    node: str
    found: bool
    data_type: str | None
    unit: str
    server_unit: str | None
    low: float
    high: float
    server_low: float | None
    server_high: float | None
    readable: bool | None
    writable: bool | None
    """By our user, which should not be; None when the server does not say."""
    value: float | None
    quality: str
    """In words, with the status code's name."""
    age_s: float | None
    """Age of the source timestamp by the server's clock, plant seconds [s]."""


@dataclass(frozen=True, slots=True)
class NodeCheck:
    """What was found of one advisory node."""

    name: str
    node: str
    found: bool
    data_type: str | None
    writable: bool | None
    """As far as the server tells without a write."""


@dataclass(frozen=True, slots=True)
class RoundTrip:
    """Wall milliseconds of reading all tags in one call [ms]."""

    reads: int
    median: float
    max: float


@dataclass(frozen=True, slots=True)
class CheckResult:
    """The whole result; `exit_code` follows from it."""

    site: str
    endpoint: str
    security: str
    user: str | None
    connected: bool
    tags: tuple[TagCheck, ...]
    advisory: tuple[NodeCheck, ...]
    findings: tuple[Finding, ...]
    round_trip_ms: RoundTrip | None
    clock_offset_s: float | None
    """Server's clock minus ours, plant seconds [s]."""
    operating_point: OperatingPoint | None
    exit_code: int

    @property
    def ok(self) -> bool:
        return self.exit_code == EXIT_GOOD

    @property
    def next_step(self) -> str:
        """One sentence: what to do now."""
        for finding in self.findings:
            if finding.severity is Severity.ERROR:
                return f"{finding.subject}: {finding.next_step}."
        return "nothing must be mended; `edgectl run` with this site file may start."

    def to_json(self) -> dict[str, Json]:
        """The result as a versioned document."""
        body = to_json(self)
        assert isinstance(body, dict)
        return {"schema": SCHEMA, "ok": self.ok, "next_step": self.next_step, **body}


async def run_check(
    site: Site,
    password: str | None,
    clock: Clock,
    solve_operating_point: SolveOperatingPoint | None = None,
) -> CheckResult:
    """Compare the plant's server with the site file, and solve the operating point."""
    address, tags = server_address(site, password), tag_nodes(site)
    inspection, findings, exit_code = await _look(site, address, tags, clock)
    point = await solve_operating_point() if solve_operating_point is not None else None
    if point is not None and point.get("converged") is not True:
        findings.append(_unsolved(point))
    failed = any(finding.severity is Severity.ERROR for finding in findings)
    return CheckResult(
        site=site.site.name,
        endpoint=address.endpoint,
        security=address.security,
        user=address.user,
        connected=inspection is not None,
        tags=_tag_checks(tags, inspection) if inspection else (),
        advisory=_node_checks(inspection) if inspection else (),
        findings=tuple(findings),
        round_trip_ms=_round_trip(inspection.round_trips_ms) if inspection else None,
        clock_offset_s=inspection.clock_offset_s if inspection else None,
        operating_point=point,
        exit_code=exit_code or (EXIT_FINDING if failed else EXIT_GOOD),
    )


async def _look(
    site: Site, address: ServerAddress, tags: Sequence[TagNode], clock: Clock
) -> tuple[Inspection | None, list[Finding], int]:
    """The inspection with all findings, or none with why not and its exit code."""
    try:
        inspection = await inspect_plant(address, tags, advice_nodes(site), clock)
    except ConnectRefusedError as error:
        code = EXIT_SITE_FILE if error.needs_a_person else EXIT_UNREACHABLE
        return None, [_no_session(str(error.refusal), str(error))], code
    except PlantUnreachableError as error:
        return None, [_no_session("plant_unreachable", str(error))], EXIT_UNREACHABLE
    except PlantMismatchError as error:
        sentence = str(error)
        step = "correct the node in the site file"
        finding = Finding(Severity.ERROR, "site file", "node_refused", sentence, step)
        return None, [finding], EXIT_SITE_FILE
    findings = [*inspection.findings, *_server_findings(site, address, inspection)]
    now = inspection.server_time if inspection.server_time is not None else clock.plant_time()
    for tag in tags:
        if tag.tag in inspection.readings:
            findings += _judge_reading(tag, inspection.readings[tag.tag], now)
    return inspection, findings, EXIT_GOOD


def _no_session(word: str, sentence: str) -> Finding:
    _, _, remedy = sentence.rpartition(": ")
    return Finding(Severity.ERROR, "server", word, sentence, remedy)


def _server_findings(site: Site, address: ServerAddress, inspection: Inspection) -> list[Finding]:
    findings = []
    if inspection.server_problem is not None:
        findings.append(
            Finding(Severity.ERROR, "server", "server_not_running", inspection.server_problem,
                    "have the plant's server set running, then check again")
        )  # fmt: skip
    offset, limit = inspection.clock_offset_s, site.server.clock_offset_limit_s
    if offset is None:
        findings.append(
            Finding(Severity.WARNING, "server", "clock_unknown", "the server shows no CurrentTime",
                    "compare the clocks by hand")
        )  # fmt: skip
    elif abs(offset) > limit:
        which = "ahead of" if offset > 0 else "behind"
        findings.append(
            Finding(Severity.ERROR, "server", "clock_offset",
                    f"the server's clock is {abs(offset):.1f} s {which} ours; the limit is "
                    f"{limit:g} s", "synchronise both clocks, then check again")
        )  # fmt: skip
    if address.security == "none":
        findings.append(
            Finding(Severity.WARNING, "server", "insecure",
                    "security 'none': everything travels in clear text; for testing only",
                    "use it on a loopback or test network alone")
        )  # fmt: skip
    return findings


def _judge_reading(tag: TagNode, reading: Reading, now: float) -> list[Finding]:
    """Quality, value and age of one reading."""
    worst = Severity.ERROR if tag.required else Severity.WARNING
    if reading.quality is not Quality.GOOD or reading.value is None:
        severity = worst if reading.quality is Quality.BAD else Severity.WARNING
        return [
            Finding(severity, tag.tag, f"{reading.quality}_quality",
                    f"tag {tag.tag}: quality is {describe_status(reading.status_code)}",
                    "see what is wrong with the instrument or its configuration")
        ]  # fmt: skip
    findings = []
    if not tag.low <= reading.value <= tag.high:
        findings.append(
            Finding(worst, tag.tag, "out_of_range",
                    f"tag {tag.tag}: {reading.value:g} {tag.unit} is outside {tag.low:g} to "
                    f"{tag.high:g} {tag.unit}", "check the instrument, or low and high of the tag")
        )  # fmt: skip
    return findings + _judge_age(tag, reading, now, worst)


def _judge_age(tag: TagNode, reading: Reading, now: float, worst: Severity) -> list[Finding]:
    age_s = None if reading.source_time is None else now - reading.source_time
    if age_s is None:
        word, what = "no_timestamp", "has no source timestamp"
        step, severity = "have the server send source timestamps", Severity.WARNING
    elif tag.stale_after_s is not None and age_s > tag.stale_after_s:
        word, what = "stale", f"is {age_s:.0f} s old; it is stale after {tag.stale_after_s:g} s"
        step, severity = "check the instrument, or stale_after_s of the tag", worst
    elif age_s < -_FUTURE_TOLERANCE_S:
        word, what = "in_the_future", f"is dated {-age_s:.0f} s in the future"
        step, severity = "compare the clocks of the data source and the server", Severity.WARNING
    else:
        return []
    return [Finding(severity, tag.tag, word, f"tag {tag.tag} {what}", step)]


def _unsolved(point: OperatingPoint) -> Finding:
    return Finding(
        Severity.ERROR,
        "operating point",
        "not_solved",
        f"the operating point was not solved: {point.get('message', 'no reason given')}",
        "compare [operating_point] and [column] with the plant",
    )


def _tag_checks(tags: Sequence[TagNode], inspection: Inspection) -> tuple[TagCheck, ...]:
    rows = []
    for tag in tags:
        facts, reading = inspection.facts[tag.tag], inspection.readings.get(tag.tag)
        source_time = reading.source_time if reading else None
        known = source_time is not None and inspection.server_time is not None
        rows.append(
            TagCheck(
                tag=tag.tag,
                node=tag.node,
                found=facts.found,
                data_type=facts.data_type.name if facts.data_type else None,
                unit=tag.unit,
                server_unit=facts.unit.display_name if facts.unit else None,
                low=tag.low,
                high=tag.high,
                server_low=facts.span.low if facts.span else None,
                server_high=facts.span.high if facts.span else None,
                readable=facts.readable,
                writable=facts.writable,
                value=reading.value if reading else None,
                quality=describe_status(reading.status_code) if reading else "not read",
                age_s=(inspection.server_time or 0.0) - (source_time or 0.0) if known else None,
            )
        )
    return tuple(rows)


def _node_checks(inspection: Inspection) -> tuple[NodeCheck, ...]:
    return tuple(
        NodeCheck(
            name=name,
            node=facts.node,
            found=facts.found,
            data_type=facts.data_type.name if facts.data_type else None,
            writable=facts.writable,
        )
        for name, facts in inspection.advisory_facts.items()
    )


def _round_trip(trips_ms: Sequence[float]) -> RoundTrip:
    return RoundTrip(len(trips_ms), statistics.median(trips_ms), max(trips_ms))
