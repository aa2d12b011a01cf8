"""How fast a rehearsal may run on this machine: measured, not guessed."""

from __future__ import annotations

import asyncio
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import Seen, validate
from edgectl.ports import PortError
from edgectl.records.entries import Json
from edgectl.records.plan import EMPTY_MEMORY, Plan, PlanRequest
from edgectl.records.readings import Reading, TagSnapshot
from edgectl.settings import Site
from edgectl.settings.tags import Role
from edgectl.worker.handle import WatchedSolver

SOLVES: Final = 6
SOLVE_LIMIT_S: Final = 60.0
MARGIN: Final = 2.0
BUDGET_SHARE: Final = 0.8
"""Of the wall period: what the loop enforces at most."""
FASTEST: Final = 60.0
"""The plant and the rest of a cycle need their time too: half a second of wall per 30 s."""
USUAL_HOURS: Final = 1.0
STEPS: Final = (1.0, 1.0, 1.02, 1.045, 1.065, 1.08)
"""Feed relative to the operating point, cycle by cycle: the default story's largest step at the
pace at which it comes."""


class PaceError(PortError):
    """The measuring solves came to nothing; the message says why."""


@dataclass(frozen=True, slots=True)
class Pace:
    """How fast and how long."""

    speed: float
    cycles: int
    period_s: float
    remark: str = ""
    """Why it is not what was usual; empty when it is."""

    @property
    def plant_s(self) -> float:
        return self.cycles * self.period_s


def pace_for(
    slowest_ms: float | None,
    period_s: float,
    wall_s: float,
    hours: float | None = None,
    speed: float | None = None,
) -> Pace:
    """The largest speed that leaves a twofold margin on the slowest measured solve.

    Parameters
    ----------
    slowest_ms : float or None
        Slowest measured solve [ms]; None when `speed` is given.
    period_s : float
        Plant seconds from one cycle to the next [s].
    wall_s : float
        Wall time that is left for the cycles, unless the person says how many hours [s].
    hours, speed : float or None
        What the person asked for; None leaves it to us [h], [-].
    """
    chosen = speed
    if chosen is None:
        assert slowest_ms is not None
        safe = BUDGET_SHARE * period_s / (MARGIN * slowest_ms / 1e3)
        # Whole numbers read better, and rounding down keeps the margin.
        chosen = min(FASTEST, float(math.floor(safe)) if safe > 1.0 else safe)
    usual = round(USUAL_HOURS * 3600.0 / period_s)
    wanted = usual if hours is None else round(hours * 3600.0 / period_s)
    fitting = int(wall_s * chosen / period_s)
    if hours is not None or fitting >= wanted:
        return Pace(chosen, max(1, wanted), period_s)
    cycles = max(1, fitting)
    remark = (
        f"Faster would be too close to this machine's slowest solve, and at this speed"
        f" {cycles * period_s / 60.0:.0f} of the usual {60.0 * USUAL_HOURS:.0f} minutes fit into"
        f" two minutes. --hours {USUAL_HOURS:g} runs the whole hour."
    )
    return Pace(chosen, cycles, period_s, remark)


async def measured_solves_ms(
    solver: WatchedSolver, site: Site, policies: Policies, solves: int = SOLVES
) -> list[float]:
    """Wall time of a few cycles like those to come, memory carried on [ms].

    Raises PaceError, WorkerUnavailableError.
    """
    point = await solver.job("operating_point", {}, SOLVE_LIMIT_S)
    if not isinstance(point, dict):
        raise PaceError("the solver did not say where the column usually runs")
    loop = asyncio.get_running_loop()
    memory, seen, found = EMPTY_MEMORY, Seen(), []
    for cycle in range(solves):
        at = cycle * site.cycle.period_s
        valid = validate(_snapshot(site, point, cycle, at), seen, policies)
        seen = valid.seen
        request = PlanRequest(
            request_id=f"pace-{cycle}",
            cycle=cycle,
            made_at=at,
            elapsed_s=site.cycle.period_s if cycle else 0.0,
            soft_deadline_s=SOLVE_LIMIT_S,
            measurements=tuple(valid.measurements.values.values()),
            positions=tuple(valid.measurements.positions.values()),
            limits=valid.limits,
            memory=memory,
        )
        begun = loop.time()
        answer = await solver.solve(request, begun + SOLVE_LIMIT_S)
        if not isinstance(answer, Plan):
            raise PaceError(f"a measuring solve came to nothing: {answer}")
        found.append(1e3 * (loop.time() - begun))
        memory = answer.estimate.memory
    return found


def _snapshot(site: Site, point: Mapping[str, Json], cycle: int, at: float) -> TagSnapshot:
    """Readings as they would be at the operating point, with the feed a little moved."""
    feed = STEPS[cycle % len(STEPS)]
    values = _by_role(site, point, feed)
    moves = {mv.position: mv for mv in site.mv.values()}
    modes = {mv.mode: mv.automatic_modes[0] for mv in site.mv.values()}
    readings = []
    for name, tag in site.tags.items():
        value = values.get(tag.role, 0.5 * (tag.low + tag.high))
        if tag.role is Role.TRAY_TEMPERATURE:
            value = _number(point, "loop_tray_temperature_degc")
        elif name in moves:
            value = _setpoint(moves[name].kind, point)
        elif name in modes:
            value = float(modes[name])
        elif tag.role is Role.ADVICE_SWITCH:
            value = 1.0
        readings.append(Reading(name, value, 0, at, at))
    return TagSnapshot(cycle, at, tuple(readings))


def _by_role(site: Site, point: Mapping[str, Json], feed: float) -> dict[Role, float]:
    usual = site.operating_point
    distillate = _number(point, "distillate_kg_h")
    return {
        Role.FEED_FLOW: usual.feed_kg_h * feed,
        Role.FEED_TEMPERATURE: usual.feed_temperature_degc,
        Role.REFLUX_FLOW: _number(point, "reflux_kg_h"),
        Role.DISTILLATE_FLOW: distillate,
        Role.BOTTOMS_FLOW: usual.feed_kg_h * feed - distillate,
        Role.TOP_PRESSURE: usual.drum_pressure_kpa,
        Role.DIFFERENTIAL_PRESSURE: usual.column_dp_kpa,
    }


def _setpoint(kind: str, point: Mapping[str, Json]) -> float:
    name = "reflux_kg_h" if kind == "reflux" else "loop_tray_temperature_degc"
    return _number(point, name)


def _number(point: Mapping[str, Json], name: str) -> float:
    value = point.get(name)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise PaceError(f"the operating point has no {name}")
    return float(value)
