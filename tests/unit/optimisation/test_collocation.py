"""The reference engine: its derivatives, its optimum, its limits."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from edgectl.optimisation.planner import Planner
from edgectl.optimisation.problem import Situation, interval_moves, plan_cost
from edgectl.optimisation.rollout import roll_out


@pytest.fixture(scope="module")
def tight(planner: Planner) -> Situation:
    """Both products must become purer than they are: limits that bite."""
    nominal = planner.situations.nominal()
    return replace(
        nominal,
        cv_high=np.log([200.0, 0.30]),
        cv_setpoint=np.array([math.log(150.0), math.nan]),
    )


def held(planner: Planner, situation: Situation) -> np.ndarray:
    return np.tile(situation.positions[:, None], (1, planner._parts.goals.moves))


def test_the_plan_beats_standing_still_and_reports_its_own_cost(
    planner: Planner, tight: Situation
) -> None:
    goals, looped = planner._parts.goals, planner._parts.looped
    solution = planner._engine.solve(tight, held(planner, tight), math.inf)
    assert solution.converged
    planned = roll_out(looped, goals, tight, solution.moves)
    still = roll_out(looped, goals, tight, held(planner, tight))
    cost = plan_cost(goals, tight, solution.moves, planned.coordinates)
    assert cost == pytest.approx(solution.cost, rel=1e-3)
    assert cost < 0.8 * plan_cost(goals, tight, held(planner, tight), still.coordinates)


def test_no_nearby_moves_are_better(planner: Planner, tight: Situation) -> None:
    """A check of the optimum that shares nothing with the engine but the model."""
    goals, looped = planner._parts.goals, planner._parts.looped
    solution = planner._engine.solve(tight, held(planner, tight), math.inf)
    best = plan_cost(
        goals, tight, solution.moves, roll_out(looped, goals, tight, solution.moves).coordinates
    )
    for j, mv in enumerate(goals.mvs):
        for move in range(0, goals.moves, 2):
            for sign in (-1.0, 1.0):
                nearby = solution.moves.copy()
                nearby[j, move] += sign * 0.05 * mv.scale
                steps = np.diff(np.concatenate([[tight.positions[j]], nearby[j]]))
                if np.any(np.abs(steps) > mv.max_move):
                    continue
                path = roll_out(looped, goals, tight, nearby).coordinates
                assert plan_cost(goals, tight, nearby, path) > best - 1e-4


def test_moves_stay_inside_limits_and_pace(planner: Planner, tight: Situation) -> None:
    goals = planner._parts.goals
    low = tight.low.copy()
    high = tight.high.copy()
    high[0] = tight.positions[0] + 120.0
    limited = replace(tight, low=low, high=high)
    solution = planner._engine.solve(limited, held(planner, limited), math.inf)
    assert np.all(solution.moves <= high + 1e-6)
    steps = np.diff(np.concatenate([limited.positions[:, None], solution.moves], axis=1))
    assert np.all(np.abs(steps) <= np.array([[mv.max_move] for mv in goals.mvs]) + 1e-4)


def test_an_mv_out_of_service_is_not_moved(planner: Planner, tight: Situation) -> None:
    here = tight.positions[1]
    low, high = tight.low.copy(), tight.high.copy()
    low[1] = high[1] = here
    solution = planner._engine.solve(
        replace(tight, low=low, high=high), held(planner, tight), math.inf
    )
    assert np.all(solution.moves[1] == here)
    assert np.any(np.abs(solution.moves[0] - tight.positions[0]) > 1.0)


def test_a_passed_soft_deadline_returns_the_best_iterate_marked_so(
    planner: Planner, tight: Situation
) -> None:
    solution = planner._engine.solve(tight, held(planner, tight), 0.0)
    assert not solution.converged
    assert solution.status == "User_Requested_Stop"
    assert np.all(np.isfinite(solution.moves))


def test_gathered_derivatives_match_differences(planner: Planner, tight: Situation) -> None:
    engine = planner._engine
    solver = engine._solver
    grad_f = solver.get_function("nlp_grad_f")
    jac_g = solver.get_function("nlp_jac_g")
    function_f, function_g = solver.get_function("nlp_f"), solver.get_function("nlp_g")
    p = engine._parameters(tight)
    rollout = roll_out(engine.looped, engine.goals, tight, held(planner, tight))
    slack = engine._slacks_of(tight, rollout.coordinates)
    scaled = rollout.points / np.tile(engine.looped.scale, 2)
    scale = np.array([mv.scale for mv in engine.goals.mvs])[:, None]
    x = np.concatenate(
        [
            np.concatenate([scaled, slack], axis=1).ravel(),
            (held(planner, tight) / scale).T.ravel(),
        ]
    )
    direction = np.random.default_rng(1).standard_normal(x.size) * 1e-2 * np.maximum(x, 1e-3)
    step = 1e-5

    def difference(function: object) -> np.ndarray:
        ahead, behind = (
            np.array(function(x + s * step * direction, p)).ravel()  # type: ignore[operator]  # a CasADi function
            for s in (1.0, -1.0)
        )
        return (ahead - behind) / (2.0 * step)

    slope = np.array(grad_f(x, p)[-1]).ravel() @ direction
    assert slope == pytest.approx(float(difference(function_f)[0]), rel=1e-5)
    predicted = np.array(jac_g(x, p)[-1] @ direction).ravel()
    assert predicted == pytest.approx(difference(function_g), rel=1e-4, abs=1e-6)


def test_interval_moves_begin_with_the_present(planner: Planner, tight: Situation) -> None:
    goals = planner._parts.goals
    moves = held(planner, tight) + np.arange(goals.moves)
    values = interval_moves(goals, tight.positions, moves)
    assert values[:, 0] == pytest.approx(tight.positions)
    assert values[0, -1] == pytest.approx(tight.positions[0] + goals.moves - 1)
