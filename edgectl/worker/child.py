"""The process that loads CasADi: `python -m edgectl.worker.child PARENT_PID`.

Reads a setup, builds the brain, solves once, says `ready`; then answers one
frame after the other until the other side hangs up. It holds no state between
requests, so that killing it loses nothing.

Native libraries print on file descriptor 1 whenever they like. So the wire is
moved to descriptors of its own first, and 1 is pointed at standard error.
"""

from __future__ import annotations

import ctypes
import faulthandler
import importlib
import os
import signal
import sys
import threading
from collections import deque

from edgectl.clock import PlantClock
from edgectl.records.encoding import EncodingError, from_json, to_json
from edgectl.records.entries import Json
from edgectl.records.plan import Plan, PlanRequest
from edgectl.worker.brain import Brain
from edgectl.worker.frames import Frame, FrameDecoder, FrameError, FrameKind, encode_frame
from edgectl.worker.messages import Ready, Setup

# More linear algebra threads than cores stall each other; this process has one core.
ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")

PR_SET_PDEATHSIG = 1


class Wire:
    """Frames over two descriptors, blocking."""

    def __init__(self, read_from: int, write_to: int) -> None:
        self._read_from = read_from
        self._write_to = write_to
        self._decoder = FrameDecoder()
        self._frames: deque[Frame] = deque()

    def receive(self) -> Frame | None:
        """The next frame; None when the other side has hung up."""
        while not self._frames:
            data = os.read(self._read_from, 65536)
            if not data:
                self._decoder.finish()
                return None
            self._frames.extend(self._decoder.feed(data))
        return self._frames.popleft()

    def send(self, kind: FrameKind, payload: Json) -> None:
        data = memoryview(encode_frame(Frame(kind, payload)))
        while data:
            data = data[os.write(self._write_to, data) :]


def main() -> int:
    wire = take_the_wire()
    die_with_the_parent(int(sys.argv[1]))
    # A crash in native code then leaves its Python lines on standard error.
    faulthandler.enable()
    for name in ONE_THREAD:
        os.environ[name] = "1"
    frame = wire.receive()
    if frame is None:
        return 0
    if frame.kind is not FrameKind.SETUP:
        raise FrameError(f"expected a SETUP frame first, found {frame.kind.name}")
    setup = from_json(Setup, frame.payload)
    brain, ready = build(setup)
    wire.send(FrameKind.READY, to_json(ready))
    while (frame := wire.receive()) is not None:
        wire.send(*reply(brain, setup, frame))
    return 0


def take_the_wire() -> Wire:
    """Standard input and output become the wire; nobody else can write on it any more."""
    wire = Wire(os.dup(0), os.dup(1))
    nothing = os.open(os.devnull, os.O_RDONLY)
    os.dup2(nothing, 0)
    os.close(nothing)
    os.dup2(2, 1)
    return wire


def die_with_the_parent(parent: int) -> None:
    """The kernel kills this process when its parent dies, even inside a native call."""
    libc = ctypes.CDLL(None, use_errno=True)
    if libc.prctl(PR_SET_PDEATHSIG, signal.SIGKILL, 0, 0, 0) != 0:
        raise OSError(ctypes.get_errno(), "prctl(PR_SET_PDEATHSIG)")
    if os.getppid() != parent:
        # It died before the line above.
        sys.exit(0)


def build(setup: Setup) -> tuple[Brain, Ready]:
    """Import the brain's maker, call it, solve once."""
    clock = PlantClock.real()
    began = clock.wall()
    module, _, function = setup.brain.partition(":")
    # The model's rooms read no clock of their own: they are given one.
    make = getattr(importlib.import_module(module), function)
    brain: Brain = make(dict(setup.site), clock.wall)
    built = clock.wall()
    brain.warm_up()
    ready = Ready(
        brain.engine, brain.model_hash, (built - began) * 1e3, (clock.wall() - built) * 1e3
    )
    return brain, ready


def reply(brain: Brain, setup: Setup, frame: Frame) -> tuple[FrameKind, Json]:
    """The frame that answers this one."""
    if frame.kind is FrameKind.REQUEST:
        request: PlanRequest = from_json(PlanRequest, frame.payload)
        oversleep(setup, request.cycle)
        answer = brain.answer(request)
        kind = FrameKind.PLAN if isinstance(answer, Plan) else FrameKind.NO_PLAN
        return kind, to_json(answer)
    if frame.kind is FrameKind.JOB:
        return do_job(brain, frame.payload)
    raise FrameError(f"a {frame.kind.name} frame is not for the worker")


def do_job(brain: Brain, payload: Json) -> tuple[FrameKind, Json]:
    match payload:
        case {"job": str(name), "arguments": dict(arguments)}:
            pass
        case _:
            raise EncodingError("$: expected an object with job and arguments")
    try:
        return FrameKind.RESULT, to_json(brain.job(name, arguments))
    except ValueError as error:
        return FrameKind.REFUSED, str(error)


def oversleep(setup: Setup, cycle: int) -> None:
    """The slow-solver drill of a rehearsal: be late in the cycles that the setup names."""
    if setup.slow_cycles is not None and setup.slow_cycles[0] <= cycle <= setup.slow_cycles[1]:
        # Nobody sets it: this is a sleep, and the loop's deadline is to end it.
        threading.Event().wait(setup.slow_s)


if __name__ == "__main__":
    sys.exit(main())
