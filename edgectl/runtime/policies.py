"""From the site file to what the decisions need to know."""

from __future__ import annotations

from edgectl.cycle.policies import (
    AdvicePolicy,
    AnalyserPolicy,
    CvPolicy,
    CyclePolicy,
    MovePolicy,
    Policies,
    TagPolicy,
)
from edgectl.settings.goals import ControlledVariable, ManipulatedVariable
from edgectl.settings.site import Site
from edgectl.settings.tags import Role, Tag


def policies_from(site: Site) -> Policies:
    """Everything `cycle` needs, from a site file that passed its checks."""
    cycle, server = site.cycle, site.server
    switches = [name for name, tag in site.tags.items() if tag.role is Role.ADVICE_SWITCH]
    return Policies(
        tags={name: _tag(name, tag) for name, tag in site.tags.items()},
        moves={name: _move(name, mv) for name, mv in site.mv.items()},
        cvs={name: _cv(name, cv) for name, cv in site.cv.items()},
        cycle=CyclePolicy(
            period_s=cycle.period_s,
            budget_s=cycle.budget_s,
            journal_wait_s=cycle.journal_wait_s,
            read_timeout_s=server.read_timeout_s,
            write_timeout_s=server.write_timeout_s,
            hold_limit=cycle.hold_limit,
            validity_s=cycle.validity_s,
            warm_up_cycles=cycle.warm_up_cycles,
            restore_max_age_s=cycle.restore_max_age_s,
            future_tolerance_s=server.clock_offset_limit_s,
        ),
        advice=AdvicePolicy(
            interval_s=site.advice.interval_s,
            act_within_s=site.advice.act_within_s,
            repeat_limit_h=site.advice.repeat_limit_h,
        ),
        switch=switches[0] if switches else None,
    )


def _tag(name: str, tag: Tag) -> TagPolicy:
    analyser = tag.analyser
    return TagPolicy(
        tag=name,
        description=tag.description,
        unit=tag.unit,
        low=tag.low,
        high=tag.high,
        stale_after_s=tag.stale_limit_s,
        required=tag.required,
        # Uncertain is good enough for what the plan can do without; never for what it rests
        # on, nor for an analyser, whose result would stay in the bias.
        use_uncertain=not tag.required and analyser is None,
        rate_limit_per_min=tag.rate_limit_per_min,
        substitute=tag.substitute,
        analyser=None
        if analyser is None
        else AnalyserPolicy(analyser.delay_s, analyser.detection_limit, analyser.repeat_limit),
    )


def _move(name: str, mv: ManipulatedVariable) -> MovePolicy:
    return MovePolicy(
        mv=name,
        description=mv.description,
        unit=mv.unit,
        position=mv.position,
        measured=mv.measured,
        output=mv.output,
        mode=mv.mode,
        automatic_modes=mv.automatic_modes,
        low=mv.low,
        high=mv.high,
        rate_limit_per_min=mv.rate_limit_per_min,
        max_move=mv.max_move,
        worthwhile_move=mv.worthwhile_move,
        increment=mv.increment,
        weight=mv.weight,
        scale=mv.scale,
        price=mv.price,
        follow_tolerance=mv.follow_tolerance,
        follow_cycles=mv.follow_cycles,
        in_ratio_to=mv.in_ratio_to,
        ratio_filter_s=60.0 * (mv.ratio_filter_min or 0.0),
    )


def _cv(name: str, cv: ControlledVariable) -> CvPolicy:
    return CvPolicy(
        cv=name,
        description=cv.description,
        unit=cv.unit,
        measured=cv.measured,
        logarithmic=cv.coordinate == "logarithmic",
        quality=cv.role == "quality",
        hard_low=cv.hard_low,
        hard_high=cv.hard_high,
        low=cv.low,
        high=cv.high,
        setpoint=cv.setpoint,
        weight=cv.weight,
        soft_linear=cv.soft_linear,
        soft_quadratic=cv.soft_quadratic,
    )
