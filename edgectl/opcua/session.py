"""The supervisor of the connection: opens it, watches it, opens another when it is lost.

Theory of operation. One background task owns the connection. It opens one,
surveys the nodes, tests it with a good read and only then offers it to source
and sink as a `Link`. Whoever finds it unusable abandons its connection; the task
closes that and opens a new one, with growing pauses between failures. Nobody
waits for it: while there is no link, `link()` fails at once and says when the
next attempt is due. What is wrong with the settings (user, security) is tried again
only at the slowest pace, and never with other settings.
"""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import Sequence
from dataclasses import dataclass
from random import Random
from types import TracebackType
from typing import NoReturn, Self

from edgectl.opcua.address import AdviceNodes, ServerAddress, TagNode
from edgectl.opcua.connection import LINK_ERRORS, Connection, ConnectRefusedError, open_connection
from edgectl.opcua.link import Link, Seen, make_link
from edgectl.ports import PlantMismatchError, PlantUnreachableError, PortError


@dataclass(frozen=True, slots=True)
class Backoff:
    """Pauses between attempts, wall seconds."""

    first_s: float = 1.0
    most_s: float = 60.0
    steady_after_s: float = 10.0
    """A connection that lasted this long starts the count anew when it is lost."""
    recheck_s: float = 60.0
    """How often nodes that do not fit the site file are looked at again."""

    def pause_s(self, failures: int, rng: Random) -> float:
        """Doubling up to `most_s`; a random half, so that many clients do not come at once."""
        longest = min(self.most_s, self.first_s * 2.0 ** min(failures - 1, 30))
        return longest * rng.uniform(0.5, 1.0)


class PlantSession:
    """Keeps a link to the plant's server. Use as an async context manager."""

    def __init__(
        self,
        address: ServerAddress,
        tags: Sequence[TagNode],
        advice: AdviceNodes | None,
        rng: Random,
        backoff: Backoff | None = None,
    ) -> None:
        self.address = address
        self.tags = tuple(tags)
        self.advice = advice
        self._rng = rng
        self._backoff = backoff or Backoff()
        self._link: Link | None = None
        self._problem: PortError = PlantUnreachableError(f"{address.endpoint}: not connected yet")
        self._failures = 0
        self._next_at: float | None = None
        """On the event loop's clock; None while an attempt is under way."""
        self._linked_since: float | None = None
        self._linked = asyncio.Event()
        self._first_seen: Seen = {}
        self._task: asyncio.Task[None] | None = None

    async def __aenter__(self) -> Self:
        # Kept, watched by `link()`, cancelled and awaited on exit.
        self._task = asyncio.create_task(self._supervise(), name="plant session")  # noqa: TID251
        return self

    async def __aexit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._task is not None:
            self._task.cancel()
            with contextlib.suppress(asyncio.CancelledError):
                await self._task

    def link(self) -> Link:
        """The link, at once. Raises what stands in the way."""
        if self._task is not None and self._task.done() and not self._task.cancelled():
            self._task.result()  # a bug in the supervisor must not look like a lost plant
        link, problem = self._link, self._problem
        if link is not None:
            if not link.connection.lost.is_set():
                return link
            problem = self._lost(link.connection)
        told = f"{problem}; reconnecting, attempt {self._failures + 1}, {self._when()}"
        if isinstance(problem, PlantMismatchError):
            raise PlantMismatchError(told) from problem
        raise PlantUnreachableError(told) from problem

    async def wait_linked(self, timeout_s: float) -> Link:
        """Wait for a link, for start-up and checks. Raises as `link` does after `timeout_s`."""
        deadline = asyncio.timeout(timeout_s)
        try:
            async with deadline:
                while self._link is None or self._link.connection.lost.is_set():
                    self._linked.clear()
                    await self._linked.wait()
        except TimeoutError:
            if not deadline.expired():
                raise
        return self.link()

    def _when(self) -> str:
        if self._next_at is None:
            return "now"
        return f"next in {max(0.0, self._next_at - asyncio.get_running_loop().time()):.0f} s"

    def _lost(self, connection: Connection) -> PlantUnreachableError:
        return PlantUnreachableError(f"{self.address.endpoint}: {connection.why_lost}")

    async def _supervise(self) -> None:
        loop = asyncio.get_running_loop()
        while True:
            self._next_at = self._linked_since = None
            try:
                await self._connect_and_watch()
            except PortError as error:
                self._problem = error
                pause_s = self._pause_s(error, loop.time())
            self._next_at = loop.time() + pause_s
            await asyncio.sleep(pause_s)

    def _pause_s(self, error: PortError, now: float) -> float:
        """Count the failure and say how long to wait before the next attempt."""
        linked_s = 0.0 if self._linked_since is None else now - self._linked_since
        if linked_s > self._backoff.steady_after_s:
            self._failures = 0
            return 0.0
        self._failures += 1
        if isinstance(error, ConnectRefusedError) and error.needs_a_person:
            return self._backoff.most_s
        return self._backoff.pause_s(self._failures, self._rng)

    async def _connect_and_watch(self) -> NoReturn:
        """One connection from opening to closing. Always raises: it ends when it is lost."""
        connection = await open_connection(self.address)
        try:
            while True:
                self._link = await self._ready(connection)
                if self._linked_since is None:
                    self._linked_since = asyncio.get_running_loop().time()
                self._linked.set()
                if await self._lost_within(connection, self._recheck_s(self._link)):
                    raise self._lost(connection)
        finally:
            self._link = None
            await connection.close()

    async def _ready(self, connection: Connection) -> Link:
        try:
            async with asyncio.timeout(self.address.connect_timeout_s):
                return await make_link(connection, self.tags, self.advice, self._first_seen)
        except LINK_ERRORS as error:
            raise PlantUnreachableError(
                f"{self.address.endpoint}: connected, but reading the nodes failed "
                f"({error or type(error).__name__})"
            ) from error

    def _recheck_s(self, link: Link) -> float | None:
        return None if link.complete else self._backoff.recheck_s

    @staticmethod
    async def _lost_within(connection: Connection, timeout_s: float | None) -> bool:
        try:
            async with asyncio.timeout(timeout_s):
                await connection.lost.wait()
        except TimeoutError:
            return False
        return True
