"""Reading: one Read call per cycle, values and statuses exactly as the server gives them."""

from __future__ import annotations

import asyncio
from datetime import datetime

from asyncua.ua.uaprotocol_auto import ServerState
from asyncua.ua.uatypes import DataValue

from edgectl.opcua.address import TagNode
from edgectl.opcua.connection import LINK_ERRORS
from edgectl.opcua.fit import SUBSTITUTE_STATUS
from edgectl.opcua.link import SERVER_NODES, Link
from edgectl.opcua.quality import BAD_NODE_ID_UNKNOWN, describe_status
from edgectl.opcua.session import PlantSession
from edgectl.opcua.values import instant_of, number_of, plain_of, reading_of, status_of
from edgectl.ports import Clock, PlantMismatchError, PlantUnreachableError
from edgectl.records.readings import Quality, Reading, TagSnapshot, quality_of

_NO_DATA_LEVEL = 1
"""Service levels 0 (maintenance) and 1 (no data) say: do not use (OPC 10000-4, 6.6.2.4.2)."""


class OpcUaTagSource:
    """The port `TagSource` over a plant session."""

    def __init__(self, session: PlantSession, clock: Clock) -> None:
        self._session = session
        self._clock = clock
        self._in_flight = False
        self.clock_offset_s: float | None = None
        """Server's clock minus plant time at the last read [s]; None while unknown."""
        self.server_running: bool | None = None
        """What the server said of itself at the last read; None while unknown."""

    async def read(self, cycle: int, timeout_s: float) -> TagSnapshot:
        """One Read call. Raises PlantUnreachableError or PlantMismatchError."""
        link = self._session.link()
        if link.mismatch is not None:
            raise PlantMismatchError(link.mismatch)
        if self._in_flight:
            raise PlantUnreachableError("the previous read has not been answered yet")
        self._in_flight = True
        asked_at = self._clock.plant_time()
        try:
            results = await self._answers(link, timeout_s)
        finally:
            self._in_flight = False
        received_at = self._clock.plant_time()
        self._judge_server(results, 0.5 * (asked_at + received_at))
        values = dict(zip(link.asked, results[len(SERVER_NODES) :], strict=True))
        readings = tuple(_reading(tag, values, link) for tag in self._session.tags)
        return TagSnapshot(cycle, received_at, readings)

    async def _answers(self, link: Link, timeout_s: float) -> list[DataValue]:
        """The results in time, or the link is abandoned: the test of a session is a good read."""
        try:
            async with asyncio.timeout(timeout_s):
                return await link.read()
        except TimeoutError as error:
            why = f"no answer to a read within {timeout_s:g} s"
            link.connection.abandon(why)
            raise PlantUnreachableError(why) from error
        except LINK_ERRORS as error:
            why = f"read failed ({error or type(error).__name__})"
            link.connection.abandon(why)
            raise PlantUnreachableError(why) from error

    def _judge_server(self, results: list[DataValue], plant_time: float) -> None:
        """Clock offset and state. Raises PlantUnreachableError when the server says: do not use."""
        state, current_time, level = results[: len(SERVER_NODES)]
        stamp = plain_of(current_time)
        server_time = instant_of(stamp) if isinstance(stamp, datetime) else None
        self.clock_offset_s = None if server_time is None else server_time - plant_time
        self.server_running = False
        if quality_of(status_of(state)) is Quality.BAD:
            raise PlantUnreachableError(
                f"plant server not running (its state is {describe_status(status_of(state))})"
            )
        number = int(number_of(state) or 0)
        if number != ServerState.Running:
            raise PlantUnreachableError(f"plant server not running (state {_state_name(number)})")
        service_level = number_of(level)
        if service_level is not None and service_level <= _NO_DATA_LEVEL:
            raise PlantUnreachableError(
                f"plant server not running (service level {service_level:.0f}: no data)"
            )
        self.server_running = True


def _state_name(number: int) -> str:
    return ServerState(number).name if number in list(ServerState) else str(number)


def _reading(tag: TagNode, values: dict[str, DataValue], link: Link) -> Reading:
    if tag.tag in values:
        return reading_of(tag.tag, values[tag.tag])
    status = SUBSTITUTE_STATUS.get(link.unusable[tag.tag].word, BAD_NODE_ID_UNKNOWN)
    return Reading(tag.tag, None, status, None, None)
