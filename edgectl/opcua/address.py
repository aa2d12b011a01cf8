"""What this room must know of a site: the server, its tags and its advisory nodes."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from edgectl.opcua.values import FieldKind


@dataclass(frozen=True, slots=True)
class ServerAddress:
    """Where the plant's server is, and as whom we come.

    `security` is `none` or the name of a security policy. Only `none` can be
    used so far, and only when `allow_insecure` says so: certificates have their
    place in `connection.choose_endpoint`.
    """

    endpoint: str
    security: str = "none"
    allow_insecure: bool = False
    user: str | None = None
    password: str | None = field(default=None, repr=False)
    step_timeout_s: float = 4.0
    """Wall seconds for each call while connecting."""
    connect_timeout_s: float = 12.0
    """Wall seconds for a whole connect, survey of the nodes included."""


@dataclass(frozen=True, slots=True)
class TagNode:
    """One tag of the site file and the node it is read from."""

    tag: str
    node: str
    """`nsu=<namespace URI>;s=...`: an index may change with any server upgrade."""
    unit: str
    low: float
    high: float
    required: bool = False
    stale_after_s: float | None = None


@dataclass(frozen=True, slots=True)
class MoveNodes:
    """Where one MV's suggestion is written."""

    target: str
    reason: str


@dataclass(frozen=True, slots=True)
class AdviceNodes:
    """Every node that may ever be written."""

    valid: str
    valid_until: str
    made_at: str
    cycle: str
    heartbeat: str
    standing: str
    reason: str
    sentence: str
    moves: Mapping[str, MoveNodes]

    def fields(self) -> Iterator[tuple[str, str, FieldKind]]:
        """Name, node and kind of each node, e.g. `("FIC-2103.target", "nsu=...", NUMBER)`."""
        yield "valid", self.valid, FieldKind.FLAG
        yield "valid_until", self.valid_until, FieldKind.INSTANT
        yield "made_at", self.made_at, FieldKind.INSTANT
        yield "cycle", self.cycle, FieldKind.COUNT
        yield "heartbeat", self.heartbeat, FieldKind.COUNT
        yield "standing", self.standing, FieldKind.TEXT
        yield "reason", self.reason, FieldKind.TEXT
        yield "sentence", self.sentence, FieldKind.TEXT
        for mv, nodes in self.moves.items():
            yield f"{mv}.target", nodes.target, FieldKind.NUMBER
            yield f"{mv}.reason", nodes.reason, FieldKind.TEXT
