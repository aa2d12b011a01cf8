"""What is said, in words that a board operator uses.

Names the tag, the number and the unit; says what would happen otherwise. Events,
never alarms: nobody is told that they must.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Final

from edgectl.cycle.cost import coordinate
from edgectl.cycle.policies import CvPolicy, MovePolicy, Policies
from edgectl.cycle.vetting import Vetting
from edgectl.records.measurements import (
    Measurement,
    Measurements,
    MovePosition,
    Service,
    Verdict,
)
from edgectl.records.plan import CvLimits, CvPrediction, Plan

WORTH_SAYING: Final = 1e-6
"""A gain in cost below this is none."""

_VERDICTS: Final[Mapping[Verdict, str]] = {
    Verdict.USED: "is used",
    Verdict.BAD_QUALITY: "has bad quality",
    Verdict.UNCERTAIN_QUALITY: "has uncertain quality",
    Verdict.NOT_A_NUMBER: "is not a number",
    Verdict.OUT_OF_RANGE: "is outside its range",
    Verdict.INPUT_STALE: "is too old",
    Verdict.IN_THE_FUTURE: "has a time in the future",
    Verdict.TOO_FAST: "changed faster than it can",
    Verdict.FROZEN: "repeats its result and counts as dead",
    Verdict.MISSING: "was not delivered",
}

_WITHHELD: Final[Mapping[str, str]] = {
    "mode_unknown": "the mode of its loop cannot be read",
    "loop_in_manual": "its loop does not follow its setpoint (manual)",
    "setpoint_unknown": "its setpoint cannot be read",
    "limit_unknown": "one of its limits cannot be read",
    "limits_crossed": "its lower limit is not below its upper one",
    "not_followed": "its measured value does not follow its setpoint",
    "output_saturated": "its valve is at its end",
}

_WITHHELD_WAY: Final[Mapping[Service, str]] = {
    Service.FREE: "is not moved",
    Service.FIXED: "is not moved",
    Service.RAISE_ONLY: "is not lowered",
    Service.LOWER_ONLY: "is not raised",
}


def amount(value: float, unit: str, step: float | None = None) -> str:
    """`7,900 kg/h`, `102.5 °C`, `0.312 wt %`: as fine as a hand can enter, or three figures."""
    if step is not None:
        decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    else:
        size = abs(value)
        decimals = 0 if size >= 100.0 or size == 0.0 else 2 - math.floor(math.log10(size))
        decimals = min(decimals, 6)
    words = f"{value:,.{decimals}f}"
    return words if unit in ("", "-") else f"{words} {unit.replace('degC', '°C')}"


def action(policy: MovePolicy, here: float, target: float) -> str:
    """`raise reflux flow FIC-2103 from 7,900 to 8,100 kg/h`."""
    verb = "raise" if target > here else "lower"
    begin = amount(here, "", policy.increment)
    end = amount(target, policy.unit, policy.increment)
    return f"{verb} {policy.description} {policy.mv} from {begin} to {end}"


def sentence(words: str) -> str:
    """With a capital letter and a full stop."""
    return f"{words[:1].upper()}{words[1:]}."


def tag_words(found: Measurement, policies: Policies) -> str:
    """`TI-2107 (tray 30 temperature) has bad quality`."""
    described = policies.tags[found.tag].description
    return f"{found.tag} ({described}) {_VERDICTS[found.verdict]}"


def withheld_words(at: MovePosition) -> str:
    """`is not raised: its valve is at its end`: a valve at one end can still go the other way."""
    return f"{_WITHHELD_WAY[at.service]}: {_WITHHELD.get(at.reason, at.reason)}"


def missing_words(measurements: Measurements, policies: Policies) -> str:
    """Why there is no plan, naming the first few tags."""
    names = measurements.missing_required
    told = [tag_words(measurements.values[tag], policies) for tag in names[:3]]
    more = f" and {len(names) - 3} more" if len(names) > 3 else ""
    return "; ".join(told) + more


def why_moves(
    plan: Plan, vetting: Vetting, limits: Sequence[CvLimits], policies: Policies
) -> tuple[str, str]:
    """The reason of a plan's moves, and the clause that tells it: where the largest gain lies."""
    assert vetting.cost_with is not None
    assert vetting.cost_without is not None
    gains: list[tuple[float, str, str]] = [
        (vetting.cost_without.price - vetting.cost_with.price, "economics", "")
    ]
    for word, without, with_moves in (
        ("limit_reached", vetting.cost_without.limits, vetting.cost_with.limits),
        ("setpoint", vetting.cost_without.setpoints, vetting.cost_with.setpoints),
    ):
        gains += [(without[cv] - with_moves[cv], word, cv) for cv in without]
    gain, word, cv = max(gains)
    if gain <= WORTH_SAYING or word == "economics":
        return "economics", "it is cheaper, and the limits are kept"
    prediction = next(p for p in plan.predictions if p.cv == cv)
    asked = next(found for found in limits if found.cv == cv)
    policy = policies.cvs[cv]
    if word == "limit_reached":
        planned = next((found for found in plan.estimate.cvs if found.cv == cv), None)
        low, high = (asked.low, asked.high) if planned is None else (planned.low, planned.high)
        return word, _limit_clause(plan, prediction, policy, low, high)
    assert asked.setpoint is not None
    wanted = amount(asked.setpoint, policy.unit)
    return word, (
        f"{policy.description} comes nearer to its target of {wanted}:"
        f" {amount(prediction.with_moves[-1], '')} instead of"
        f" {amount(prediction.without_moves[-1], '')} in {_hours(plan.times_min[-1])}"
    )


