"""The worker's brain: a request in, an estimate and a plan out.

A pure function of its request: what it remembers travels in the request's
memory, what it caches is built from the site file alone.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from edgectl.column.layout import molar_mass
from edgectl.estimation.dynamics import StepFailedError
from edgectl.estimation.estimator import Belief, MissingInputError
from edgectl.estimation.outputs import KELVIN
from edgectl.optimisation.collocation import CollocationEngine
from edgectl.optimisation.from_site import site_model, steady_from_site
from edgectl.optimisation.problem import Engine, Situation, Solution, plan_cost
from edgectl.optimisation.rollout import Rollout, roll_out
from edgectl.optimisation.situations import Situations
from edgectl.records.encoding import dumps
from edgectl.records.entries import Json
from edgectl.records.plan import (
    CvPrediction,
    Estimate,
    NoPlan,
    Plan,
    PlannedMove,
    PlanRequest,
    SolverStatistics,
)

Vector = NDArray[np.float64]

ROUNDING_SLACK = 1e-9
GIVES_WAY = 0.02
"""Excess over a planned limit, in the planning coordinate, that counts as giving way."""
ROLLOUTS_AFTERWARDS = 4.0
"""Rollouts after the solve (with the moves, each alone), and one to spare."""
SETTLED_MIN = 20.0
"""Predictions earlier than this show the past, not the plan."""


class Planner:
    """Estimates and plans for one site.

    Parameters
    ----------
    site : mapping
        The validated site file's tables.
    wall : callable
        Monotonic seconds, for the statistics and the soft deadline.

    Raises
    ------
    NoSteadyStateError
        The operating point cannot be solved.
    """

    def __init__(self, site: Mapping[str, Any], wall: Callable[[], float]) -> None:
        self._wall = wall
        self._site = site
        self._increments = [mv["increment"] for mv in site["mv"].values()]
        begun = wall()
        self.steady = steady_from_site(site)
        self._steady_ms = 1e3 * (wall() - begun)
        self._parts = site_model(site, self.steady)
        self.situations = Situations(self._parts, self._increments)
        self._engine: Engine = CollocationEngine(
            self._parts.looped, self._parts.goals, site["planning"]["max_iterations"], wall
        )
        self.model_hash = _model_hash(site)

    @property
    def engine(self) -> str:
        return self._engine.name

    def warm_up(self) -> None:
        """Solve once at the operating point, so that the first real answer is not the slow one."""
        situation = self.situations.nominal()
        self._engine.solve(situation, self._held(situation), math.inf)

    def answer(self, request: PlanRequest) -> Plan | NoPlan:
        """Estimate, plan, round, and predict with and without the rounded moves."""
        begun = self._wall()
        try:
            belief = self._parts.estimator.estimate(request)
        except (MissingInputError, StepFailedError, KeyError, ValueError) as error:
            return NoPlan(request.request_id, "no_estimate", str(error), None, None)
        estimated = self._wall()
        try:
            situation, guess = self.situations.of(request, belief)
            without = self._rolled_out(situation, self._held(situation), None)
            # What one rollout took tells what those after the solve will take.
            rolled_out = self._wall()
            kept_back_s = ROLLOUTS_AFTERWARDS * (rolled_out - estimated)
            left_s = request.soft_deadline_s - (rolled_out - begun) - kept_back_s
            solution = self._engine.solve(situation, guess, left_s)
            return self._plan(request, belief, situation, solution, without, begun, estimated)
        except (MissingInputError, StepFailedError) as error:
            return NoPlan(request.request_id, "no_plan", str(error), None, belief.estimate)

    def job(self, name: str, arguments: Mapping[str, Json]) -> Json:
        """Answer a side question: `operating_point` is the solved steady state."""
        if name != "operating_point":
            raise ValueError(f"unknown job {name!r}; known: operating_point")
        steady, column = self.steady, self.steady.model.column
        return {
            "converged": True,
            "message": f"solved in {steady.iterations} Newton steps",
            "residual": steady.residual,
            "solve_ms": round(self._steady_ms, 1),
            "reflux_kg_h": steady.inputs.reflux_kmol_h * molar_mass(steady.states[0].light, column),
            "reboiler_duty_kw": steady.inputs.duty_kw,
            "distillate_kg_h": steady.distillate_kmol_h
            * molar_mass(steady.states[0].light, column),
            "bottoms_temperature_degc": steady.states[-1].temp_k - KELVIN,
            "loop_tray_temperature_degc": steady.states[self._parts.loop.stage].temp_k - KELVIN,
        }

    def _plan(
        self,
        request: PlanRequest,
        belief: Belief,
        situation: Situation,
        solution: Solution,
        without: Rollout,
        begun: float,
        estimated: float,
    ) -> Plan | NoPlan:
        goals = self._parts.goals
        if not np.all(np.isfinite(solution.moves)):
            statistics = self._statistics(solution, begun, estimated)
            sentence = "the engine returned moves that are not numbers"
            return NoPlan(request.request_id, "no_plan", sentence, statistics, belief.estimate)
        rounded = self._rounded(situation, solution.moves)
        held = self._held(situation)
        # Only a converged trajectory is a good guess; a stopped one may be anywhere.
        near = solution.points if solution.converged else without.points
        with_moves = self._rolled_out(situation, rounded, near)
        alone = {}
        for j, mv in enumerate(goals.mvs):
            only = held.copy()
            only[j] = rounded[j]
            alone[mv.name] = self._rolled_out(situation, only, with_moves.points)
        return Plan(
            request_id=request.request_id,
            cycle=request.cycle,
            estimate=self._with_memory(belief.estimate, rounded),
            times_min=tuple(float(v) for v in np.cumsum(goals.grid_h) * 60.0),
            moves=self._planned_moves(situation, rounded),
            predictions=self._predictions(situation, with_moves, without, alone),
            cost_with=plan_cost(goals, situation, rounded, with_moves.coordinates),
            cost_without=plan_cost(goals, situation, held, without.coordinates),
            gives_way=self._gives_way(situation, with_moves),
            statistics=self._statistics(solution, begun, estimated),
        )

    def _held(self, situation: Situation) -> Vector:
        """Every move repeats the present position."""
        return np.tile(situation.positions[:, None], (1, self._parts.goals.moves))

    def _rolled_out(self, situation: Situation, moves: Vector, near: Vector | None) -> Rollout:
        return roll_out(self._parts.looped, self._parts.goals, situation, moves, near)

    def _rounded(self, situation: Situation, moves: Vector) -> Vector:
        """The first move rounded to what an operator can enter; the rest as planned."""
        rounded = moves.copy()
        for j, (mv, increment) in enumerate(
            zip(self._parts.goals.mvs, self._increments, strict=True)
        ):
            here = situation.positions[j]
            step = moves[j, 0] - here
            target = round(moves[j, 0] / increment) * increment
            low = max(situation.low[j, 0], here - mv.max_move)
            high = min(situation.high[j, 0], here + mv.max_move)
            if target > high + ROUNDING_SLACK:
                target = math.floor(high / increment + ROUNDING_SLACK) * increment
            if target < low - ROUNDING_SLACK:
                target = math.ceil(low / increment - ROUNDING_SLACK) * increment
            # A move smaller than what can be entered is no move.
            no_move = abs(step) < increment / 2.0 or not low <= target <= high
            rounded[j, 0] = here if no_move else round(target, 9)
        return rounded

    def _planned_moves(self, situation: Situation, moves: Vector) -> tuple[PlannedMove, ...]:
        goals = self._parts.goals
        planned = []
        for j, mv in enumerate(goals.mvs):
            here, row = float(situation.positions[j]), moves[j]
            farthest = row[int(np.argmax(np.abs(row[:3] - here)))]
            blocks = [goals.block(k) for k in range(goals.intervals)]
            planned.append(
                PlannedMove(
                    mv=mv.name,
                    position=here,
                    first=float(row[0]),
                    destination=float(farthest),
                    path=tuple(here if b < 0 else float(row[b]) for b in blocks),
                )
            )
        return tuple(planned)

    def _predictions(
        self,
        situation: Situation,
        with_moves: Rollout,
        without: Rollout,
        alone: Mapping[str, Rollout],
    ) -> tuple[CvPrediction, ...]:
        predictions = []
        for i, cv in enumerate(self._parts.goals.cvs):

            def path(rollout: Rollout, i: int = i) -> tuple[float, ...]:
                output = self._parts.goals.cvs[i].output
                return tuple(
                    output.to_unit(float(c + situation.bias[i])) for c in rollout.coordinates[i]
                )

            predictions.append(
                CvPrediction(
                    cv=cv.output.name,
                    with_moves=path(with_moves),
                    without_moves=path(without),
                    taken_alone={name: path(rollout) for name, rollout in alone.items()},
                )
            )
        return tuple(predictions)

    def _gives_way(self, situation: Situation, rollout: Rollout) -> tuple[str, ...]:
        """CVs whose planned limits the plan still breaks once it has had time to act."""
        late = np.cumsum(self._parts.goals.grid_h) * 60.0 > SETTLED_MIN
        names = []
        for i, cv in enumerate(self._parts.goals.cvs):
            path = rollout.coordinates[i][late] + situation.bias[i]
            beyond = np.any(path > situation.cv_high[i] + GIVES_WAY) or np.any(
                path < situation.cv_low[i] - GIVES_WAY
            )
            if beyond and situation.in_service[i]:
                names.append(cv.output.name)
        return tuple(names)

    def _with_memory(self, estimate: Estimate, moves: Vector) -> Estimate:
        memory = dict(estimate.memory)
        memory["moves"] = tuple(float(v) for v in moves.ravel())
        return replace(estimate, memory=memory)

    def _statistics(self, solution: Solution, begun: float, estimated: float) -> SolverStatistics:
        now = self._wall()
        return SolverStatistics(
            engine=self._engine.name,
            status=solution.status,
            converged=solution.converged,
            iterations=solution.iterations,
            estimate_ms=1e3 * (estimated - begun),
            plan_ms=1e3 * (now - estimated),
            total_ms=1e3 * (now - begun),
        )


def _model_hash(site: Mapping[str, Any]) -> str:
    """Of all that gives the memory's numbers their meaning; limits and prices are not in it."""
    meaning: dict[str, Any] = {
        key: site[key] for key in ("column", "operating_point", "estimation", "planning")
    }
    meaning["cv"] = {
        name: [cv["kind"], cv["unit"], cv["coordinate"], cv["measured"]]
        for name, cv in site["cv"].items()
    }
    meaning["mv"] = {
        name: [mv["kind"], mv["unit"], mv.get("loop")] for name, mv in site["mv"].items()
    }
    return hashlib.sha256(dumps(meaning)).hexdigest()


def build_brain(site: Mapping[str, Any], wall: Callable[[], float]) -> Planner:
    """The planner of a validated site file; the worker's entry point."""
    return Planner(site, wall)
