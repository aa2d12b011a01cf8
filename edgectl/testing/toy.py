"""A toy plant and a toy planner: two moves, two impurities, first-order answers.

Nothing here is a column. It is small enough to read, close enough to the tags of
the example site file to run the production loop, and the planner's gains are
wrong on purpose.
"""

from __future__ import annotations

import math
import random
from collections import deque
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Final

from edgectl.cycle.policies import AdvicePolicy, MovePolicy, Policies
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.plan import (
    CvEstimate,
    CvLimits,
    CvPrediction,
    Estimate,
    Plan,
    PlannedMove,
    PlanRequest,
    SolverStatistics,
)
from edgectl.records.readings import Reading

REFLUX: Final = "FIC-2103"
TRAY: Final = "TIC-2107"
CVS: Final = ("BOTTOMS", "DISTILLATE")
ANALYSERS: Final = {"AI-2116": ("BOTTOMS", 600.0), "AI-2115": ("DISTILLATE", 360.0)}
LAG_S: Final = {"BOTTOMS": 900.0, "DISTILLATE": 600.0}
BASE: Final = {"BOTTOMS": math.log(170.0), "DISTILLATE": math.log(0.28)}
GAINS: Final = {
    "BOTTOMS": {REFLUX: -0.0004, TRAY: -0.35},
    "DISTILLATE": {REFLUX: -0.0015, TRAY: 0.05},
}
"""Change of the logarithm per kg/h and per degC."""
MIDDLE: Final = {REFLUX: 8300.0, TRAY: 101.0}
STEP_S: Final = 10.0

_CONSTANTS: Final = {
    "FIC-2101": 18000.0, "TI-2102": 65.0, "FIC-2104": 7400.0, "FIC-2105": 6860.0,
    "FIC-2106": 11140.0, "TI-2108": 68.3, "TI-2109": 74.0, "TI-2110": 105.6,
    "PIC-2111": 105.0, "PDI-2112": 28.5, "LIC-2113": 50.0, "LIC-2114": 50.0,
}  # fmt: skip
_NOISE: Final = 2e-4


def toy_policies(example: Policies) -> Policies:
    """The example site's policies with the tuning that the toy is made for.

    The site file may be tuned for its column; stories and numbers in tests stay as they are.
    """
    reflux, tray = example.moves[REFLUX], example.moves[TRAY]
    reflux = replace(reflux, price=0.15, weight=0.2, scale=100.0, max_move=200.0,
                     worthwhile_move=80.0, increment=20.0, rate_limit_per_min=100.0)  # fmt: skip
    tray = replace(tray, price=0.0, weight=0.5, scale=1.0, max_move=1.0,
                   worthwhile_move=0.5, increment=0.1, rate_limit_per_min=0.5)  # fmt: skip
    bottoms, distillate = (example.cvs[cv] for cv in CVS)
    bottoms = replace(bottoms, hard_high=500.0, high=350.0, setpoint=150.0, weight=1.0,
                      soft_linear=2.0, soft_quadratic=20.0)  # fmt: skip
    distillate = replace(distillate, hard_high=0.5, high=0.4, setpoint=None, weight=0.0,
                         soft_linear=2.0, soft_quadratic=20.0)  # fmt: skip
    return replace(
        example,
        moves={**example.moves, REFLUX: reflux, TRAY: tray},
        cvs={**example.cvs, "BOTTOMS": bottoms, "DISTILLATE": distillate},
        cycle=replace(example.cycle, period_s=30.0, budget_s=20.0, journal_wait_s=2.0,
                      hold_limit=10, validity_s=90.0, warm_up_cycles=3, restore_max_age_s=900.0),
        advice=AdvicePolicy(interval_s=300.0, act_within_s=120.0, repeat_limit_h=6),
    )  # fmt: skip


