"""The command `edgectl`: one function for each command, its work in a module of its own.

Modules are imported inside the functions, so that `edgectl --help` is quick.
"""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

import click

Function = TypeVar("Function", bound=Callable[..., Any])

FILE = click.Path(path_type=Path, exists=True, dir_okay=False)
NEW_FILE = click.Path(path_type=Path, dir_okay=False)
FOLDER = click.Path(path_type=Path, file_okay=False)


class Instant(click.ParamType[float]):
    """An ISO 8601 time; UTC unless it says otherwise. Becomes seconds since the Unix epoch."""

    name = "time"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        try:
            instant = datetime.fromisoformat(str(value))
        except ValueError:
            self.fail(f"{value!r} is not a time such as 2026-01-05T06:00", param, ctx)
        return (instant if instant.tzinfo else instant.replace(tzinfo=UTC)).timestamp()


def json_option(function: Function) -> Function:
    """`--json`: the same result for programs."""
    option = click.option(
        "--json",
        "json_target",
        metavar="PATH",
        help="Write the result as JSON to this file; - is standard output.",
    )
    return option(function)


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="edgectl")
def main() -> None:
    """Advice for distillation columns, cycle after cycle. People decide.

    Exit codes: 0 done and good, 1 done with a finding, 2 wrong usage,
    75 plant not reachable, 78 site file wrong.
    """


@main.command()
@click.argument("journal", type=FILE)
@click.option("--anchor", metavar="HASH", help="A newest hash kept elsewhere: it must be in it.")
@json_option
def verify(journal: Path, anchor: str | None, json_target: str | None) -> None:
    """Check the journal's hash chain, entry by entry."""
    from edgectl.console.verify import verify_command

    raise SystemExit(verify_command(journal, anchor, json_target))


@main.command()
@click.argument("journal", type=FILE)
@click.option("--out", type=NEW_FILE, required=True, help="The page to write (HTML).")
@click.option("--from", "begin", type=Instant(), help="Only from this plant time on (ISO 8601).")
@click.option("--to", "end", type=Instant(), help="Only before this plant time (ISO 8601).")
@click.option("--csv", "table", type=NEW_FILE, help="Also write one row per cycle (CSV).")
@json_option
def report(
    journal: Path,
    out: Path,
    begin: float | None,
    end: float | None,
    table: Path | None,
    json_target: str | None,
) -> None:
    """Make one self-contained page from the journal alone."""
    from edgectl.console.report_command import report_command

    raise SystemExit(report_command(journal, out, begin, end, table, json_target))
