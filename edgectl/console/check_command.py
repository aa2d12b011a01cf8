"""`edgectl check`: the check, its table, its JSON."""

from __future__ import annotations

import asyncio
import os
from pathlib import Path

from rich.console import Console

from edgectl.clock import PlantClock
from edgectl.console.check import CheckResult, OperatingPoint, run_check
from edgectl.console.check_view import CheckView
from edgectl.console.endings import SiteFileWrongError, load_site_or_end, write_json
from edgectl.runtime.password import PasswordError, password_of
from edgectl.settings import Site
from edgectl.worker.handle import WatchedSolver, WorkerUnavailableError
from edgectl.worker.messages import Setup

SCHEMA = "edgectl.check/1"
SOLVE_S = 120.0


def check_command(path: Path, json_target: str | None, no_color: bool) -> int:
    site = load_site_or_end(path)
    try:
        password = password_of(site.server, os.environ)
    except PasswordError as error:
        raise SiteFileWrongError(str(error)) from error
    result = asyncio.run(_check(site, password))
    Console(stderr=json_target == "-", no_color=no_color or None).print(CheckView(result))
    write_json(json_target, {**result.to_json(), "schema": SCHEMA})
    return result.exit_code


async def _check(site: Site, password: str | None) -> CheckResult:
    solver = WatchedSolver(Setup(site.as_dict()))
    solver.start()
    try:

        async def operating_point() -> OperatingPoint:
            try:
                point = await solver.job("operating_point", {}, SOLVE_S)
            except WorkerUnavailableError as error:
                return {"converged": False, "message": str(error)}
            return point if isinstance(point, dict) else {"converged": False, "message": "none"}

        return await run_check(site, password, PlantClock.real(), operating_point)
    finally:
        await solver.close()
