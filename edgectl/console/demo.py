"""`edgectl demo`: a simulated plant, the production runtime, and someone to watch them.

Three processes: the plant (`python -m sim_server`), the runtime (`edgectl run`
with orders on its standard input), and this one, which starts and ends the two
and looks at nothing but the journal while they run.
"""

from __future__ import annotations

import asyncio
import json
import secrets
import shutil
import signal
import socket
import sys
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib import resources
from pathlib import Path
from typing import Any, Final

from rich.console import Console

from edgectl.clock import PlantClock, utc_now
from edgectl.console.children import Child, ChildError
from edgectl.console.demo_result import demo_result
from edgectl.console.endings import EndedError, Exit, FoundError, write_json
from edgectl.console.follow import JournalFollower
from edgectl.console.live import LiveView
from edgectl.console.pace import SOLVES, Pace, pace_for
from edgectl.settings import Site, load_site

BUILD_LIMIT_S: Final = 240.0
PLANT_LIMIT_S: Final = 60.0
FOLLOW_WALL_S: Final = 0.2
DEMO_WALL_S: Final = 115.0
"""A demo that was not told how long ends within so much wall time ..."""
AROUND_WALL_S: Final = 10.0
"""... of which so much goes into starting the plant, ending everything and the report."""
SLOW_CYCLES: Final = (12, 13)
"""The slow-solver drill: two cycles in a row, so that the standby meets it too."""
DRILL_BEGINS_MIN: Final = 20.0
"""Or after a third of a shorter run."""
INTERRUPTED: Final = 130


@dataclass(frozen=True, slots=True)
class DemoOptions:
    """What the command line says."""

    hours: float | None
    speed: float | None
    crew: str
    seed: int
    drill: str
    folder: Path | None
    json_target: str | None
    no_color: bool


def demo_command(options: DemoOptions) -> int:
    console = Console(
        stderr=options.json_target == "-", no_color=options.no_color or None, highlight=False
    )
    folder = _folder(options.folder)
    try:
        return asyncio.run(_demo(options, folder, console))
    except ChildError as error:
        raise FoundError(f"{error}\nLogs are in {folder}") from error


async def _demo(options: DemoOptions, folder: Path, console: Console) -> int:
    stop, loop = asyncio.Event(), asyncio.get_running_loop()
    for number in (signal.SIGINT, signal.SIGTERM):
        loop.add_signal_handler(number, stop.set)
    stage = Stage(options, folder, console, stop)
    try:
        pace = await stage.play()
    finally:
        await stage.end()
    if pace is None or not stage.journal.exists():
        console.print(f"Stopped before the first cycle. What there is: {folder}")
        return INTERRUPTED
    result = await demo_result(stage.site, folder, options, pace)
    result.print_to(console)
    write_json(options.json_target, result.content)
    if stop.is_set():
        return INTERRUPTED
    return Exit.DONE if result.good else Exit.FINDING


