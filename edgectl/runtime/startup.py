"""Puts a runtime together: the one place that knows every edge.

Order matters. The solver is asked for first, because its model's hash belongs
into every record; then the journal, which refuses a second writer before anything
touches the plant; then the plant, which may be away: the cycles say so and go on.
"""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import AsyncIterator, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from random import Random
from typing import Final

from edgectl.cycle.policies import Policies
from edgectl.journal.reader import restore
from edgectl.journal.writer import SqliteJournal
from edgectl.opcua.from_site import advice_nodes, server_address, tag_nodes
from edgectl.opcua.session import PlantSession
from edgectl.opcua.sink import OpcUaAdviceSink
from edgectl.opcua.source import OpcUaTagSource
from edgectl.ports import Clock, PlantMismatchError, PlantUnreachableError
from edgectl.records.cycle_record import OpeningRecord, Provenance
from edgectl.records.entries import EntryKind
from edgectl.runtime.loop import CycleReport, Ports
from edgectl.runtime.notify import ServiceNotifier
from edgectl.runtime.policies import policies_from
from edgectl.runtime.restore import Restored, restored
from edgectl.runtime.schedule import enforced_budget_s
from edgectl.runtime.supervise import Ending, Observer, Runtime
from edgectl.settings.site import Site
from edgectl.worker.handle import WatchedSolver
from edgectl.worker.messages import Ready

BUILD_LIMIT_S: Final = 180.0
"""A model that cannot be built and solved once in this time is a mistake in the site file."""
FIRST_LINK_S: Final = 10.0
"""How long the first cycle waits for the plant; it begins in any case."""


@dataclass(frozen=True, slots=True)
class RunOrder:
    """What to run."""

    site: Site
    password: str | None
    journal: Path
    clock: Clock
    cycles: int | None = None
    """End after so many; None: when told to stop."""


async def run_site(
    order: RunOrder,
    solver: WatchedSolver,
    stop: asyncio.Event,
    notifier: ServiceNotifier | None = None,
    observers: Sequence[Observer] = (),
) -> Ending:
    """Run until `stop` is set or the cycles are done. The solver is started already.

    Raises
    ------
    WorkerUnavailableError
        The model cannot be built or solved.
    JournalLockedError, JournalUnusableError, JournalUnreadableError
        The journal cannot be written, or what is in it cannot be read.
    """
    notifier = notifier or ServiceNotifier({})
    policies = policies_from(order.site)
    ready = await solver.wait_ready(BUILD_LIMIT_S)
    async with _journal(order) as journal, _session(order) as session:
        begin = _begin(order, ready, policies)
        ports = Ports(
            source=OpcUaTagSource(session, order.clock),
            sink=None if session.advice is None else OpcUaAdviceSink(session),
            journal=journal,
            solver=solver,
            clock=order.clock,
        )
        feeds = (_watchdog_feeder(notifier), *observers)
        runtime = Runtime(ports, policies, _opening(order, ready, begin, policies), begin, feeds)
        # One event for whoever stops us, from before the runtime was there.
        runtime.stop = stop
        with contextlib.suppress(PlantUnreachableError, PlantMismatchError):
            await session.wait_linked(FIRST_LINK_S)
        notifier.tell("READY=1")
        try:
            return await runtime.run(order.cycles)
        finally:
            notifier.tell("STOPPING=1")


@contextlib.asynccontextmanager
async def _journal(order: RunOrder) -> AsyncIterator[SqliteJournal]:
    journal = SqliteJournal(order.journal, order.clock)
    await journal.open()
    try:
        yield journal
    finally:
        await journal.close()


def _session(order: RunOrder) -> PlantSession:
    return PlantSession(
        server_address(order.site, order.password),
        tag_nodes(order.site),
        advice_nodes(order.site),
        Random(),
    )


def _begin(order: RunOrder, ready: Ready, policies: Policies) -> Restored:
    """Where to go on from. Reads the journal once, before the first cycle."""
    newest = restore(order.journal)
    body, seq = (None, None) if newest is None else (newest.body, newest.seq)
    assert newest is None or newest.kind is EntryKind.DECISION
    return restored(body, seq, ready.model_hash, order.clock.plant_time(), policies)


def _opening(order: RunOrder, ready: Ready, begin: Restored, policies: Policies) -> OpeningRecord:
    site, speed = order.site, order.clock.speed
    return OpeningRecord(
        provenance=Provenance(
            edgectl_version=version("edgectl"),
            site_hash=site.hash,
            model_hash=ready.model_hash,
            insecure=site.server.security == "none",
        ),
        engine=ready.engine,
        site=site.site.name,
        restored_from_seq=begin.from_seq,
        restored=begin.words,
        speed=speed,
        period_s=policies.cycle.period_s,
        budget_s=enforced_budget_s(policies.cycle, speed),
        site_content=site.as_dict(),
    )


def _watchdog_feeder(notifier: ServiceNotifier) -> Observer:
    """Fed by completed cycles and by nothing else.

    A cycle without data is complete too: a plant that is away is no reason to start anew.
    """

    def feed(report: CycleReport) -> None:
        advice = report.advice
        notifier.tell("WATCHDOG=1", f"STATUS={advice.standing.value}, {advice.reason}")

    return feed