def settled(cv: str, moves: Mapping[str, float], push: float, truth: float = 1.0) -> float:
    """Where a CV's logarithm ends up."""
    gains = GAINS[cv]
    away = sum(gains[mv] * (moves[mv] - MIDDLE[mv]) for mv in gains)
    return BASE[cv] + truth * away + push


class ToyPlant:
    """Answers to its setpoints; analysers sample, wait and hold."""

    def __init__(self, policies: Policies, start: float, seed: int) -> None:
        self._policies = policies
        self._random = random.Random(seed)
        self._now = start
        self.setpoints = {REFLUX: 8400.0, TRAY: 101.0}
        self.modes = {REFLUX: 2.0, TRAY: 1.0}
        self.outputs = {REFLUX: 55.0, TRAY: 60.0}
        self.switch = 1.0
        self.push = dict.fromkeys(CVS, 0.0)
        """An unmeasured disturbance: added to where the logarithms settle."""
        self.logs = {cv: settled(cv, self.setpoints, 0.0) for cv in CVS}
        self._past: deque[tuple[float, dict[str, float]]] = deque(maxlen=200)
        self._past.append((start, dict(self.logs)))

    def advance(self, now: float) -> None:
        while self._now < now:
            step_s = min(STEP_S, now - self._now)
            self._now += step_s
            for cv in CVS:
                end = settled(cv, self.setpoints, self.push[cv])
                keep = math.exp(-step_s / LAG_S[cv])
                self.logs[cv] = end + keep * (self.logs[cv] - end)
            self._past.append((self._now, dict(self.logs)))

    def reading(self, tag: str) -> Reading:
        """What the plant's server gives for a tag now."""
        now = self._now
        if tag in ANALYSERS:
            cv, cycle_s = ANALYSERS[tag]
            analyser = self._policies.tags[tag].analyser
            assert analyser is not None
            completed = math.floor(now / cycle_s) * cycle_s
            sampled = completed - analyser.delay_s
            log = next((logs[cv] for at, logs in self._past if at >= sampled), self.logs[cv])
            # Its own noise for each result, and the same one however often it is read.
            noise = random.Random(f"{tag} {completed}").gauss(0.0, 0.01)
            return Reading(tag, math.exp(log + noise), 0, completed, now)
        return Reading(tag, self._value(tag), 0, now - 0.5, now)

    def _value(self, tag: str) -> float:
        for mv, policy in self._policies.moves.items():
            if tag == policy.position:
                return self.setpoints[mv]
            if tag == policy.output:
                return self.outputs[mv]
            if tag == policy.mode:
                return self.modes[mv]
            if tag == policy.measured:
                return self.setpoints[mv] * (1.0 + self._random.gauss(0.0, _NOISE))
        if tag == self._policies.switch:
            return self.switch
        return _CONSTANTS[tag] * (1.0 + self._random.gauss(0.0, _NOISE))


TIMES_MIN: Final = (1.5, 3.5, 6.5, 9.0, 11.5, 16.5, 21.5, 31.5, 41.5, 61.5, 121.5)
MOVES_AT_MIN: Final = (1.5, 11.5, 21.5)
TRUTH: Final = 0.85
"""The planner's gains over the plant's."""
SHARES: Final = tuple(
    (end - begin) / TIMES_MIN[-1]
    for begin, end in zip((0.0, *TIMES_MIN[:-1]), TIMES_MIN, strict=True)
)
BLOCK_SHARES: Final = tuple(
    (end - begin) / TIMES_MIN[-1]
    for begin, end in zip((0.0, *MOVES_AT_MIN), (*MOVES_AT_MIN, TIMES_MIN[-1]), strict=True)
)
_FORGOTTEN: Final = {cv: tuple(math.exp(-60.0 * at / LAG_S[cv]) for at in TIMES_MIN) for cv in CVS}
_ANSWERED: Final = {
    cv: tuple(
        tuple(1.0 - math.exp(-60.0 * max(0.0, at - moved) / LAG_S[cv]) for at in TIMES_MIN)
        for moved in MOVES_AT_MIN
    )
    for cv in CVS
}
"""By CV and move: what share of it has arrived at each time."""

