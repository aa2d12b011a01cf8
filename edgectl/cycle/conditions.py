"""What is so in a cycle and belongs into the journal as an event: raised once, cleared once."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from edgectl.cycle import sentences
from edgectl.cycle.policies import Policies
from edgectl.cycle.state import Condition
from edgectl.records.measurements import Measurement, Measurements, Verdict
from edgectl.records.plan import Outcome, Plan

FAILURE: Final = "failure"
CHECK: Final = "function_check"
OUT: Final = "out_of_specification"
MAINTENANCE: Final = "maintenance_required"

_OF_REASON: Final = {
    "plant_unreachable": FAILURE,
    "plant_mismatch": FAILURE,
    "worker_lost": FAILURE,
    "failed_vetting": FAILURE,
    "over_budget": OUT,
    "no_plan": OUT,
    "model_mismatch": OUT,
    "bias_at_clip": OUT,
    "outside_limits": OUT,
    "solver_warming": CHECK,
    "operator_off": CHECK,
}
"""Reasons that are events by themselves; bad inputs are told by their tags."""


def conditions_of(
    measurements: Measurements | None, outcome: Outcome, reason: str, why: str, policies: Policies
) -> tuple[Condition, ...]:
    """Everything that is so in this cycle."""
    found: list[Condition] = []
    if reason in _OF_REASON:
        found.append(Condition(reason, "", _OF_REASON[reason], sentences.sentence(why)))
    if measurements is not None:
        found += _of_tags(measurements, policies)
        found += _of_moves(measurements, policies)
    if isinstance(outcome, Plan):
        for cv in outcome.gives_way:
            if cv in policies.cvs:
                words = f"the limit of {policies.cvs[cv].description} ({cv}) cannot be kept"
                found.append(Condition("limit_gives_way", cv, OUT, sentences.sentence(words)))
    return tuple(found)


def _of_tags(measurements: Measurements, policies: Policies) -> Iterator[Condition]:
    for tag, measurement in measurements.values.items():
        if measurement.verdict is not Verdict.USED:
            words = sentences.sentence(sentences.tag_words(measurement, policies))
            yield Condition("tag_not_used", tag, _severity(measurement), words)
        elif measurement.note == "step_accepted":
            words = f"{tag} jumped and stayed there: the new value is believed."
            yield Condition("step_accepted", tag, OUT, words)
        elif measurement.note == "no_source_time":
            words = f"{tag} comes without a source time: its receipt counts."
            yield Condition("no_source_time", tag, OUT, words)


def _severity(measurement: Measurement) -> str:
    if measurement.verdict is Verdict.FROZEN:
        return MAINTENANCE
    failed = (Verdict.BAD_QUALITY, Verdict.NOT_A_NUMBER, Verdict.MISSING)
    return FAILURE if measurement.verdict in failed else OUT


def _of_moves(measurements: Measurements, policies: Policies) -> Iterator[Condition]:
    for mv, at in measurements.positions.items():
        if at.reason != "in_service":
            words = f"{mv} ({policies.moves[mv].description}) {sentences.withheld_words(at)}."
            yield Condition("move_withheld", mv, CHECK, words)
