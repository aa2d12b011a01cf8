"""The command `python -m sim_server`."""

from __future__ import annotations

import argparse
import asyncio
import logging
import math
import sys
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Final

from edgectl.clock import utc_now
from sim_server.crew import CrewMode
from sim_server.faults import BEGIN_S, Drill, DrillName
from sim_server.plant import SimulatedPlant
from sim_server.run import RunSettings, run
from sim_server.simulation import SetupError
from sim_server.watchdog import ADVISORY_PERIOD_S, AdviceWatchdog

WRONG_USAGE: Final = 2


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the simulated plant until it is told to stop; the exit code."""
    options = _parser().parse_args(arguments)
    _quieten("asyncua")
    drill = Drill(
        DrillName(options.drill),
        options.drill_at * 60.0,
        None if options.drill_for is None else options.drill_for * 60.0,
    )
    settings = RunSettings(
        start=utc_now() if options.start is None else options.start.timestamp(),
        speed=options.speed,
        seed=options.seed,
        crew=CrewMode(options.crew),
        drill=drill,
        watchdog=AdviceWatchdog(period_s=options.advisory_period),
        port=options.port,
        truth=options.truth,
        write_log=options.write_log,
        until_stdin_closes=options.until_stdin_closes,
    )
    try:
        plant = SimulatedPlant(options.seed, story=options.story)
        asyncio.run(run(settings, plant, _say))
    except (OSError, SetupError) as error:
        sys.stderr.write(f"sim_server: {error}\n")
        return WRONG_USAGE
    return 0


def _quieten(library: str) -> None:
    """Let a library report its own faults (tracebacks) and nothing that clients do wrong."""
    handler = logging.StreamHandler()
    handler.addFilter(lambda record: record.exc_info is not None)
    logger = logging.getLogger(library)
    logger.handlers = [handler]
    logger.propagate = False


def _say(line: str) -> None:
    sys.stdout.write(line + "\n")
    sys.stdout.flush()


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="python -m sim_server",
        description="Simulated methanol/water column C-2101 (invented) behind an OPC UA server"
        " on the loopback interface. Prints one ready line (JSON) when it answers. Passwords of"
        " users board and advisor: EDGECTL_SIM_BOARD_PASSWORD, EDGECTL_SIM_ADVISOR_PASSWORD, or"
        " invented and kept in a file that the ready line names.",
    )
    add = parser.add_argument
    add("--plant", choices=["methanol_water"], default="methanol_water")
    add("--port", type=_port, default=0, help="0 takes a free one (default)")
    add("--speed", type=_positive, default=1.0, help="plant seconds per wall second")
    add("--seed", type=_seed, default=1, help="of noise, disturbances and crew")
    add("--crew", choices=[mode.value for mode in CrewMode], default=CrewMode.IGNORES.value)
    add("--story", choices=["default", "calm"], default="default", help="disturbances")
    add("--drill", choices=[name.value for name in DrillName], default=DrillName.NONE.value)
    add("--drill-at", type=_minutes, default=BEGIN_S / 60.0, metavar="MIN", help="plant minutes")
    add("--drill-for", type=_minutes, metavar="MIN", help="default: the drill's own length")
    add("--start", type=_instant, metavar="ISO-8601", help="plant time at the start (default: now)")
    add(
        "--advisory-period",
        type=_positive,
        default=ADVISORY_PERIOD_S,
        metavar="S",
        help="plant seconds between heartbeats; three missed ones make advice unusable",
    )
    add("--truth", type=Path, metavar="FILE.csv", help="true values, for scoring")
    add("--write-log", type=Path, metavar="FILE.jsonl", help="every accepted and refused write")
    add("--until-stdin-closes", action="store_true", help="end when the parent does")
    return parser


def _port(text: str) -> int:
    port = int(text)
    if not 0 <= port <= 65535:
        raise argparse.ArgumentTypeError(f"{port} is not a port: 0 to 65535")
    return port


def _seed(text: str) -> int:
    seed = int(text)
    if seed < 0:
        raise argparse.ArgumentTypeError(f"{seed} is below zero")
    return seed


def _positive(text: str) -> float:
    value = float(text)
    if not (math.isfinite(value) and value > 0.0):
        raise argparse.ArgumentTypeError(f"{text} is not a number above zero")
    return value


def _minutes(text: str) -> float:
    value = float(text)
    if not (math.isfinite(value) and value >= 0.0):
        raise argparse.ArgumentTypeError(f"{text} is not a number of minutes")
    return value


def _instant(text: str) -> datetime:
    """An ISO 8601 time; UTC unless it says otherwise."""
    instant = datetime.fromisoformat(text)
    return instant if instant.tzinfo is not None else instant.replace(tzinfo=UTC)


if __name__ == "__main__":
    sys.exit(main())
