"""What a plan costs, by the parent's own formula, from what the plan predicts.

Written from the definition of the cost in the site file, not from the engine's
code, so that a mistake in one does not hide in the other:

- each CV's squared distance from its setpoint, in its planning coordinate (a
  logarithm for impurities), averaged over the horizon, times its weight;
- beyond a planned limit, at each interval's end: linear plus squared excess;
- each MV's position over its scale, averaged over the horizon, times its price;
- each move over the MV's scale, squared, times the MV's weight.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from edgectl.cycle.policies import CvPolicy, MovePolicy


@dataclass(frozen=True, slots=True)
class CvTarget:
    """One CV's limits and setpoint as planned with, in its unit."""

    low: float | None
    high: float | None
    setpoint: float | None


@dataclass(frozen=True, slots=True)
class Cost:
    """A plan's cost by what it is paid for."""

    limits: Mapping[str, float]
    """By CV."""
    setpoints: Mapping[str, float]
    """By CV."""
    price: float
    moves: float

    @property
    def total(self) -> float:
        return sum(self.limits.values()) + sum(self.setpoints.values()) + self.price + self.moves


def coordinate(policy: CvPolicy, value: float) -> float:
    """A value in the CV's planning coordinate. Raises ValueError for a logarithm of zero."""
    return math.log(value) if policy.logarithmic else value


def shares_of(times_min: Sequence[float]) -> list[float]:
    """Each interval's share of the horizon [-]."""
    begins = [0.0, *times_min[:-1]]
    return [(end - begin) / times_min[-1] for begin, end in zip(begins, times_min, strict=True)]


def cost_of(
    times_min: Sequence[float],
    cvs: Sequence[tuple[CvPolicy, CvTarget, Sequence[float]]],
    moves: Sequence[tuple[MovePolicy, float, Sequence[float]]],
) -> Cost:
    """The cost of predicted paths.

    Parameters
    ----------
    times_min : sequence
        Interval ends [min].
    cvs : sequence
        Policy, targets and values at the interval ends, in the CV's unit.
    moves : sequence
        Policy, present position and values over the intervals, in the MV's unit.
    """
    shares = shares_of(times_min)
    limits, setpoints = {}, {}
    for policy, target, path in cvs:
        values = [coordinate(policy, value) for value in path]
        limits[policy.cv] = _beyond(policy, target, values)
        setpoints[policy.cv] = 0.0
        if target.setpoint is not None:
            wanted = coordinate(policy, target.setpoint)
            away = sum(s * (v - wanted) * (v - wanted) for s, v in zip(shares, values, strict=True))
            setpoints[policy.cv] = policy.weight * away
    price = moved = 0.0
    for move, position, path in moves:
        average = sum(s * v for s, v in zip(shares, path, strict=True))
        price += move.price * average / move.scale
        steps = zip([position, *path[:-1]], path, strict=True)
        # x * x, not x ** 2: a huge number becomes infinite instead of raising.
        sizes = [(b - a) / move.scale for a, b in steps]
        moved += move.weight * sum(size * size for size in sizes)
    return Cost(limits, setpoints, price, moved)


def _beyond(policy: CvPolicy, target: CvTarget, values: Sequence[float]) -> float:
    excesses = [0.0] * len(values)
    if target.high is not None:
        high = coordinate(policy, target.high)
        excesses = [max(e, v - high) for e, v in zip(excesses, values, strict=True)]
    if target.low is not None:
        low = coordinate(policy, target.low)
        excesses = [max(e, low - v) for e, v in zip(excesses, values, strict=True)]
    return sum(policy.soft_linear * e + policy.soft_quadratic * e * e for e in excesses)
