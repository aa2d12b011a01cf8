"""Random numbers that depend on the seed and a name alone.

Every instrument and every disturbance owns a stream and draws from it once per
plant second (or analyser cycle), whatever happens: so noise is the same in two
runs with the same seed and different actions.
"""

from __future__ import annotations

import zlib
from typing import Final

import numpy as np

BLOCK: Final = 1024


def generator(seed: int, name: str) -> np.random.Generator:
    """A generator of its own for each seed and name; the same on every machine."""
    return np.random.Generator(np.random.PCG64([seed, zlib.crc32(name.encode("utf-8"))]))


def uniform(seed: int, name: str, low: float, high: float) -> float:
    """One number between `low` and `high`, fixed by the seed and the name."""
    return float(generator(seed, name).uniform(low, high))


class NormalStream:
    """Standard normal numbers, drawn in blocks because single draws are slow."""

    def __init__(self, seed: int, name: str) -> None:
        self._generator = generator(seed, name)
        self._block: list[float] = []

    def next(self) -> float:
        if not self._block:
            self._block = self._generator.standard_normal(BLOCK).tolist()[::-1]
        return self._block.pop()
