"""The worker's parent: what dies with it, and what it never loads."""

from __future__ import annotations

import os
import select
import subprocess
import sys
from pathlib import Path

import pytest

START_S = 30.0

PARENT = """
import asyncio, sys
from edgectl.records.plan import PlanRequest
from edgectl.worker.handle import WatchedSolver
from edgectl.worker.messages import Setup

async def main():
    solver = WatchedSolver(Setup({"cycles": {"1": "hang"}}, "fake_brains:build_brain"))
    solver.start()
    await solver.wait_ready(30.0, workers=2)
    print(*(worker.pid for worker in solver._ready), flush=True)
    deadline = asyncio.get_running_loop().time() + 60.0
    await solver.solve(PlanRequest("r1", 1, 0.0, 0.0, 1.0, (), (), (), {}), deadline)

asyncio.run(main())
"""


def test_workers_die_with_their_parent_even_inside_a_native_call(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setenv("PYTHONPATH", str(Path(__file__).parent))
    parent = subprocess.Popen([sys.executable, "-c", PARENT], stdout=subprocess.PIPE)
    assert parent.stdout is not None
    try:
        assert select.select([parent.stdout], [], [], START_S)[0]
        workers = [int(pid) for pid in parent.stdout.readline().split()]
        watched = [os.pidfd_open(pid) for pid in workers]
    finally:
        parent.kill()
        parent.wait()
        parent.stdout.close()
    assert len(watched) == 2
    for descriptor in watched:
        assert select.select([descriptor], [], [], 10.0)[0]
        os.close(descriptor)


def test_the_parents_side_never_loads_casadi_or_numpy() -> None:
    code = "import sys, edgectl.worker.handle; print(*sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    loaded = done.stdout.split()
    assert "edgectl.worker.process" in loaded
    assert not {"casadi", "numpy", "edgectl.worker.child"} & set(loaded)
