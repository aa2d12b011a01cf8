"""Rules of `[advisory]`, the write fence.

They read the raw text of the file, not the validated sections: whatever else is
wrong, an advisory node that the plant listens to must be named.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any, Final

from edgectl.settings.findings import MISSING, Complaint, dotted, nearest
from edgectl.settings.lines import Path
from edgectl.settings.nodes import BASE_NAMESPACE, NodeTextError, SameNode, same_node
from edgectl.settings.parts import Parts, table


def advisory_nodes_are_apart(parts: Parts) -> Iterator[Complaint]:
    """No advisory node is read as a tag, is an MV's setpoint, or is another advisory node."""
    taken: dict[SameNode, str] = {}
    for name, tag in table(parts.raw, "tags").items():
        node = _node(tag.get("node")) if isinstance(tag, dict) else None
        if node is not None:
            taken.setdefault(node, _use_of(parts, name))
    for path, node, text in _advisory_nodes(table(parts.raw, "advisory"), ("advisory",)):
        if node in taken:
            yield Complaint(
                path,
                text,
                "a node of its own, that nothing reads and no loop listens to",
                f"it is already {taken[node]}; give another node",
            )
        elif node.uri == BASE_NAMESPACE:
            yield Complaint(
                path,
                text,
                "a node of the site's own namespace",
                "this namespace belongs to the server itself; give another node",
            )
        taken.setdefault(node, f"`{dotted(path)}`")


def _use_of(parts: Parts, tag: str) -> str:
    for mv, body in table(parts.raw, "mv").items():
        for use, words in (("position", "setpoint"), ("output", "output"), ("mode", "mode")):
            if isinstance(body, dict) and body.get(use) == tag:
                return f"the {words} of MV {mv} (tag {tag})"
    return f"read as tag {tag}"


def _advisory_nodes(tree: Any, path: Path) -> Iterator[tuple[Path, SameNode, str]]:
    for key, value in tree.items():
        if isinstance(value, dict):
            yield from _advisory_nodes(value, (*path, key))
        elif (node := _node(value)) is not None:
            yield (*path, key), node, value


def _node(value: object) -> SameNode | None:
    try:
        return same_node(value) if isinstance(value, str) else None
    except NodeTextError:
        return None


def advisory_moves_are_the_mvs(parts: Parts) -> Iterator[Complaint]:
    """`[advisory.moves.*]` has one section for each MV and no other."""
    if "advisory" not in parts.raw or not parts.names("mv"):
        return
    moves = table(table(parts.raw, "advisory"), "moves")
    mvs = parts.names("mv")
    for name in moves:
        if name not in mvs:
            yield Complaint(
                ("advisory", "moves", name),
                name,
                f"the name of an MV: {', '.join(mvs)}",
                nearest(name, mvs) or "remove it, or add the MV",
            )
    for name in mvs:
        if name not in moves:
            yield Complaint(
                ("advisory", "moves", name),
                MISSING,
                "one section for each MV",
                f"add [{dotted(('advisory', 'moves', name))}] with `target` and `reason`",
            )


RULES: Final[tuple[Callable[[Parts], Iterator[Complaint]], ...]] = (
    advisory_nodes_are_apart,
    advisory_moves_are_the_mvs,
)