Path = tuple[float, ...]


@dataclass(frozen=True, slots=True)
class _Question:
    """One request, in the planner's terms."""

    here: Mapping[str, float]
    model: Mapping[str, float]
    bias: Mapping[str, float]
    limits: Mapping[str, CvLimits]

    def values(self, policy: MovePolicy, at: MovePosition, step: float) -> Path:
        """An MV after each of three equal steps, kept inside its limits."""
        here = self.here[policy.mv]
        low, high = min(at.low, here), max(at.high, here)
        return tuple(min(max(here + k * step, low), high) for k in (1, 2, 3))


@dataclass(frozen=True, slots=True)
class ToyPlanner:
    """Estimates by a bias, plans by trying what an operator could enter, three times alike."""

    policies: Policies

    def answer(self, request: PlanRequest) -> Plan:
        """The whole answer: estimate, plan, predictions."""
        at = {p.mv: p for p in request.positions}
        model, bias = self._tracked(request)
        limits = {found.cv: found for found in request.limits}
        asked = _Question(
            {mv: p.position for mv, p in at.items() if p.position is not None},
            model,
            bias,
            limits,
        )
        still = {mv: (here,) * 3 for mv, here in asked.here.items()}
        best = self._best(asked, at, still)
        predictions = tuple(
            CvPrediction(
                cv,
                _in_unit(_logs(asked, cv, best)),
                _in_unit(_logs(asked, cv, still)),
                {mv: _in_unit(_logs(asked, cv, {**still, mv: best[mv]})) for mv in still},
            )
            for cv in CVS
        )
        memory = {
            "model": tuple(model[cv] for cv in CVS),
            "bias": tuple(bias[cv] for cv in CVS),
        }
        cvs = tuple(
            CvEstimate(cv, math.exp(model[cv] + bias[cv]), bias[cv], 0.0, "live",
                       limits[cv].low, limits[cv].high)
            for cv in CVS
        )  # fmt: skip
        return Plan(
            request_id=request.request_id,
            cycle=request.cycle,
            estimate=Estimate(cvs, {}, (), (), memory),
            times_min=TIMES_MIN,
            moves=tuple(_planned(mv, asked.here[mv], best[mv]) for mv in still),
            predictions=predictions,
            cost_with=self._cost(asked, best),
            cost_without=self._cost(asked, still),
            gives_way=tuple(p.cv for p in predictions if _gives_way(p, limits[p.cv].high)),
            statistics=SolverStatistics("toy", "solved", True, 1, 0.0, 0.0, 0.0),
        )

    def _tracked(self, request: PlanRequest) -> tuple[dict[str, float], dict[str, float]]:
        here = {p.mv: p.position for p in request.positions if p.position is not None}
        ends = {cv: settled(cv, here, 0.0, TRUTH) for cv in CVS}
        if not request.memory:
            model, bias = dict(ends), dict.fromkeys(CVS, 0.0)
        else:
            before = dict(zip(CVS, request.memory["model"], strict=True))
            bias = dict(zip(CVS, request.memory["bias"], strict=True))
            model = {
                cv: ends[cv] + math.exp(-request.elapsed_s / LAG_S[cv]) * (before[cv] - ends[cv])
                for cv in CVS
            }
        results = {m.tag: m for m in request.measurements if m.tag in ANALYSERS}
        for tag, (cv, _) in ANALYSERS.items():
            found = results.get(tag)
            if found is not None and found.usable and found.is_new and found.value:
                bias[cv] += 0.4 * (math.log(found.value) - model[cv] - bias[cv])
        return model, bias

    def _best(
        self, asked: _Question, at: Mapping[str, MovePosition], still: Mapping[str, Path]
    ) -> dict[str, Path]:
        """One MV after the other, uphill until it gets no better: the cost is convex enough."""
        best = dict(still)
        cost = self._cost(asked, best)
        for mv in (TRAY, REFLUX, TRAY):
            policy = self.policies.moves[mv]
            for way in (_steps(policy, at[mv], 1), _steps(policy, at[mv], -1)):
                for step in way:
                    tried = {**best, mv: asked.values(policy, at[mv], step)}
                    tried_cost = self._cost(asked, tried)
                    if tried_cost > cost - 1e-9:
                        break
                    best, cost = tried, tried_cost
        return best

    def _cost(self, asked: _Question, moves: Mapping[str, Path]) -> float:
        total = 0.0
        for cv in CVS:
            policy, limits = self.policies.cvs[cv], asked.limits[cv]
            wanted = None if limits.setpoint is None else math.log(limits.setpoint)
            high = math.inf if limits.high is None else math.log(limits.high)
            for share, value in zip(SHARES, _logs(asked, cv, moves), strict=True):
                if wanted is not None:
                    total += share * policy.weight * (value - wanted) ** 2
                if value > high:
                    excess = value - high
                    total += policy.soft_linear * excess + policy.soft_quadratic * excess**2
        for mv, values in moves.items():
            move, here = self.policies.moves[mv], asked.here[mv]
            average = sum(s * v for s, v in zip(BLOCK_SHARES, (here, *values), strict=True))
            total += move.price * average / move.scale
            steps = zip((here, *values[:-1]), values, strict=True)
            total += move.weight * sum(((b - a) / move.scale) ** 2 for a, b in steps)
        return total


