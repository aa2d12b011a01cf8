"""What the server says of itself, from the nodes read with every cycle."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Final

from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.uaprotocol_auto import ServerState
from asyncua.ua.uatypes import DataValue

from edgectl.opcua.quality import describe_status
from edgectl.opcua.values import instant_of, number_of, plain_of, status_of
from edgectl.records.readings import Quality, quality_of

SERVER_NODES: Final = (
    ObjectIds.Server_ServerStatus_State,
    ObjectIds.Server_ServerStatus_CurrentTime,
    ObjectIds.Server_ServiceLevel,
)
"""Read in the same call as the tags, before them."""

_NO_DATA_LEVEL: Final = 1
"""Service levels 0 (maintenance) and 1 (no data) say: do not use (OPC 10000-4, 6.6.2.4.2)."""


@dataclass(frozen=True, slots=True)
class ServerView:
    time: float | None
    """Its clock, seconds since the Unix epoch [s]."""
    problem: str | None
    """Why its data are not to be used; None when it runs."""


def view_server(results: Sequence[DataValue]) -> ServerView:
    """The view from the results for `SERVER_NODES`, in their order."""
    state, current_time, level = results
    stamp = plain_of(current_time)
    time = instant_of(stamp) if isinstance(stamp, datetime) else None
    return ServerView(time, _problem(state, level))


def _problem(state: DataValue, level: DataValue) -> str | None:
    if quality_of(status_of(state)) is Quality.BAD:
        return f"plant server not running (its state is {describe_status(status_of(state))})"
    number = number_of(state)
    if number != ServerState.Running:
        known = number is not None and number in list(ServerState)
        name = ServerState(int(number)).name if number is not None and known else str(number)
        return f"plant server not running (state {name})"
    service_level = number_of(level)
    if service_level is not None and service_level <= _NO_DATA_LEVEL:
        return f"plant server not running (service level {service_level:.0f}: no data)"
    return None
