"""What happens to the plant from outside: the story and a small seeded wander.

Everything here depends on the seed and the time alone, never on what the plant
does: two runs with the same seed can be compared move for move. The story and
all its figures are invented.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from sim_server.randomness import NormalStream, uniform

MINUTE_S: Final = 60.0
EDGE_S: Final = 150.0
"""No real feed changes in an instant: steps are spread over this time."""
EFFICIENCY_FALL_S: Final = 4.0 * 3600.0


class Story(StrEnum):
    """What is going to happen to the feed."""

    DEFAULT = "default"
    """Feed up, then richer, then colder, while the trays foul."""
    CALM = "calm"
    """The wander alone."""
    FEED_CUT = "feed-cut"
    """A quarter of the feed lost after ten minutes."""


@dataclass(frozen=True, slots=True)
class Conditions:
    """What acts on the plant during one second, relative to its start."""

    feed_setpoint_factor: float
    feed_wander_factor: float
    feed_methanol_shift_wt: float
    """Mass fraction [-]."""
    feed_temperature_shift_k: float
    drum_pressure_shift_kpa: float
    efficiency_shift: float


class Wander:
    """A seeded Ornstein-Uhlenbeck process, sampled every plant second from zero on.

    Parameters
    ----------
    seed : int
        The plant's seed [-].
    name : str
        Which quantity wanders.
    sd : float
        Standard deviation it settles to [quantity's unit].
    time_constant_s : float
        Correlation time [s].
    """

    def __init__(self, seed: int, name: str, sd: float, time_constant_s: float) -> None:
        self._normals = NormalStream(seed, f"wander {name}")
        self._keep = math.exp(-1.0 / time_constant_s)
        self._scale = sd * math.sqrt(1.0 - self._keep**2)
        self._value = 0.0

    def next(self) -> float:
        """The value one plant second later."""
        self._value = self._keep * self._value + self._scale * self._normals.next()
        return self._value


class Disturbances:
    """Feed, pressure and efficiency over time.

    Parameters
    ----------
    seed : int
        The plant's seed [-].
    story : Story
        What is going to happen.
    """

    def __init__(self, seed: int, story: Story) -> None:
        self._story = story
        self._efficiency_fall = uniform(seed, "efficiency fall", 0.02, 0.03)
        self._flow = Wander(seed, "feed flow", 0.003, 3.0 * MINUTE_S)
        self._composition = Wander(seed, "feed composition", 0.001, 30.0 * MINUTE_S)
        self._temperature = Wander(seed, "feed temperature", 0.3, 20.0 * MINUTE_S)
        self._pressure = Wander(seed, "drum pressure", 0.1, 10.0 * MINUTE_S)

    def next(self, time_s: float) -> Conditions:
        """Conditions for the second that begins at `time_s`; call once per plant second."""
        flow, composition, temperature, fouling = self._events(time_s)
        return Conditions(
            feed_setpoint_factor=1.0 + flow,
            feed_wander_factor=1.0 + self._flow.next(),
            feed_methanol_shift_wt=composition + self._composition.next(),
            feed_temperature_shift_k=temperature + self._temperature.next(),
            drum_pressure_shift_kpa=self._pressure.next(),
            efficiency_shift=-fouling,
        )

    def _events(self, time_s: float) -> tuple[float, float, float, float]:
        """Shifts of feed flow [-], feed methanol [-], feed temperature [K] and efficiency [-]."""
        if self._story is Story.CALM:
            return 0.0, 0.0, 0.0, 0.0
        if self._story is Story.FEED_CUT:
            return -0.25 * _edge(time_s, 10.0), 0.0, 0.0, 0.0
        flow = 0.08 * (_edge(time_s, 20.0) - _edge(time_s, 160.0))
        composition = 0.025 * (_edge(time_s, 60.0) - _edge(time_s, 140.0))
        temperature = -8.0 * _edge(time_s, 100.0)
        fouling = self._efficiency_fall * min(1.0, time_s / EFFICIENCY_FALL_S)
        return flow, composition, temperature, fouling


def _edge(time_s: float, begin_min: float) -> float:
    """A smooth step from 0 to 1 that begins at `begin_min`."""
    share = min(1.0, max(0.0, (time_s - begin_min * MINUTE_S) / EDGE_S))
    return share * share * (3.0 - 2.0 * share)