def _steps(policy: MovePolicy, at: MovePosition, sign: int) -> list[float]:
    """First moves one way that an operator could enter and that are allowed now."""
    forbidden = {Service.FIXED, Service.LOWER_ONLY if sign > 0 else Service.RAISE_ONLY}
    if at.position is None or at.service in forbidden:
        return []
    reach = round(policy.max_move / policy.increment) + 1
    nearest = round(at.position / policy.increment)
    targets = [round((nearest + sign * k) * policy.increment, 9) for k in range(reach)]
    return [
        target - at.position
        for target in targets
        if at.low <= target <= at.high and 0.0 < sign * (target - at.position) <= policy.max_move
    ]


def _logs(asked: _Question, cv: str, moves: Mapping[str, Path]) -> list[float]:
    """The CV's logarithm at the interval ends."""
    stay = settled(cv, asked.here, 0.0, TRUTH)
    away, bias = asked.model[cv] - stay, asked.bias[cv]
    path = [stay + share * away + bias for share in _FORGOTTEN[cv]]
    for mv, values in moves.items():
        gain, before = TRUTH * GAINS[cv][mv], asked.here[mv]
        for value, arrived in zip(values, _ANSWERED[cv], strict=True):
            step = gain * (value - before)
            before = value
            if step:
                path = [at + step * share for at, share in zip(path, arrived, strict=True)]
    return path


def _gives_way(prediction: CvPrediction, high: float | None) -> bool:
    """Whether the planned limit is still broken once the moves have had time to act."""
    late = [v for at, v in zip(TIMES_MIN, prediction.with_moves, strict=True) if at > 20.0]
    return high is not None and max(late) > 1.02 * high


def _in_unit(logs: list[float]) -> Path:
    return tuple(math.exp(log) for log in logs)


def _over_intervals(here: float, values: Path) -> Path:
    """The MV's value over each interval: it moves at interval ends."""
    path = []
    for begin in (0.0, *TIMES_MIN[:-1]):
        moved = sum(1 for at in MOVES_AT_MIN if at <= begin)
        path.append(values[moved - 1] if moved else here)
    return tuple(path)


def _planned(mv: str, here: float, values: Path) -> PlannedMove:
    # The grid of what can be entered, without what adding a step to a position leaves behind.
    first = here if values[0] == here else round(values[0], 6)
    farthest = max(values, key=lambda value: abs(value - here))
    path = _over_intervals(here, (first, *values[1:]))
    return PlannedMove(mv, here, first, farthest, path)
