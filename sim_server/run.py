"""Runs the simulated plant: keeps its pace, publishes, and ends when it is told to.

Plant time is start + speed x monotonic wall time, shared with the runtime
through the ready line. The plant's steps are taken in slices of a few
milliseconds, so that the server goes on answering in between.
"""

from __future__ import annotations

import asyncio
import gc
import json
import os
import signal
import socket
import stat
import sys
import tempfile
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import Final, TextIO

from edgectl.clock import PlantClock
from sim_server.access import passwords_from
from sim_server.crew import Crew, CrewMode
from sim_server.faults import Drill
from sim_server.nodes import NAMESPACE
from sim_server.scoring import TruthFile
from sim_server.server import HOST, PlantServer, standard_server
from sim_server.signals import Plant
from sim_server.simulation import STEP_S, SetupError, Simulation
from sim_server.watchdog import AdviceWatchdog
from sim_server.writelog import WriteLog

PUBLISH_WALL_S: Final = 0.05
PUBLISH_PLANT_S: Final = 2.0
SLICE_WALL_S: Final = 0.01
"""The event loop is given back after so long, or after one step of the plant."""
LAG_WALL_S: Final = 1.0
"""A plant this far behind its clock is said to be late."""


@dataclass(frozen=True, slots=True)
class RunSettings:
    """What the command line says."""

    start: float
    """Plant time at the plant's start, seconds since the Unix epoch [s]."""
    speed: float
    seed: int
    crew: CrewMode
    drill: Drill
    watchdog: AdviceWatchdog
    port: int = 0
    truth: Path | None = None
    write_log: Path | None = None
    until_stdin_closes: bool = False


async def run(settings: RunSettings, plant: Plant, ready: Callable[[str], None]) -> None:
    """Serve until a signal, or until standard input closes if so asked.

    `ready` is called once with the ready line. Raises OSError: port or a file not available.
    """
    stopped = asyncio.Event()
    loop = asyncio.get_running_loop()
    for number in (signal.SIGTERM, signal.SIGINT):
        loop.add_signal_handler(number, stopped.set)
    with ExitStack() as files:
        if settings.until_stdin_closes:
            stdin = await _stop_when_closed(sys.stdin, stopped)
            files.callback(stdin.close)
        passwords, invented = passwords_from(os.environ)
        password_file = _keep(passwords, files) if invented else None
        await _serve(settings, plant, passwords, password_file, ready, stopped, files)


async def _serve(
    settings: RunSettings,
    plant: Plant,
    passwords: dict[str, str],
    password_file: Path | None,
    ready: Callable[[str], None],
    stopped: asyncio.Event,
    files: ExitStack,
) -> None:
    # A port that is taken should be said before seconds of start-up are spent.
    socket.create_server((HOST, settings.port)).close()
    truth_file = _opened(settings.truth, files)
    log_file = _opened(settings.write_log, files)
    opcua = await standard_server(passwords)
    # The standard address space never dies: without this, each full collection walks all of it
    # and the server stands still meanwhile.
    gc.collect()
    gc.freeze()
    # Anchored as late as possible: the plant should not start behind its own clock.
    clock = PlantClock(settings.start, PlantClock.real().anchor, settings.speed)
    write_log = WriteLog(log_file, lambda: (clock.plant_time(), clock.wall()))
    simulation = Simulation(
        plant,
        Crew(settings.crew, settings.seed),
        settings.drill,
        settings.watchdog,
        clock.plant_time,
        write_log,
        None if truth_file is None else TruthFile(truth_file, plant.true_values()),
    )
    server = PlantServer(
        opcua, simulation, settings.start, clock.plant_time, write_log, settings.port
    )
    await server.start()
    try:
        ready(_ready_line(settings, clock, server.endpoint, password_file))
        await _keep_pace(simulation, server, clock, stopped)
    finally:
        await server.stop()


async def _keep_pace(
    simulation: Simulation, server: PlantServer, clock: PlantClock, stopped: asyncio.Event
) -> None:
    """Step the plant along its clock, and publish at least every so often."""
    publish_s = max(PUBLISH_WALL_S, PUBLISH_PLANT_S / clock.speed)
    said_late = False
    while not stopped.is_set():
        begun = clock.wall()
        behind_s = await _catch_up(simulation, clock, begun + publish_s, stopped)
        if behind_s > LAG_WALL_S * clock.speed + STEP_S and not said_late:
            said_late = True
            sys.stderr.write(
                f"sim_server: the plant is {behind_s:.0f} plant s behind its clock at speed"
                f" {clock.speed:g}; it catches up as fast as it can, but this machine is too"
                " slow for that speed or was held up\n"
            )
        await server.follow_drill()
        await server.publish()
        remaining = begun + publish_s - clock.wall()
        try:
            async with asyncio.timeout(max(0.0, remaining)):
                await stopped.wait()
        except TimeoutError:
            continue


async def _catch_up(
    simulation: Simulation, clock: PlantClock, until_wall: float, stopped: asyncio.Event
) -> float:
    """Step up to the clock, at most until `until_wall`; the plant seconds still missing."""
    slice_end = clock.wall() + SLICE_WALL_S
    while True:
        behind_s = clock.plant_time() - clock.start - simulation.plant.time_s
        if behind_s < STEP_S or clock.wall() >= until_wall or stopped.is_set():
            return behind_s
        simulation.step()
        if clock.wall() >= slice_end:
            await asyncio.sleep(0)
            slice_end = clock.wall() + SLICE_WALL_S


def _ready_line(
    settings: RunSettings, clock: PlantClock, endpoint: str, password_file: Path | None
) -> str:
    """All that a parent needs to join: where, in which plant time, with which files."""

    def absolute(path: Path | None) -> str | None:
        return None if path is None else str(path.resolve())

    return json.dumps(
        {
            "ready": True,
            "endpoint": endpoint,
            "namespace": NAMESPACE,
            "plant_start": clock.start,
            "anchor": clock.anchor,
            "speed": clock.speed,
            "seed": settings.seed,
            "crew": settings.crew,
            "drill": settings.drill.name,
            "truth": absolute(settings.truth),
            "write_log": absolute(settings.write_log),
            "passwords": absolute(password_file),
            "pid": os.getpid(),
        }
    )


def _opened(path: Path | None, files: ExitStack) -> TextIO | None:
    return (
        None if path is None else files.enter_context(path.open("w", encoding="utf-8", newline=""))
    )


def _keep(passwords: dict[str, str], files: ExitStack) -> Path:
    """Put invented passwords into a file that only this user can read, gone at the end."""
    handle, name = tempfile.mkstemp(prefix="edgectl-sim-", suffix=".json")  # 0600 by definition
    path = Path(name)
    files.callback(path.unlink, missing_ok=True)
    with os.fdopen(handle, "w", encoding="utf-8") as file:
        json.dump(passwords, file)
    return path


async def _stop_when_closed(stdin: TextIO, stopped: asyncio.Event) -> asyncio.BaseTransport:
    """End with the parent: its death closes our standard input, however it died."""
    mode = os.fstat(stdin.fileno()).st_mode
    if not (stat.S_ISFIFO(mode) or stat.S_ISSOCK(mode) or stdin.isatty()):
        raise SetupError("--until-stdin-closes: standard input is not a pipe, so it never closes")

    class Watch(asyncio.Protocol):
        def connection_lost(self, exc: Exception | None) -> None:
            stopped.set()

    transport, _ = await asyncio.get_running_loop().connect_read_pipe(Watch, stdin)
    return transport
