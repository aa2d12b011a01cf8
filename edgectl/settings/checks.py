"""The rules between keys. Each is a small generator; its docstring is its line in the reference.

A rule gets whatever parts of the file are sound and complains about the rest of
its own subject only: a missing or broken section is somebody else's finding.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from typing import Any, Final, TypeAlias, TypeGuard

from edgectl.settings import checks_advisory, checks_moves, checks_plant, checks_tags
from edgectl.settings.findings import Complaint, shown
from edgectl.settings.lines import Path
from edgectl.settings.parts import Parts

Rule: TypeAlias = Callable[[Parts], Iterator[Complaint]]

_PAIRS: Final = (
    ("low", "high"),
    ("hard_low", "hard_high"),
    ("low_k", "high_k"),
    ("feed_composition_low", "feed_composition_high"),
    ("tracking_duty_low_kw", "tracking_duty_high_kw"),
)


def low_below_high(parts: Parts) -> Iterator[Complaint]:
    """Every `low` is below its `high`."""
    # On the raw tree, so that another mistake in the same section does not hide this one.
    yield from _low_below_high(parts.raw, ())


def _low_below_high(tree: Any, path: Path) -> Iterator[Complaint]:
    if isinstance(tree, list):
        for index, inner in enumerate(tree):
            yield from _low_below_high(inner, (*path, index))
    if not isinstance(tree, dict):
        return
    for low_key, high_key in _PAIRS:
        low, high = tree.get(low_key), tree.get(high_key)
        if _is_number(low) and _is_number(high) and low >= high:
            yield Complaint(
                (*path, low_key),
                low,
                f"below `{high_key}`, which is {shown(high)}",
                f"lower `{low_key}` or raise `{high_key}`; were they swapped?",
            )
    for key, inner in tree.items():
        yield from _low_below_high(inner, (*path, key))


def _is_number(value: object) -> TypeGuard[int | float]:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    # Comparing, because math.isfinite cannot take whole numbers beyond a float's range.
    return -math.inf < value < math.inf


RULES: Final[tuple[Rule, ...]] = (
    low_below_high,
    *checks_plant.RULES,
    *checks_tags.RULES,
    *checks_moves.RULES,
    *checks_advisory.RULES,
)


def cross_complaints(parts: Parts) -> Iterator[Complaint]:
    """What every rule has to say."""
    for rule in RULES:
        yield from rule(parts)
