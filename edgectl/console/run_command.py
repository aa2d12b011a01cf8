"""`edgectl run`: the production command."""

from __future__ import annotations

import asyncio
import os
import signal
import sys
from pathlib import Path

from edgectl.clock import PlantClock
from edgectl.console.cautions import CAUTIONS
from edgectl.console.endings import (
    EndedError,
    Exit,
    FoundError,
    SiteFileWrongError,
    load_site_or_end,
    write_json,
)
from edgectl.console.figures import summary
from edgectl.console.history import read_history
from edgectl.console.logs import log_to_stderr
from edgectl.console.rehearsal import OrderError, rehearse
from edgectl.journal.database import JournalUnusableError
from edgectl.journal.lock import JournalLockedError
from edgectl.ports import PortError
from edgectl.runtime.notify import ServiceNotifier
from edgectl.runtime.password import PasswordError, password_of
from edgectl.runtime.startup import RunOrder, run_site
from edgectl.settings import Site
from edgectl.worker.handle import WatchedSolver
from edgectl.worker.messages import Setup

SCHEMA = "edgectl.run/1"
JOURNAL_FILE = "journal.sqlite"


def run_command(
    path: Path, folder: Path, cycles: int | None, rehearsal: bool, json_target: str | None
) -> int:
    site = load_site_or_end(path)
    try:
        password = password_of(site.server, os.environ)
    except PasswordError as error:
        raise SiteFileWrongError(str(error)) from error
    journal = folder / JOURNAL_FILE
    log_to_stderr()
    for caution in CAUTIONS:
        sys.stderr.write(f"{caution}\n")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        asyncio.run(_run(site, password, journal, cycles, rehearsal))
    except OSError as error:
        raise EndedError(f"{folder}: {error.strerror}") from error
    except (JournalLockedError, JournalUnusableError) as error:
        raise SiteFileWrongError(str(error)) from error
    except (PortError, OrderError) as error:
        raise FoundError(str(error)) from error
    if json_target is not None:
        figures = summary(read_history(journal))
        write_json(json_target, {"schema": SCHEMA, "journal": str(journal), **figures})
    return Exit.DONE


async def _run(
    site: Site, password: str | None, journal: Path, cycles: int | None, rehearsal: bool
) -> None:
    stop, loop = asyncio.Event(), asyncio.get_running_loop()
    for number in (signal.SIGINT, signal.SIGTERM):
        loop.add_signal_handler(number, stop.set)
    if rehearsal:
        await rehearse(site, password, journal, stop)
        return
    solver = WatchedSolver(Setup(site.as_dict()))
    solver.start()
    try:
        order = RunOrder(site, password, journal, PlantClock.real(), cycles)
        await run_site(order, solver, stop, ServiceNotifier(os.environ))
    finally:
        await solver.close()
