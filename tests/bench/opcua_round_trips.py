"""Prints how long a read of 60 tags and a publishing of advice take on loopback.

    .venv/bin/python tests/bench/opcua_round_trips.py

The server runs in a process of its own. A report, not a gate.
"""

from __future__ import annotations

import asyncio
import json
import os
import random
import statistics
import subprocess
import sys
from collections.abc import Awaitable, Callable
from dataclasses import replace
from pathlib import Path

from edgectl.clock import PlantClock
from edgectl.opcua.from_site import advice_nodes, server_address, tag_nodes
from edgectl.opcua.session import PlantSession
from edgectl.opcua.sink import OpcUaAdviceSink
from edgectl.opcua.source import OpcUaTagSource
from edgectl.records.advice import Advice, Standing, SuggestedMove
from edgectl.settings import parse_site

ROOT = Path(__file__).resolve().parents[2]
TAGS = 60
ROUNDS = 200


async def timed(what: str, clock: PlantClock, work: Callable[[], Awaitable[object]]) -> None:
    times_ms = []
    for _ in range(ROUNDS):
        began = clock.wall()
        await work()
        times_ms.append(1e3 * (clock.wall() - began))
    times_ms.sort()
    print(
        f"{what}: median {statistics.median(times_ms):.1f} ms, "
        f"p99 {times_ms[int(0.99 * ROUNDS)]:.1f} ms, max {times_ms[-1]:.1f} ms ({ROUNDS} times)"
    )


async def measure(endpoint: str, clock: PlantClock) -> None:
    text = (ROOT / "deploy/examples/methanol_water.toml").read_text()
    site = parse_site(text.replace("opc.tcp://127.0.0.1:48400/", endpoint), "site.toml")
    own = tag_nodes(site)
    tags = tuple(replace(own[n % len(own)], tag=f"tag {n}") for n in range(TAGS))
    address = server_address(site, "advisor word")
    began = clock.wall()
    async with PlantSession(address, tags, advice_nodes(site), random.Random(1)) as session:
        await session.wait_linked(10.0)
        print(f"connect and survey: {1e3 * (clock.wall() - began):.0f} ms")
        source, sink = OpcUaTagSource(session, clock), OpcUaAdviceSink(session)
        now = clock.plant_time()
        moves = tuple(
            SuggestedMove(mv, target, True, now, "energy_saved", "Lower it.")
            for mv, target in (("FIC-2103", 7860.0), ("TIC-2107", 101.5))
        )
        advice = Advice(1, Standing.ADVISING, "limit_reached", "Lower reflux.", True, now + 90.0,
                        now, 1, moves, ())  # fmt: skip
        await timed(f"read {TAGS} tags", clock, lambda: source.read(1, 2.0))
        await timed("publish (4 writes, 13 items)", clock, lambda: sink.publish(advice, 1, 2.0))


def main() -> None:
    command = [sys.executable, "-m", "sim_server", "--plant", "methanol_water", "--port", "0",
               "--speed", "1", "--crew", "ignores"]  # fmt: skip
    passwords = {
        "EDGECTL_SIM_ADVISOR_PASSWORD": "advisor word",
        "EDGECTL_SIM_BOARD_PASSWORD": "board word",
    }
    with subprocess.Popen(
        command, cwd=ROOT, env=os.environ | passwords, stdout=subprocess.PIPE, text=True
    ) as plant:
        assert plant.stdout is not None
        ready = json.loads(plant.stdout.readline())
        clock = PlantClock(ready["plant_start"], ready["anchor"], ready["speed"])
        try:
            asyncio.run(measure(ready["endpoint"], clock))
        finally:
            plant.terminate()


if __name__ == "__main__":
    main()
