"""Cycle after cycle, and the end: withdraw, say so, write it down.

The runtime ends by `max_cycles`, by `stop` (SIGTERM, Ctrl-C) or by a bug. In each
case the advice is withdrawn first; after a bug the exception goes on, the service
starts anew, and the start is the recovery.
"""

from __future__ import annotations

import asyncio
import contextlib
import gc
import signal
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Final

from edgectl.cycle.policies import Policies
from edgectl.ports import NotJournalledError
from edgectl.records.cycle_record import ClosingRecord, OpeningRecord, WithdrawalRecord
from edgectl.records.entries import EntryKind
from edgectl.runtime.bookkeeping import Record, entry
from edgectl.runtime.lag import LagProbe
from edgectl.runtime.loop import CycleReport, Loop, Ports
from edgectl.runtime.restore import Restored
from edgectl.runtime.schedule import Grid, Tick

Observer = Callable[[CycleReport], None]
"""Called after each cycle, on the event loop: it must not wait."""

STOPPING: Final = "The runtime is stopping. Advice withdrawn."
FAULT: Final = "The runtime met a fault of its own and ends. Advice withdrawn."


@dataclass(frozen=True, slots=True)
class Ending:
    """How a run ended."""

    reason: str
    """`finished` or `stopping`."""
    cycles: int
    state_journalled: bool
    """The closing entry is durable."""


class Runtime:
    """The whole of it, on ports that somebody else opened and will close.

    Parameters
    ----------
    ports : Ports
        The edges.
    policies : Policies
        See `runtime/policies.py`.
    opening : OpeningRecord
        Becomes the first entry; its provenance is in every record.
    begin : Restored
        Where to begin, from `runtime/restore.py`.
    observers : sequence of Observer
        The service watchdog, a live view.
    lag : LagProbe or None
        None: one with its usual interval.
    """

    def __init__(
        self,
        ports: Ports,
        policies: Policies,
        opening: OpeningRecord,
        begin: Restored,
        observers: Sequence[Observer] = (),
        lag: LagProbe | None = None,
    ) -> None:
        self._ports = ports
        self._policies = policies
        self._opening = opening
        self._observers = tuple(observers)
        self._lag = lag or LagProbe(ports.clock)
        self._first_cycle = begin.first_cycle
        self._cycles = 0
        self._opened = False
        self.loop = Loop(ports, policies, opening.provenance, begin.state, self._lag)
        self.stop = asyncio.Event()
        """Set it to end the run, in the middle of a cycle if need be."""

    async def run(self, max_cycles: int | None = None) -> Ending:
        """Run until `stop` is set or so many cycles are over. Bugs are raised, advice withdrawn."""
        self._opened = await self._write_down(EntryKind.OPENED, self._opening)
        reason, sentence = "fault", FAULT
        try:
            await self._until_stopped(max_cycles)
            reason = "stopping" if self.stop.is_set() else "finished"
            sentence = STOPPING
        finally:
            journalled = await self._end(reason, sentence)
        return Ending(reason, self._cycles, journalled)

    async def _until_stopped(self, max_cycles: int | None) -> None:
        with faults_as_themselves():
            async with asyncio.TaskGroup() as group:
                cycles = group.create_task(self._run_cycles(max_cycles), name="cycles")
                helpers = [
                    group.create_task(self._lag.run(), name="lag probe"),
                    group.create_task(self._cancel_when_stopped(cycles), name="stop"),
                ]
                cycles.add_done_callback(lambda _: [helper.cancel() for helper in helpers])

    async def _cancel_when_stopped(self, cycles: asyncio.Task[None]) -> None:
        await self.stop.wait()
        # A cycle's state takes effect at its end, so one that is cut short never was.
        cycles.cancel()

    async def _run_cycles(self, max_cycles: int | None) -> None:
        clock, policy = self._ports.clock, self._policies.cycle
        grid, index, skipped = Grid(clock.plant_time(), policy.period_s), 0, 0
        while max_cycles is None or self._cycles < max_cycles:
            await clock.sleep_until(grid.instant(index))
            now, wall = clock.plant_time(), clock.wall()
            late_s = max(0.0, now - grid.instant(index)) / clock.speed
            tick = Tick(self._first_cycle + self._cycles, now, wall, late_s, skipped)
            report = await self.loop.run_cycle(tick)
            self._cycles += 1
            if not self._opened and report.receipt is not None:
                # The journal takes entries again; late is better than never.
                self._opened = await self._write_down(EntryKind.OPENED, self._opening)
            for observer in self._observers:
                observer(report)
            if self._cycles == policy.warm_up_cycles:
                # What is alive by now stays alive: the collector need not look at it again.
                gc.freeze()
            following = grid.following(index, clock.plant_time())
            index, skipped = following, following - index - 1

    async def _end(self, reason: str, sentence: str) -> bool:
        timeout_s = self._policies.cycle.write_timeout_s
        if self._ports.sink is not None:
            delivery = await self._ports.sink.withdraw(reason, sentence, timeout_s)
            last = self.loop.state.advice
            moves = () if last is None else last.moves
            withdrawal = WithdrawalRecord(reason, sentence, delivery, moves)
            await self._write_down(EntryKind.WITHDRAWAL, withdrawal)
        return await self._write_down(
            EntryKind.CLOSED, ClosingRecord(reason, sentence, self._cycles)
        )

    async def _write_down(self, kind: EntryKind, record: Record) -> bool:
        """Whether it is durable. Without a record there is no valid advice, but the run goes on."""
        made = entry(kind, None, self._ports.clock.plant_time(), record)
        try:
            await self._ports.journal.append(made, self._policies.cycle.journal_wait_s)
        except NotJournalledError:
            return False
        return True


def stop_on_signals(runtime: Runtime) -> None:
    """SIGTERM and SIGINT end the run in good order. Call it on the running event loop."""
    loop = asyncio.get_running_loop()
    for number in (signal.SIGTERM, signal.SIGINT):
        loop.add_signal_handler(number, runtime.stop.set)


@contextlib.contextmanager
def faults_as_themselves() -> Iterator[None]:
    """A task group wraps what its tasks raise; a single fault is told as it is."""
    try:
        yield
    except BaseExceptionGroup as group:
        if len(group.exceptions) == 1:
            raise group.exceptions[0] from group
        raise
