"""Where the moves stand on the plant and what may be done with them; limits; the switch.

An MV's position is its setpoint while its loop follows it. A loop in manual, an
output at its end or a setpoint that the measured value does not follow make the
MV fixed, or fixed in one direction, and the reason says which.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Final

from edgectl.cycle.policies import Limit, MovePolicy, Policies
from edgectl.cycle.validation import TagMemories, bridges, measure
from edgectl.records.measurements import Measurement, Measurements, MovePosition, Service
from edgectl.records.plan import CvLimits
from edgectl.records.readings import TagSnapshot

SATURATED_CYCLES: Final = 3
SATURATED_LOW: Final = 1.0
SATURATED_HIGH: Final = 99.0
"""Output beyond which a valve counts as at its end, per cent."""
LIGHT_FILTER_S: Final = 60.0
"""Of a feed flow, to tell where it goes from its noise."""
WHOLE: Final = 1e-6
"""A mode is a whole number: farther from one than this it is not a mode."""


@dataclass(frozen=True, slots=True)
class LoopMemory:
    """Cycles in a row for which something has been so."""

    not_followed: int = 0
    at_low_end: int = 0
    at_high_end: int = 0


@dataclass(frozen=True, slots=True)
class FeedMemory:
    """The feed that an MV is kept in ratio to."""

    lightly: float
    """Filtered enough to tell a change from noise."""
    filtered: float
    """As the base layer filters it."""
    at: float


@dataclass(frozen=True, slots=True)
class Seen:
    """What validation carries from cycle to cycle."""

    tags: TagMemories = field(default_factory=dict)
    loops: Mapping[str, LoopMemory] = field(default_factory=dict)
    feeds: Mapping[str, FeedMemory] = field(default_factory=dict)
    """By MV."""
    switched_on: bool | None = None
    """The operator's switch as last read; None before."""


@dataclass(frozen=True, slots=True)
class Validated:
    """What one cycle believes."""

    measurements: Measurements
    limits: tuple[CvLimits, ...]
    seen: Seen


def validate(snapshot: TagSnapshot, seen: Seen, policies: Policies) -> Validated:
    """The measurements of a snapshot, given what was seen before."""
    values, tags = measure(snapshot, seen.tags, policies)
    positions, loops, feeds = {}, {}, dict(seen.feeds)
    for mv, policy in policies.moves.items():
        positions[mv], loops[mv] = _position(policy, values, seen.loops.get(mv, LoopMemory()))
        if policy.in_ratio_to is not None:
            feed = _usable(values, policy.in_ratio_to)
            if feed is not None:
                feeds[mv] = _filtered(policy, feed, feeds.get(mv), snapshot.received_at)
            positions[mv] = _carried_along(positions[mv], feeds.get(mv))
    limits, unread = _cv_limits(values, policies)
    missing = [
        tag
        for tag, policy in policies.tags.items()
        if policy.required and not (values[tag].usable or bridges(values[tag], policy))
    ]
    wanted, remembered = _switch(values, seen.switched_on, policies)
    measurements = Measurements(
        cycle=snapshot.cycle,
        taken_at=snapshot.received_at,
        values=values,
        positions=positions,
        advice_wanted=wanted,
        missing_required=tuple(dict.fromkeys([*missing, *unread])),
    )
    return Validated(measurements, limits, Seen(tags, loops, feeds, remembered))


def _usable(values: Mapping[str, Measurement], tag: str) -> float | None:
    found = values.get(tag)
    return found.value if found is not None and found.usable else None


def _number(values: Mapping[str, Measurement], limit: Limit) -> float | None:
    return _usable(values, limit) if isinstance(limit, str) else limit


