"""How a check looks on a terminal: the verdict, a table, what to do next."""

from __future__ import annotations

from collections.abc import Iterable

from rich.console import Console, ConsoleOptions, RenderResult
from rich.table import Table
from rich.text import Text

from edgectl.console.check import CheckResult, TagCheck
from edgectl.opcua.fit import Finding, Severity

_STYLES = {Severity.ERROR: "bold", Severity.WARNING: ""}


class CheckView:
    """A rich renderable; width and colour are the console's business."""

    def __init__(self, result: CheckResult) -> None:
        self._result = result

    def __rich_console__(self, console: Console, options: ConsoleOptions) -> RenderResult:
        result = self._result
        yield Text(f"{result.site}: {_verdict(result)}", style="bold")
        yield Text(_connection(result))
        if result.tags:
            yield _table(result)
        if result.advisory:
            yield Text(_advisory(result))
        if result.operating_point is not None:
            yield Text(_operating_point(result))
        for finding in _errors_first(result.findings):
            yield Text(f"{finding.severity}: {_with_remedy(finding)}", _STYLES[finding.severity])
        yield Text(f"Next: {result.next_step}", style="bold")


def _verdict(result: CheckResult) -> str:
    errors = sum(finding.severity is Severity.ERROR for finding in result.findings)
    warnings = len(result.findings) - errors
    verdict = "as the site file says" if result.ok else "not as the site file says"
    return f"{verdict} (errors: {errors}, warnings: {warnings})"


def _connection(result: CheckResult) -> str:
    who = f"user {result.user}" if result.user else "anonymous"
    line = f"{result.endpoint}, security {result.security}, {who}"
    if not result.connected or result.round_trip_ms is None:
        return f"{line}: no session"
    trip = result.round_trip_ms
    line += f"; {trip.reads} reads of all tags: median {trip.median:.1f} ms, max {trip.max:.1f} ms"
    if result.clock_offset_s is not None:
        line += f"; server's clock {result.clock_offset_s:+.1f} s to ours"
    return line


def _table(result: CheckResult) -> Table:
    table = Table(title="Tags", title_justify="left")
    for heading in ("tag", "value", "unit", "quality", "age", "server's range", "findings"):
        right = heading in ("value", "age")
        table.add_column(heading, justify="right" if right else "left", overflow="fold")
    for tag in result.tags:
        words = [finding.word for finding in result.findings if finding.subject == tag.tag]
        table.add_row(
            tag.tag,
            "-" if tag.value is None else f"{tag.value:.6g}",
            _unit(tag),
            tag.quality,
            "-" if tag.age_s is None else f"{tag.age_s:.0f} s",
            "-" if tag.server_low is None else f"{tag.server_low:g} to {tag.server_high:g}",
            ", ".join(words),
        )
    return table


def _unit(tag: TagCheck) -> str:
    given = tag.server_unit
    return tag.unit if given in (None, tag.unit) else f"{tag.unit} (server: {given})"


def _advisory(result: CheckResult) -> str:
    found = sum(node.found for node in result.advisory)
    writable = sum(node.writable is True for node in result.advisory)
    count = len(result.advisory)
    return (
        f"Advisory nodes: {count} named, {found} found, {writable} writable; nothing was written."
    )


def _operating_point(result: CheckResult) -> str:
    point = result.operating_point or {}
    state = "solved" if point.get("converged") is True else "not solved"
    took = point.get("ms")
    time = f" in {took:.0f} ms" if isinstance(took, int | float) else ""
    message = point.get("message")
    return f"Operating point: {state}{time}" + (f" ({message})" if message else "")


def _with_remedy(finding: Finding) -> str:
    told = finding.sentence.endswith(finding.next_step)
    return finding.sentence if told else f"{finding.sentence}; {finding.next_step}"


def _errors_first(findings: Iterable[Finding]) -> list[Finding]:
    return sorted(findings, key=lambda finding: finding.severity is not Severity.ERROR)