class Stage:
    """The two processes, the folder with all they leave, and the view."""

    def __init__(
        self, options: DemoOptions, folder: Path, console: Console, stop: asyncio.Event
    ) -> None:
        self._options, self._console, self._stop = options, console, stop
        self._folder = folder
        self._children: list[Child] = []
        self._passwords = {
            f"EDGECTL_SIM_{user}_PASSWORD": secrets.token_urlsafe(18)
            for user in ("BOARD", "ADVISOR")
        }
        self.journal = folder / "journal.sqlite"
        self._begun = PlantClock.real().wall()
        self._port = _free_port()
        self.site = _write_site(folder / "site.toml", self._port)

    async def play(self) -> Pace | None:
        """From nothing to the last cycle. None when it was stopped before the first one."""
        with LiveView(self._console) as view:
            view.stage("Building the column model and measuring a few solves.")
            runtime = await self._start_runtime()
            ready = await self._unless_stopped(runtime.first_line(BUILD_LIMIT_S))
            if ready is None:
                return None
            pace = self._pace(json.loads(ready)["solve_ms"])
            view.stage(
                f"Starting the plant at {pace.speed:g} times real time, for"
                f" {pace.plant_s / 60:.0f} simulated minutes. {pace.remark}".strip()
            )
            plant = await self._start_plant(pace)
            line = await self._unless_stopped(plant.first_line(PLANT_LIMIT_S))
            if line is None:
                return None
            clock = json.loads(line)
            order = {name: clock[name] for name in ("plant_start", "anchor", "speed")}
            await runtime.write_line(json.dumps({**order, "cycles": pace.cycles}))
            await self._watch(view, runtime, plant, clock["plant_start"], pace)
        return pace

    async def end(self) -> None:
        """The runtime first: it withdraws its advice at a plant that still answers."""
        for child in self._children:
            await child.end()

    async def _watch(
        self, view: LiveView, runtime: Child, plant: Child, begin: float, pace: Pace
    ) -> None:
        with JournalFollower(self.journal) as follower:
            view.run(pace.plant_s)
            while not self._stop.is_set() and runtime.exit_code is None:
                follower.show_new(view)
                if plant.exit_code is not None:
                    raise ChildError(f"the plant ended: {plant.last_words()}")
                await self._pause()
            if not self._stop.is_set() and runtime.exit_code != 0:
                raise ChildError(
                    f"the runtime ended with code {runtime.exit_code}: {runtime.last_words()}"
                )
            await runtime.end()
            follower.show_new(view)

    async def _pause(self) -> None:
        try:
            async with asyncio.timeout(FOLLOW_WALL_S):
                await self._stop.wait()
        except TimeoutError:
            return

    async def _unless_stopped(self, awaitable: Any) -> Any:
        """The result, or None as soon as the person wants to stop."""
        async with asyncio.TaskGroup() as tasks:
            work = tasks.create_task(awaitable)
            stopped = tasks.create_task(self._stop.wait())
            await asyncio.wait((work, stopped), return_when=asyncio.FIRST_COMPLETED)
            stopped.cancel()
            if not work.done():
                work.cancel()
                return None
        return work.result()

    def _pace(self, solves_ms: list[float]) -> Pace:
        # The first solve starts from nothing; every later one starts from the one before.
        slowest = max(solves_ms[1:]) if solves_ms else None
        spent_s = PlantClock.real().wall() - self._begun
        return pace_for(
            slowest,
            self.site.cycle.period_s,
            DEMO_WALL_S - spent_s - AROUND_WALL_S,
            self._options.hours,
            self._options.speed,
        )

    async def _start_runtime(self) -> Child:
        command = ("-m", "edgectl.console", "run", str(self._folder / "site.toml"))
        child = await self._start(
            "runtime", *command, "--journal", str(self._folder), "--rehearsal"
        )
        measure = SOLVES if self._options.speed is None else 0
        slow = SLOW_CYCLES if self._options.drill == "slow-solver" else None
        await child.write_line(json.dumps({"measure": measure, "slow_cycles": slow}))
        return child

    async def _start_plant(self, pace: Pace) -> Child:
        drill_at = min(DRILL_BEGINS_MIN, pace.plant_s / 60.0 / 3.0)
        options = {
            "--port": self._port,
            "--speed": pace.speed,
            "--seed": self._options.seed,
            "--crew": self._options.crew,
            "--drill": self._options.drill,
            "--drill-at": drill_at,
            "--truth": self._folder / "truth.csv",
            "--write-log": self._folder / "writes.jsonl",
        }
        words = [str(word) for pair in options.items() for word in pair]
        return await self._start("plant", "-m", "sim_server", *words, "--until-stdin-closes")

    async def _start(self, name: str, *arguments: str) -> Child:
        environment = {**self._passwords, "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
        child = await Child.start(
            f"the {name}", (sys.executable, *arguments), environment, self._folder / f"{name}.log"
        )
        self._children.append(child)
        return child


def example_site_text() -> str:
    """The example site file; the same one as in deploy/examples."""
    return resources.files("edgectl.console").joinpath("example_site.toml").read_text("utf-8")


def _write_site(path: Path, port: int) -> Site:
    """The example with this run's endpoint, written down and read back."""
    text = example_site_text()
    endpoint = 'endpoint = "opc.tcp://127.0.0.1:48400/"'
    if endpoint not in text:
        raise RuntimeError("the example site file names another endpoint than this line expects")
    path.write_text(text.replace(endpoint, f'endpoint = "opc.tcp://127.0.0.1:{port}/"'), "utf-8")
    return load_site(path)


def _free_port() -> int:
    """A port that is free now; the plant takes it a few seconds later."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


def _folder(wanted: Path | None) -> Path:
    """An empty folder for all that the demo leaves. Raises EndedError."""
    stamp = datetime.fromtimestamp(utc_now(), UTC).strftime("%Y%m%d-%H%M%S")
    folder = wanted or Path("runs") / f"demo-{stamp}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        if any(folder.iterdir()):
            raise EndedError(f"{folder} is not empty: give a new folder with --keep")
        if shutil.disk_usage(folder).free < 200 * 1024 * 1024:
            raise EndedError(f"{folder}: less than 200 MB free")
    except OSError as error:
        raise EndedError(f"cannot use {folder}: {error.strerror}") from error
    return folder.resolve()
