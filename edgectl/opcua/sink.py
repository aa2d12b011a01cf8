"""Publishing advice so that no reader ever sees half of it taken for valid.

The order of the writes is the protection: first `valid` falls, then the values
change, then the stamps, and only when the server has accepted every single one
does `valid` rise again, in a write of its own. Whatever fails on the way ends
in a withdrawal. What cannot be withdrawn (the connection is gone) expires at the
plant: its side checks the heartbeat and `valid_until`.
"""

from __future__ import annotations

import asyncio
from collections.abc import Iterable, Iterator
from typing import Final

from edgectl.opcua.connection import LINK_ERRORS
from edgectl.opcua.link import Link
from edgectl.opcua.quality import BAD_NODE_ID_UNKNOWN, status_name
from edgectl.opcua.session import PlantSession
from edgectl.opcua.values import Plain, UnwritableValueError
from edgectl.ports import PortError
from edgectl.records.advice import Advice, Delivery, ItemStatus, Standing

_PUBLISH_SHARE: Final = 0.7
"""Part of the time for the writes; the rest is kept back for the withdrawal."""

Fields = dict[str, Plain]
"""Values by the name of their advisory node."""


class _NotWrittenError(Exception):
    """A write was refused, lost or impossible; the message says which."""


def publishing_steps(advice: Advice, heartbeat: int) -> Iterator[Fields]:
    """The writes that publish an advice, in their order. A target of None is not written."""
    yield {"valid": False}
    values: Fields = {}
    for move in advice.moves:
        if move.target is not None:
            values[f"{move.mv}.target"] = move.target
        values[f"{move.mv}.reason"] = move.reason
    values |= {
        "standing": str(advice.standing),
        "reason": advice.reason,
        "sentence": advice.sentence,
    }
    if advice.made_at is not None:
        values["made_at"] = advice.made_at
    yield values
    yield {"valid_until": advice.valid_until, "cycle": advice.cycle, "heartbeat": heartbeat}
    if advice.valid:
        yield {"valid": True}


def withdrawing_steps(reason: str, sentence: str) -> Iterator[Fields]:
    """`valid` falls first, alone: the words may wait."""
    yield {"valid": False}
    yield {"standing": str(Standing.SILENT), "reason": reason, "sentence": sentence}


class _Writing:
    """The writes of one delivery: sends step after step and keeps every status."""

    def __init__(self, link: Link) -> None:
        self._link = link
        self.items: list[ItemStatus] = []
        self.valid = False
        """Whether `valid=true` of this delivery stands, or may stand, at the server."""
        self.unanswered = False
        """Whether the last run of steps ended for want of an answer."""

    def abandon(self, why: str) -> None:
        self._link.connection.abandon(why)

    async def run(self, steps: Iterable[Fields], timeout_s: float) -> str | None:
        """What went wrong, or None. FenceError is a bug and passes through."""
        budget = asyncio.timeout(timeout_s)
        self.unanswered = False
        try:
            async with budget:
                for fields in steps:
                    await self._write(fields)
        except _NotWrittenError as error:
            return str(error)
        except TimeoutError:
            if not budget.expired():
                raise
            self.unanswered = True
            return f"the server did not answer the writes within {timeout_s:.1f} s"
        return None

    async def _write(self, fields: Fields) -> None:
        nodes = self._link.advisory
        missing = [name for name in fields if name not in nodes]
        if missing:
            self.items += [ItemStatus(name, BAD_NODE_ID_UNKNOWN) for name in missing]
            raise _NotWrittenError(
                self._link.advisory_problem or f"no advisory node for {', '.join(missing)}"
            )
        # Until the answer comes nobody knows; if it never comes, it may well stand.
        self.valid = self.valid or fields.get("valid") is True
        try:
            codes = await self._link.fence.send(
                [(nodes[name], value) for name, value in fields.items()]
            )
        except UnwritableValueError as error:
            raise _NotWrittenError(f"not written: {error}") from error
        except LINK_ERRORS as error:
            why = f"write failed ({error or type(error).__name__})"
            self.abandon(why)
            raise _NotWrittenError(why) from error
        answers = dict(zip(fields, codes, strict=True))
        self.items += [ItemStatus(name, code) for name, code in answers.items()]
        if "valid" in fields:
            if is_plain_good(answers["valid"]):
                self.valid = fields["valid"] is True
            elif fields["valid"] is True:
                self.valid = False
        refused = [f"{n} ({status_name(c)})" for n, c in answers.items() if not is_plain_good(c)]
        if refused:
            raise _NotWrittenError(f"the server refused {', '.join(refused)}")


class OpcUaAdviceSink:
    """The port `AdviceSink` over a plant session: it has no way around the fence."""

    def __init__(self, session: PlantSession) -> None:
        self._session = session
        self._cycle = 0

    async def publish(self, advice: Advice, heartbeat: int, timeout_s: float) -> Delivery:
        """Write `valid=false`, the values, the stamps, `valid`; withdraw when anything fails."""
        self._cycle = advice.cycle
        try:
            writing = _Writing(self._session.link())
        except PortError as error:
            return self._nothing_written(error)
        problem = await writing.run(publishing_steps(advice, heartbeat), _PUBLISH_SHARE * timeout_s)
        if problem is None:
            return Delivery(advice.cycle, advice.valid, True, tuple(writing.items), None)
        steps = withdrawing_steps("not_published", f"Advice withdrawn: {problem}.")
        return await self._withdrawn(writing, steps, (1.0 - _PUBLISH_SHARE) * timeout_s, problem)

    async def withdraw(self, reason: str, sentence: str, timeout_s: float) -> Delivery:
        """Write `valid=false`, then the reason. The delivery carries the newest cycle."""
        try:
            writing = _Writing(self._session.link())
        except PortError as error:
            return self._nothing_written(error)
        return await self._withdrawn(writing, withdrawing_steps(reason, sentence), timeout_s, None)

    def _nothing_written(self, error: PortError) -> Delivery:
        return Delivery(self._cycle, False, False, (), f"nothing written: {error}")

    async def _withdrawn(
        self, writing: _Writing, steps: Iterable[Fields], timeout_s: float, problem: str | None
    ) -> Delivery:
        """The delivery after a withdrawal; `problem` is what led to it, if anything."""
        second = await writing.run(steps, timeout_s)
        if writing.unanswered:
            writing.abandon("no answer to a withdrawal")
        if second is not None and second != problem:
            problem = f"{problem}; withdrawing: {second}" if problem else second
        if writing.valid:
            problem = f"{problem}; valid=true may stand at the server until valid_until"
        return Delivery(self._cycle, writing.valid, problem is None, tuple(writing.items), problem)


def is_plain_good(status_code: int) -> bool:
    """Accepted as it was sent. GoodClamped, for one, would be another value."""
    return status_code & 0xFFFF0000 == 0
