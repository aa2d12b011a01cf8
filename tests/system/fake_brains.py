"""Brains that misbehave on purpose, for tests of the worker; imported in its process only.

The site is `{"cycles": {"3": "hang"}, "build": "..."}`: what to do in which
cycle, or while being built; otherwise they plan at once.
"""

from __future__ import annotations

import ctypes
import fcntl
import math
import os
import signal
import stat
import struct
import sys
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any, NoReturn

from edgectl.records.encoding import to_json
from edgectl.records.entries import Json
from edgectl.records.plan import Estimate, NoPlan, Plan, PlannedMove, PlanRequest, SolverStatistics
from edgectl.worker.frames import Frame, FrameKind, encode_frame
from edgectl.worker.messages import Ready

STATISTICS = SolverStatistics("fake", "solved", True, 1, 0.1, 0.2, 0.3)


def build_brain(site: dict[str, Any], wall: Callable[[], float]) -> FakeBrain:
    misbehave(site.get("build", "well"))
    return FakeBrain(site)


@dataclass(frozen=True)
class FakeBrain:
    site: dict[str, Any]
    engine: str = "fake"
    model_hash: str = "f00d"

    def warm_up(self) -> None:
        misbehave(self.site.get("warm_up", "well"))

    def answer(self, request: PlanRequest) -> Any:
        how = self.site.get("cycles", {}).get(str(request.cycle), "well")
        misbehave(how)
        plan = plan_for(request)
        answers: dict[str, Any] = {
            "no_plan": NoPlan(request.request_id, "infeasible", "No way.", STATISTICS, None),
            "wrong_id": replace(plan, request_id="another"),
            "wrong_id_no_plan": NoPlan("another", "infeasible", "No way.", STATISTICS, None),
            "wrong_cycle": replace(plan, cycle=request.cycle - 1),
            "nan": replace(plan, cost_with=math.nan, cost_without=-math.inf),
            "large": replace(plan, gives_way=("x" * 1_100_000,)),
            "huge": replace(plan, gives_way=("x" * 9_000_000,)),
            "no_answer": STATISTICS,
        }
        return answers.get(how, plan)

    def job(self, name: str, arguments: dict[str, Json]) -> Json:
        if name == "pid":
            return os.getpid()
        if name == "environment":
            return dict(os.environ)
        if name == "misbehave":
            misbehave(str(arguments["how"]))
            return None
        if name == "echo":
            return arguments
        raise ValueError(f"no job called {name}")


def plan_for(request: PlanRequest) -> Plan:
    move = PlannedMove("reflux", 1.0, 1.5, 1.5, (1.5, 1.5))
    estimate = Estimate((), {}, (), (), request.memory)
    times_min = (8.0, 10.0)
    return Plan(
        request.request_id,
        request.cycle,
        estimate,
        times_min,
        (move,),
        (),
        1.0,
        2.0,
        (),
        STATISTICS,
    )


def misbehave(how: str) -> None:
    if how == "raise":
        raise RuntimeError("the matrix is singular")
    if how == "abort":
        os.abort()
    if how == "segfault":
        ctypes.string_at(0)
    if how == "hang":
        hang()
    if how == "print":
        print("a line from Python", flush=True)
        libc = ctypes.CDLL(None)
        libc.puts(b"a line from C, as IPOPT prints its tables")
        libc.fflush(None)
        os.system("echo a line from a child")  # its standard output is ours
    if how == "flood":
        os.write(2, b"x" * 2_000_000)
    if how == "garbage":
        os.write(the_wire(), b"this is no frame at all")
        hang()
    if how == "oversize":
        os.write(the_wire(), struct.pack(">Ic", 2**32 - 1, b"p"))
        hang()
    if how == "truncated":
        os.write(the_wire(), struct.pack(">Ic", 1000, b"p") + b'{"request_id"')
        sys.exit(0)
    if how == "twice":
        os.write(
            the_wire(), struct.pack(">Ic", 2, b"n") + b"{}" + struct.pack(">Ic", 2, b"n") + b"{}"
        )
    if how == "ready_twice":
        ready = encode_frame(Frame(FrameKind.READY, to_json(Ready("fake", "f00d", 1.0, 1.0))))
        os.write(the_wire(), ready + ready)
        hang()
    if how == "hang_up":
        os.close(the_wire())
        hang()


def hang() -> NoReturn:
    """Inside a native call that keeps the interpreter's lock, deaf to SIGTERM."""
    signal.signal(signal.SIGTERM, signal.SIG_IGN)
    while True:
        ctypes.PyDLL(None).pause()


def the_wire() -> int:
    """The descriptor that carries the answers: a pipe open for writing, above 0, 1 and 2."""
    for fd in range(3, 20):
        try:
            is_pipe = stat.S_ISFIFO(os.fstat(fd).st_mode)
        except OSError:
            continue
        if is_pipe and fcntl.fcntl(fd, fcntl.F_GETFL) & os.O_ACCMODE == os.O_WRONLY:
            return fd
    raise LookupError("no wire")
