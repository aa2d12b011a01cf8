"""Reading: one Read call per cycle, values and statuses exactly as the server gives them."""

from __future__ import annotations

import asyncio

from asyncua.ua.uatypes import DataValue

from edgectl.opcua.address import TagNode
from edgectl.opcua.connection import LINK_ERRORS
from edgectl.opcua.fit import SUBSTITUTE_STATUS
from edgectl.opcua.link import Link
from edgectl.opcua.quality import BAD_NODE_ID_UNKNOWN
from edgectl.opcua.server_view import SERVER_NODES, view_server
from edgectl.opcua.session import PlantSession
from edgectl.opcua.values import reading_of
from edgectl.ports import Clock, PlantMismatchError, PlantUnreachableError
from edgectl.records.readings import Reading, TagSnapshot


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
        server = view_server(results[: len(SERVER_NODES)])
        middle = 0.5 * (asked_at + received_at)
        self.clock_offset_s = None if server.time is None else server.time - middle
        self.server_running = server.problem is None
        if server.problem is not None:
            raise PlantUnreachableError(server.problem)
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


def _reading(tag: TagNode, values: dict[str, DataValue], link: Link) -> Reading:
    if tag.tag in values:
        return reading_of(tag.tag, values[tag.tag])
    status = SUBSTITUTE_STATUS.get(link.unusable[tag.tag].word, BAD_NODE_ID_UNKNOWN)
    return Reading(tag.tag, None, status, None, None)
