"""The run from its opening to its end, and what happens to a bug."""

from __future__ import annotations

import asyncio
import os
import signal
from typing import Any

import pytest

from edgectl.cycle.policies import Policies
from edgectl.records.cycle_record import LoopLag, OpeningRecord
from edgectl.records.entries import EntryKind
from edgectl.runtime.lag import LagProbe
from edgectl.runtime.loop import CycleReport, Ports
from edgectl.runtime.restore import cold
from edgectl.runtime.supervise import Ending, Runtime, stop_on_signals
from edgectl.testing.faults import Script
from edgectl.testing.memory_ports import MemoryJournal, MemorySink, MemorySolver, MemorySource
from edgectl.testing.story import WHO
from edgectl.testing.toy import ToyPlanner, ToyPlant
from edgectl.testing.virtual_time import EndlessWaitError, VirtualClock, run_virtual

OPENING = OpeningRecord(WHO, "toy", "toy", None, "cold: test", 1.0, 30.0, 20.0)


class House:
    """A runtime on in-memory edges."""

    def __init__(self, policies: Policies, *, published: bool = True) -> None:
        clock, script = VirtualClock(), Script()
        self.plant = ToyPlant(policies, clock.plant_time(), 1)
        self.journal = MemoryJournal(clock, script)
        self.sink = MemorySink(clock, script, self.journal, self.plant)
        source = MemorySource(self.plant, policies, clock, script)
        self.solver = MemorySolver(ToyPlanner(policies), policies, clock, script)
        self.reports: list[CycleReport] = []
        self.runtime = Runtime(
            Ports(source, self.sink if published else None, self.journal, self.solver, clock),
            policies,
            OPENING,
            cold("test"),
            (self.reports.append,),
            LagProbe(clock, 3600.0),
        )

    @property
    def kinds(self) -> list[EntryKind]:
        return [row.entry.kind for row in self.journal.rows]


def test_a_run_opens_decides_delivers_withdraws_and_closes(policies: Policies) -> None:
    async def main() -> tuple[House, Ending]:
        house = House(policies)
        return house, await house.runtime.run(2)

    house, ending = run_virtual(main())
    assert ending == Ending("finished", 2, True)
    assert house.kinds == [
        EntryKind.OPENED,
        EntryKind.DECISION, EntryKind.DELIVERY,
        EntryKind.DECISION, EntryKind.DELIVERY,
        EntryKind.WITHDRAWAL, EntryKind.CLOSED,
    ]  # fmt: skip


def test_without_advisory_nodes_it_plans_and_journals_and_publishes_nothing(
    policies: Policies,
) -> None:
    async def main() -> House:
        house = House(policies, published=False)
        await house.runtime.run(6)
        return house

    house = run_virtual(main())
    assert house.sink.log == []
    assert EntryKind.WITHDRAWAL not in house.kinds
    assert house.reports[-1].advice.standing.value == "advising"
    assert not house.reports[-1].delivery.valid


@pytest.mark.parametrize("after_s", [100.0, 120.2, 120.41, 120.43])
def test_stopped_in_the_middle_of_whatever_it_withdraws(policies: Policies, after_s: float) -> None:
    """Between cycles, while solving, while journalling, while publishing."""

    async def main() -> tuple[House, Ending, float]:
        house, loop = House(policies), asyncio.get_running_loop()
        loop.call_later(after_s, house.runtime.stop.set)
        ending = await house.runtime.run()
        return house, ending, loop.time()

    house, ending, ended_at = run_virtual(main())
    assert ending.reason == "stopping"
    assert ended_at < after_s + 1.0
    assert house.sink.nodes["valid"] is False
    assert house.sink.nodes["reason"] == "stopping"
    assert house.kinds[-2:] == [EntryKind.WITHDRAWAL, EntryKind.CLOSED]


def test_a_signal_stops_it(policies: Policies) -> None:
    async def main() -> Ending:
        house = House(policies)
        stop_on_signals(house.runtime)
        asyncio.get_running_loop().call_later(40.0, os.kill, os.getpid(), signal.SIGTERM)
        return await house.runtime.run(1000)

    ending = run_virtual(main())
    assert (ending.reason, ending.cycles) == ("stopping", 2)


def test_a_bug_withdraws_and_goes_on_as_itself(
    policies: Policies, monkeypatch: pytest.MonkeyPatch
) -> None:
    class SurpriseError(Exception):
        pass

    async def broken(self: MemorySolver, request: Any, deadline: float) -> Any:
        raise SurpriseError("nobody expected this")

    monkeypatch.setattr(MemorySolver, "solve", broken)

    async def main() -> House:
        house = House(policies)
        with pytest.raises(SurpriseError, match="nobody expected this"):
            await house.runtime.run(5)
        return house

    house = run_virtual(main())
    assert house.sink.nodes["reason"] == "fault"
    assert house.kinds[-1] is EntryKind.CLOSED
    assert house.reports == []


def test_the_lag_probe_sees_what_blocks_the_loop() -> None:
    class Stepping(VirtualClock):
        """A loop that lost 120 ms in its third sleep."""

        asked = 0

        def wall(self) -> float:
            self.asked += 1
            return super().wall() + (0.12 if self.asked > 5 else 0.0)

    async def main() -> tuple[LoopLag, LoopLag]:
        probe = LagProbe(Stepping(), 0.05)
        task = asyncio.ensure_future(probe.run())
        await asyncio.sleep(1.01)
        task.cancel()
        return probe.take(), probe.take()

    seen, emptied = run_virtual(main())
    assert seen.max_ms == pytest.approx(120.0)
    assert emptied == LoopLag(0.0, 0.0)


def test_a_wait_that_nothing_can_end_fails_at_once() -> None:
    async def forever() -> None:
        await asyncio.Event().wait()

    with pytest.raises(EndlessWaitError):
        run_virtual(forever())
