"""The plant's board for advice: the advisory nodes and the operator's switch.

Knows nothing of OPC UA: `nodes` shows these names, `access` guards them, and
the crew and the watchdog look at what stands here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Final

from sim_server.watchdog import AdviceSeen

MOVES: Final = ("FIC-2103", "TIC-2107")
"""The loops whose setpoints can be advised."""

SWITCH: Final = "HS-2120.advice_on"
USABLE: Final = "ADV.advice_usable"

Written = bool | int | float | str | datetime

ADVISORY_KINDS: Final[Mapping[str, type[Written]]] = {
    "ADV.valid": bool,
    "ADV.valid_until": datetime,
    "ADV.made_at": datetime,
    "ADV.cycle": int,
    "ADV.heartbeat": int,
    "ADV.standing": str,
    "ADV.reason": str,
    "ADV.sentence": str,
    **{f"ADV.{move}.target": float for move in MOVES},
    **{f"ADV.{move}.reason": str for move in MOVES},
}
"""What user `advisor` may write, and what kind of value each one takes."""


ASKED: Final = frozenset((None, "economics", "limit_reached", "setpoint", "only_together"))
"""Reasons at a target that ask for a hand (or none was given). With any other one the target
only says where the loop stands, and nobody enters it again."""


@dataclass(slots=True)
class AdvisoryBoard:
    """What was last written to the advisory nodes and to the switch."""

    advice_on: bool = True
    values: dict[str, Written] = field(default_factory=lambda: {"ADV.valid": False})
    """By node name; a node that nobody wrote yet is missing."""
    written_at: dict[str, float] = field(default_factory=dict)
    """Plant time of the last write by node name, seconds since the Unix epoch [s]."""

    def write(self, name: str, value: Written, now: float) -> None:
        """Take a value for an advisory node at plant time `now` [s]."""
        self.values[name] = value
        self.written_at[name] = now

    def seen(self) -> AdviceSeen:
        """What the watchdog judges."""
        heartbeat = self.values.get("ADV.heartbeat", 0)
        return AdviceSeen(
            valid=self.values["ADV.valid"] is True,
            valid_until=self._time("ADV.valid_until"),
            heartbeat=heartbeat if isinstance(heartbeat, int) else 0,
            wanted=self.advice_on,
        )

    @property
    def made_at(self) -> float | None:
        """When the suggestion last changed, seconds since the Unix epoch [s]."""
        return self._time("ADV.made_at")

    def targets(self) -> dict[str, float | None]:
        """Suggested setpoints by loop; None where nothing stands or nothing is asked."""
        found: dict[str, float | None] = {}
        for move in MOVES:
            value = self.values.get(f"ADV.{move}.target")
            asked = self.values.get(f"ADV.{move}.reason") in ASKED
            found[move] = value if asked and isinstance(value, float) else None
        return found

    def _time(self, name: str) -> float | None:
        value = self.values.get(name)
        if not isinstance(value, datetime):
            return None
        # OPC UA times are UTC by definition (OPC 10000-6, 5.2.2.5), said or not.
        return value.replace(tzinfo=value.tzinfo or UTC).timestamp()