def _limit_clause(
    plan: Plan, prediction: CvPrediction, policy: CvPolicy, low: float | None, high: float | None
) -> str:
    """`... would otherwise reach 480 wt ppm in 40 min (limit 350); with the move 310`."""
    worst, limit, side = -math.inf, 0.0, 1.0
    at = 0
    for bound, sign in ((high, 1.0), (low, -1.0)):
        if bound is None:
            continue
        for k, value in enumerate(prediction.without_moves):
            beyond = sign * (coordinate(policy, value) - coordinate(policy, bound))
            if beyond > worst:
                worst, limit, side, at = beyond, bound, sign, k
    extreme = max(prediction.with_moves) if side > 0.0 else min(prediction.with_moves)
    return (
        f"{policy.description} would otherwise reach"
        f" {amount(prediction.without_moves[at], policy.unit)}"
        f" in {_hours(plan.times_min[at])} (limit {amount(limit, '')});"
        f" with the move {amount(extreme, '')}"
    )


def _hours(minutes: float) -> str:
    if minutes < 90.0:
        return f"{minutes:.0f} min"
    return f"{minutes / 60.0:.1f} h"


def notices(measurements: Measurements, plan: Plan | None, policies: Policies) -> tuple[str, ...]:
    """What the operator should read beside the suggestion."""
    told: list[str] = []
    for tag, found in measurements.values.items():
        if found.note == "substituted":
            stands_in = amount(found.value or 0.0, policies.tags[tag].unit)
            told.append(f"{tag_words(found, policies)}: {stands_in} is used instead.")
    told += [
        _cv_notice(policy, measurements.values[policy.measured], plan, policies)
        for policy in policies.cvs.values()
        if policy.quality and not measurements.values[policy.measured].usable
    ]
    for mv, at in measurements.positions.items():
        if at.reason != "in_service":
            told.append(f"{mv} ({policies.moves[mv].description}) {withheld_words(at)}.")
    for cv in () if plan is None else plan.gives_way:
        policy = policies.cvs[cv]
        told.append(f"Not all limits can be kept: that of {policy.description} ({cv}) gives way.")
    return tuple(told)


def _cv_notice(policy: CvPolicy, found: Measurement, plan: Plan | None, policies: Policies) -> str:
    words = tag_words(found, policies)
    estimates = () if plan is None else plan.estimate.cvs
    estimate = next((e for e in estimates if e.cv == policy.cv), None)
    if estimate is not None and estimate.state == "dropped":
        return f"{words}: {policy.description} is left out of the plan until it comes back."
    if estimate is not None and estimate.state == "ageing" and estimate.high is not None:
        limit = amount(estimate.high, policy.unit)
        return f"{words}: its last good result ages, and its limit is tightened to {limit}."
    return f"{words}: its last good result is kept."
