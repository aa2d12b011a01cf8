"""The figures of a demo: from the journal, from the plant's write log, from its true values."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from edgectl.settings import Site
from edgectl.settings.nodes import same_node

ADVISOR = "advisor"


@dataclass(frozen=True, slots=True)
class WriteCounts:
    """What the plant's server wrote down about our user."""

    accepted: int
    refused: int
    outside_fence: int
    """Accepted or refused: it should never have been tried."""


def count_writes(lines: Iterable[str], fence: frozenset[str]) -> WriteCounts:
    """Count the advisor's writes in a write log (JSON lines).

    Raises
    ------
    ValueError
        A line is not an entry. A last line that a killed server left unfinished is passed over.
    """
    # The server names a node by its string identifier, and adds `#` for any attribute but Value.
    allowed = {same_node(node).identifier for node in fence}
    accepted = refused = outside = 0
    for line in lines:
        if not line.endswith("\n"):
            continue
        entry = json.loads(line)
        if entry["user"] != ADVISOR:
            continue
        accepted += bool(entry["accepted"])
        refused += not entry["accepted"]
        outside += entry["node"] not in allowed
    return WriteCounts(accepted, refused, outside)


def count_writes_in(path: Path, fence: frozenset[str]) -> WriteCounts:
    with path.open(encoding="utf-8") as lines:
        return count_writes(lines, fence)


def aims(site: Site) -> dict[str, float]:
    """Where each quality is to be held: its setpoint, or the planned limit it may walk to."""
    found = {}
    for name, cv in site.cv.items():
        aim = cv.high if cv.setpoint is None else cv.setpoint
        if cv.role == "quality" and isinstance(aim, float | int):
            found[name] = float(aim)
    return found


def cv_scores(site: Site, score: Mapping[str, Any]) -> dict[str, dict[str, object]]:
    """By tag: role, unit, share inside the hard limits, mean error from the aim.

    The plant scores its products under the names that the site file gives its CVs.
    """
    qualities = {quality["name"]: quality for quality in score["qualities"]}
    found: dict[str, dict[str, object]] = {}
    for name, cv in site.cv.items():
        quality = qualities.get(name)
        if quality is not None:
            found[cv.measured] = {
                "cv": name,
                "role": cv.role,
                "unit": cv.unit,
                "in_limits_fraction": quality["in_spec_fraction"],
                "mean": quality["mean"],
                "mean_abs_error": quality["mean_abs_error"],
            }
    return found
