"""The plant's own judgement of the advice it holds: `advice_usable`.

`valid = true` outlives a killed runtime at the server, so the plant never takes
the runtime's word for it. This is the example of the logic that a site builds
into its control system; the crew obeys it. Time is passed in.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Final

ADVISORY_PERIOD_S: Final = 30.0
"""Plant seconds between two heartbeats of a healthy runtime."""

MISSED_PERIODS: Final = 3.0
"""A heartbeat that stands still for longer than this many periods has stopped."""


@dataclass(frozen=True, slots=True)
class AdviceSeen:
    """What stands at the advisory nodes and at the operator's switch."""

    valid: bool
    valid_until: float | None
    """Plant time, seconds since the Unix epoch [s]; None when nothing was ever written."""
    heartbeat: int
    wanted: bool
    """The operator's switch for advice."""


@dataclass(slots=True)
class AdviceWatchdog:
    """Advice is usable while its heartbeat moves, it is valid, in date and wanted.

    Parameters
    ----------
    period_s : float
        Plant seconds between two heartbeats [s].
    missed_periods : float
        Periods without a heartbeat after which advice is not usable [-].
    """

    period_s: float = ADVISORY_PERIOD_S
    missed_periods: float = MISSED_PERIODS
    _heartbeat: int | None = field(default=None, init=False)
    _changed_at: float | None = field(default=None, init=False)

    def usable(self, now: float, seen: AdviceSeen) -> bool:
        """Judge the advice at plant time `now` [s], seconds since the Unix epoch."""
        if self._heartbeat is None:
            # The value found at the first look may be years old: only a change counts.
            self._heartbeat = seen.heartbeat
        elif seen.heartbeat != self._heartbeat:
            self._heartbeat = seen.heartbeat
            self._changed_at = now
        alive = (
            self._changed_at is not None
            and now - self._changed_at <= self.missed_periods * self.period_s
        )
        in_date = seen.valid_until is not None and now <= seen.valid_until
        return alive and in_date and seen.valid and seen.wanted
