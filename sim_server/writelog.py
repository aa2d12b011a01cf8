"""The server's own record of every write it accepted or refused.

JSON lines, flushed one by one, so that a killed server loses none. Together
with the runtime's journal it shows that nothing outside the write fence was
ever written: the two are kept by different processes.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Iterator
from dataclasses import asdict, dataclass
from datetime import datetime
from pathlib import Path
from typing import Final, TextIO

TEXT_LIMIT: Final = 2000


@dataclass(frozen=True, slots=True)
class WriteEntry:
    """One item of one write, by a client or by the simulated crew."""

    plant_time: float
    """Seconds since the Unix epoch, plant time [s]."""
    wall_s: float
    """CLOCK_MONOTONIC [s]."""
    user: str
    """`advisor`, `board`, `anonymous`; `board (crew)`, `board (drill)` for the simulated people."""
    node: str
    value: float | int | bool | str | None
    """Times as ISO 8601; `NaN`, `Infinity` and `-Infinity` as words."""
    status_code: int
    accepted: bool


class WriteLog:
    """Appends entries to a file, or drops them when no file was asked for."""

    def __init__(self, file: TextIO | None, now: Callable[[], tuple[float, float]]) -> None:
        """`now` gives plant time and monotonic wall time, both in seconds."""
        self._file = file
        self._now = now

    def record(self, user: str, node: str, value: object, status_code: int) -> None:
        plant_time, wall_s = self._now()
        entry = WriteEntry(
            plant_time=plant_time,
            wall_s=wall_s,
            user=user,
            node=node,
            value=_plain(value),
            status_code=status_code,
            accepted=status_code >> 30 == 0,
        )
        if self._file is not None:
            self._file.write(json.dumps(asdict(entry), allow_nan=False) + "\n")
            self._file.flush()


def read_write_log(path: Path) -> Iterator[WriteEntry]:
    """The entries of a write log, oldest first."""
    with path.open(encoding="utf-8") as lines:
        for line in lines:
            yield WriteEntry(**json.loads(line))


def _plain(value: object) -> float | int | bool | str | None:
    """The value as JSON can hold it."""
    if value is None or isinstance(value, bool | int):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else json.dumps(value)
    if isinstance(value, datetime):
        return value.isoformat()
    return str(value)[:TEXT_LIMIT]
