"""What this room must know, taken from a site file."""

from __future__ import annotations

from typing import Final

from edgectl.opcua.address import AdviceNodes, MoveNodes, ServerAddress, TagNode
from edgectl.settings.site import Site

_STEP_TIMEOUT_S: Final = 4.0


def server_address(site: Site, password: str | None) -> ServerAddress:
    """The server as the site file names it; the password comes from elsewhere."""
    step_timeout_s = max(_STEP_TIMEOUT_S, site.server.read_timeout_s, site.server.write_timeout_s)
    return ServerAddress(
        endpoint=site.server.endpoint,
        security=site.server.security,
        allow_insecure=site.server.allow_insecure,
        user=site.server.user,
        password=password,
        # The library's own limit for each call must not undercut the cycle's.
        step_timeout_s=step_timeout_s,
        connect_timeout_s=3.0 * step_timeout_s,
    )


def tag_nodes(site: Site) -> tuple[TagNode, ...]:
    """The tags in the order of the site file."""
    return tuple(
        TagNode(
            tag=name,
            node=tag.node,
            unit=tag.unit,
            low=tag.low,
            high=tag.high,
            required=tag.required,
            stale_after_s=tag.stale_limit_s,
        )
        for name, tag in site.tags.items()
    )


def advice_nodes(site: Site) -> AdviceNodes | None:
    """The nodes inside the write fence; None when the site file has no advisory section."""
    advisory = site.advisory
    if advisory is None:
        return None
    return AdviceNodes(
        valid=advisory.valid,
        valid_until=advisory.valid_until,
        made_at=advisory.made_at,
        cycle=advisory.cycle,
        heartbeat=advisory.heartbeat,
        standing=advisory.standing,
        reason=advisory.reason,
        sentence=advisory.sentence,
        moves={mv: MoveNodes(move.target, move.reason) for mv, move in advisory.moves.items()},
    )
