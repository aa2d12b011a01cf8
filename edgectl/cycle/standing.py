"""What the runtime vouches for, as one table.

Rules:

- `starting` ends only after the warm-up: so many good cycles since the start,
  each ending in a vetted plan. Nothing is valid before.
- Only a vetted plan from good data leads to `advising`, and only `advising` is valid.
- What cannot be vouched for once is a hold: same values, not valid, and said so.
- Too many holds in a row, the operator's switch, a plant that is not what the site
  file says, or the end of the runtime make it silent.
- An event that the table does not name is refused and changes nothing: asking for
  it is a mistake of the caller.

The diagram in DEVELOPERS.md is made from this table.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from edgectl.records.advice import Standing


class Event(StrEnum):
    """What a cycle can mean for the standing."""

    WARMING = "warming"
    """A vetted plan from good data, while the warm-up lasts."""
    SUPPORTED = "supported"
    """A vetted plan from good data supports what is suggested."""
    UNSUPPORTED = "unsupported"
    """This cycle has no such plan."""
    HELD_TOO_LONG = "held_too_long"
    """The holds in a row have reached their limit."""
    FORBIDDEN = "forbidden"
    """The operator's switch is off, the plant is not what the site file says, or the end."""
    BEGUN_ANEW = "begun_anew"
    """The estimator's memory was lost or too old: warm up again."""


class RefusedEventError(Exception):
    """An event that the table does not allow in this standing. The state is as it was."""


_S = Standing

TABLE: Final[dict[tuple[Standing, Event], Standing]] = {
    (_S.STARTING, Event.WARMING): _S.STARTING,
    (_S.STARTING, Event.SUPPORTED): _S.ADVISING,
    (_S.STARTING, Event.UNSUPPORTED): _S.STARTING,
    (_S.STARTING, Event.FORBIDDEN): _S.SILENT,
    (_S.STARTING, Event.BEGUN_ANEW): _S.STARTING,
    (_S.ADVISING, Event.SUPPORTED): _S.ADVISING,
    (_S.ADVISING, Event.UNSUPPORTED): _S.HOLDING,
    (_S.ADVISING, Event.FORBIDDEN): _S.SILENT,
    (_S.ADVISING, Event.BEGUN_ANEW): _S.STARTING,
    (_S.HOLDING, Event.SUPPORTED): _S.ADVISING,
    (_S.HOLDING, Event.UNSUPPORTED): _S.HOLDING,
    (_S.HOLDING, Event.HELD_TOO_LONG): _S.SILENT,
    (_S.HOLDING, Event.FORBIDDEN): _S.SILENT,
    (_S.HOLDING, Event.BEGUN_ANEW): _S.STARTING,
    (_S.SILENT, Event.WARMING): _S.STARTING,
    (_S.SILENT, Event.SUPPORTED): _S.ADVISING,
    (_S.SILENT, Event.UNSUPPORTED): _S.SILENT,
    (_S.SILENT, Event.FORBIDDEN): _S.SILENT,
    (_S.SILENT, Event.BEGUN_ANEW): _S.STARTING,
}


@dataclass(frozen=True, slots=True)
class StandingState:
    """The standing and the two counts it depends on."""

    standing: Standing = Standing.STARTING
    holds: int = 0
    """Holds in a row."""
    good_cycles: int = 0
    """Good cycles since the start or since the memory was lost, up to the warm-up."""


def after(state: StandingState, event: Event) -> StandingState:
    """The state after an event. Raises RefusedEventError when the table does not name it."""
    following = TABLE.get((state.standing, event))
    if following is None:
        raise RefusedEventError(f"{event} does not happen while {state.standing}")
    holds = state.holds + 1 if following is Standing.HOLDING else 0
    good = 0 if event is Event.BEGUN_ANEW else state.good_cycles
    if event is Event.WARMING:
        good += 1
    return StandingState(following, holds, good)


def good_cycle(state: StandingState, warm_up_cycles: int) -> StandingState:
    """After a cycle with a vetted plan from good data."""
    warming = state.good_cycles < warm_up_cycles
    return after(state, Event.WARMING if warming else Event.SUPPORTED)


def poor_cycle(state: StandingState, hold_limit: int) -> StandingState:
    """After a cycle without one: one more hold, or silence when there were enough."""
    if state.standing is Standing.HOLDING and state.holds >= hold_limit:
        return after(state, Event.HELD_TOO_LONG)
    return after(state, Event.UNSUPPORTED)


def as_markdown() -> str:
    """The table for people: standing by event."""
    events = list(Event)
    lines = [
        "| from | " + " | ".join(f"`{event}`" for event in events) + " |",
        "|" + "---|" * (len(events) + 1),
    ]
    for standing in Standing:
        cells = (TABLE.get((standing, event)) for event in events)
        lines.append(
            f"| **{standing}** | "
            + " | ".join("refused" if cell is None else str(cell) for cell in cells)
            + " |"
        )
    lines += ["", *(f"- `{event}`: {_MEANING[event]}" for event in events)]
    return "\n".join(lines) + "\n"


# Docstrings of members are not kept by Python; the document needs them.
_MEANING: Final = {
    Event.WARMING: "a vetted plan from good data, while the warm-up lasts.",
    Event.SUPPORTED: "a vetted plan from good data supports what is suggested.",
    Event.UNSUPPORTED: "this cycle has no such plan.",
    Event.HELD_TOO_LONG: "the holds in a row have reached `hold_limit`.",
    Event.FORBIDDEN: "the operator's switch is off, the plant is not what the site file says,"
    " or the runtime ends.",
    Event.BEGUN_ANEW: "the estimator's memory was lost or too old: warm up again.",
}


if __name__ == "__main__":
    sys.stdout.write(as_markdown())