def _position(
    policy: MovePolicy, values: Mapping[str, Measurement], before: LoopMemory
) -> tuple[MovePosition, LoopMemory]:
    setpoint, measured = _usable(values, policy.position), _usable(values, policy.measured)
    mode, output = _usable(values, policy.mode), _usable(values, policy.output)
    low, high = _number(values, policy.low), _number(values, policy.high)
    automatic = mode is not None and _is_one_of(mode, policy.automatic_modes)
    after = _counted(before, policy, setpoint, measured, output) if automatic else LoopMemory()

    reason = ""
    if mode is None:
        reason = "mode_unknown"
    elif not automatic:
        reason = "loop_in_manual"
    elif setpoint is None:
        reason = "setpoint_unknown"
    elif low is None or high is None:
        reason = "limit_unknown"
    elif low >= high:
        reason = "limits_crossed"
    elif after.not_followed >= policy.follow_cycles:
        reason = "not_followed"
    if reason:
        # What the plant really does is what the loop measures.
        stands = measured if measured is not None else setpoint
        here = 0.0 if stands is None else stands
        low, high = (here if low is None else low), (here if high is None else high)
        return MovePosition(policy.mv, stands, Service.FIXED, low, high, reason), after
    assert low is not None
    assert high is not None
    service = _one_way(after)
    reason = "in_service" if service is Service.FREE else "output_saturated"
    return MovePosition(policy.mv, setpoint, service, low, high, reason), after


def _is_one_of(mode: float, modes: tuple[int, ...]) -> bool:
    return abs(mode - round(mode)) < WHOLE and round(mode) in modes


def _counted(
    before: LoopMemory,
    policy: MovePolicy,
    setpoint: float | None,
    measured: float | None,
    output: float | None,
) -> LoopMemory:
    after = before
    if setpoint is not None and measured is not None:
        strays = abs(measured - setpoint) > policy.follow_tolerance
        after = replace(after, not_followed=before.not_followed + 1 if strays else 0)
    if output is not None:
        low = before.at_low_end + 1 if output <= SATURATED_LOW else 0
        high = before.at_high_end + 1 if output >= SATURATED_HIGH else 0
        after = replace(after, at_low_end=low, at_high_end=high)
    return after


def _one_way(loop: LoopMemory) -> Service:
    """A valve at its end cannot give more that way. Loops act so that more output gives more."""
    if loop.at_high_end >= SATURATED_CYCLES:
        return Service.LOWER_ONLY
    if loop.at_low_end >= SATURATED_CYCLES:
        return Service.RAISE_ONLY
    return Service.FREE


def _filtered(policy: MovePolicy, feed: float, before: FeedMemory | None, now: float) -> FeedMemory:
    if before is None:
        return FeedMemory(feed, feed, now)
    elapsed_s = max(0.0, now - before.at)
    lightly = _lagged(before.lightly, feed, elapsed_s, LIGHT_FILTER_S)
    return FeedMemory(
        lightly, _lagged(before.filtered, feed, elapsed_s, policy.ratio_filter_s), now
    )


def _lagged(before: float, value: float, elapsed_s: float, filter_s: float) -> float:
    keep = math.exp(-elapsed_s / filter_s) if filter_s > 0.0 else 0.0
    return keep * before + (1.0 - keep) * value


def _carried_along(at: MovePosition, feed: FeedMemory | None) -> MovePosition:
    """The position, with what the base layer will do to it by itself."""
    if feed is None or at.position is None or feed.filtered <= 0.0:
        return at
    drift = 0.0
    if at.service is not Service.FIXED:
        drift = at.position * (feed.lightly / feed.filtered - 1.0)
    return replace(at, feed=feed.filtered, drift=drift)


def _cv_limits(
    values: Mapping[str, Measurement], policies: Policies
) -> tuple[tuple[CvLimits, ...], list[str]]:
    """Limits after those that are tags were read; tags that should hold one and do not."""
    limits, unread = [], []
    for name, policy in policies.cvs.items():
        asked = (policy.low, policy.high, policy.setpoint)
        unread += [tag for tag in asked if isinstance(tag, str) and _usable(values, tag) is None]
        low, high, setpoint = (_number(values, limit) for limit in asked)
        limits.append(CvLimits(name, low, high, setpoint))
    return tuple(limits), unread


def _switch(
    values: Mapping[str, Measurement], before: bool | None, policies: Policies
) -> tuple[bool, bool | None]:
    """A switch that cannot be read stays where it was; one never read is off."""
    if policies.switch is None:
        return True, None
    value = _usable(values, policies.switch)
    switched_on = before if value is None else value >= 0.5
    return bool(switched_on), switched_on
