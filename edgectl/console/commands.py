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
HOURS = click.FloatRange(0.0, 1000.0, min_open=True)
SPEED = click.FloatRange(0.0, 1000.0, min_open=True)

# The simulated plant's words; it is another process, so they are spelt here once more.
CREWS = ("follows", "late", "part", "ignores", "opposes")
DRILLS = (
    "none",
    "slow-solver",
    "bad-quality",
    "server-drop",
    "frozen-analyser",
    "loop-manual",
    "valve-limit",
    "operator-off",
)


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


def no_color_option(function: Function) -> Function:
    """`--no-color`; NO_COLOR in the environment does the same."""
    return click.option("--no-color", is_flag=True, help="No colours.")(function)


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="edgectl")
def main() -> None:
    """Advice for distillation columns, cycle after cycle. People decide.

    Exit codes: 0 done and good, 1 done with a finding, 2 wrong usage,
    75 plant not reachable, 78 site file wrong.
    """


@main.command()
@click.option("--hours", type=HOURS, help="Simulated hours (default: 1, if the machine can).")
@click.option("--speed", type=SPEED, help="Plant time per real time (default: measured).")
@click.option(
    "--crew",
    type=click.Choice(CREWS),
    default="follows",
    show_default=True,
    help="What the simulated operators do with the advice.",
)
@click.option(
    "--seed",
    type=click.IntRange(0),
    default=1,
    show_default=True,
    help="Of noise, disturbances and crew.",
)
@click.option(
    "--drill",
    type=click.Choice(DRILLS),
    default="none",
    show_default=True,
    help="A fault that happens on the way.",
)
@click.option("--keep", type=FOLDER, help="Folder for all it leaves (default: a new one in runs/).")
@no_color_option
@json_option
def demo(
    hours: float | None,
    speed: float | None,
    crew: str,
    seed: int,
    drill: str,
    keep: Path | None,
    no_color: bool,
    json_target: str | None,
) -> None:
    """Advise a simulated column, from nothing to the report.

    Starts an invented methanol/water column behind a real OPC UA server, and the
    production runtime beside it. Ends by itself and stops all it started.
    """
    from edgectl.console.demo import DemoOptions, demo_command

    options = DemoOptions(hours, speed, crew, seed, drill, keep, json_target, no_color)
    raise SystemExit(demo_command(options))


@main.command()
@click.argument("site", type=FILE)
@no_color_option
@json_option
def check(site: Path, no_color: bool, json_target: str | None) -> None:
    """Compare the plant with the site file, and solve the operating point. Writes nothing."""
    from edgectl.console.check_command import check_command

    raise SystemExit(check_command(site, json_target, no_color))


@main.command()
@click.argument("site", type=FILE)
@click.option(
    "--journal",
    type=FOLDER,
    default=Path("journal"),
    show_default=True,
    help="Folder of the journal; made if it is not there.",
)
@click.option("--cycles", type=click.IntRange(1), help="End after so many cycles.")
@click.option("--rehearsal", is_flag=True, hidden=True, help="Orders come on standard input.")
@json_option
def run(
    site: Path, journal: Path, cycles: int | None, rehearsal: bool, json_target: str | None
) -> None:
    """Advise the plant that the site file describes, until it is told to stop."""
    from edgectl.console.run_command import run_command

    raise SystemExit(run_command(site, journal, cycles, rehearsal, json_target))


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
