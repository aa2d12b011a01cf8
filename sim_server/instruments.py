"""Transmitters and analysers: what the plant shows of its true state."""

from __future__ import annotations

import math
from collections import deque
from typing import Final

from sim_server.plant_data import AnalyserData, InstrumentData
from sim_server.randomness import NormalStream, generator, uniform
from sim_server.signals import GOOD, Signal

HOUR_S: Final = 3600.0


class Drift:
    """A slow seeded bias that never leaves its bound.

    Parameters
    ----------
    seed : int
        The plant's seed [-].
    tag : str
        Whose bias it is.
    bound : float
        Largest size [instrument's unit, or fraction of the reading].
    """

    def __init__(self, seed: int, tag: str, bound: float) -> None:
        random = generator(seed, f"drift {tag}")
        self._offset = 0.6 * bound * float(random.uniform(-1.0, 1.0))
        self._swing = 0.4 * bound * float(random.uniform(0.0, 1.0))
        self._rate = 2.0 * math.pi / (HOUR_S * float(random.uniform(4.0, 12.0)))
        self._phase = float(random.uniform(0.0, 2.0 * math.pi))

    def at(self, time_s: float) -> float:
        """The bias at a plant time."""
        return self._offset + self._swing * math.sin(self._rate * time_s + self._phase)


class Transmitter:
    """One plain instrument: bias, noise, range.

    Parameters
    ----------
    seed : int
        The plant's seed [-].
    data : InstrumentData
        Range, noise and drift.
    """

    def __init__(self, seed: int, data: InstrumentData) -> None:
        self._data = data
        self._normals = NormalStream(seed, f"noise {data.tag}")
        # A flow meter is wrong in proportion to its reading, the others by an amount.
        self._relative = data.relative_noise > 0.0
        self._drift = Drift(seed, data.tag, data.relative_drift if self._relative else data.drift)

    def read(self, true_value: float, time_s: float) -> float:
        """The reading of a true value; draws one number, so call once per plant second."""
        data = self._data
        normal = self._normals.next()
        bias = self._drift.at(time_s)
        if self._relative:
            value = true_value * (1.0 + bias + data.relative_noise * normal)
        else:
            value = true_value + bias + data.noise * normal
        return min(data.high, max(data.low, value))


class Analyser:
    """Sample and hold with cycle and dead time; one result per cycle.

    A result completes a delay after its sample was taken and carries its
    completion time. Samples that would have been taken before the plant's start
    see the steady state, and one such result is there from the beginning.

    Parameters
    ----------
    seed : int
        The plant's seed [-].
    data : AnalyserData
        Range, noise, cycle, and either a fixed delay or the laboratory's bounds.
    steady_value : float
        True value before the start [data's unit].
    """

    def __init__(self, seed: int, data: AnalyserData, steady_value: float) -> None:
        self._data = data
        self._normals = NormalStream(seed, f"noise {data.tag}")
        self._delays = generator(seed, f"delay {data.tag}")
        self._phase_s = data.first_sample_s or int(
            uniform(seed, f"phase {data.tag}", 0.0, data.cycle_s)
        )
        self._pending: deque[tuple[int, float]] = deque()
        # The samples under way at the start, oldest first, then those of the run.
        first = self._phase_s - data.cycle_s * (
            1 + (self._phase_s + self._longest_s) // data.cycle_s
        )
        self._next_sample_s = first
        self.result = Signal(steady_value, GOOD, float(first))
        while self._next_sample_s <= 0:
            self._take(steady_value)
        self._publish(0)

    def advance(self, true_value: float, time_s: int) -> None:
        """Pass one plant second; `true_value` is what a sample taken now contains."""
        if time_s == self._next_sample_s:
            self._take(true_value)
        self._publish(time_s)

    @property
    def _longest_s(self) -> int:
        return self._data.delay_s or self._data.delay_high_s

    def _take(self, true_value: float) -> None:
        data = self._data
        delay_s = data.delay_s or int(
            self._delays.integers(data.delay_low_s, data.delay_high_s, endpoint=True)
        )
        self._pending.append((self._next_sample_s + delay_s, true_value))
        self._next_sample_s += data.cycle_s

    def _publish(self, time_s: int) -> None:
        data = self._data
        while self._pending and self._pending[0][0] <= time_s:
            completed_s, true_value = self._pending.popleft()
            normal = self._normals.next()
            value = true_value * (1.0 + data.relative_noise * normal) + data.noise * normal
            self.result = Signal(min(data.high, max(data.low, value)), GOOD, float(completed_s))
