"""One worker process as the event loop sees it, from its start until it is reaped.

Nothing here waits for the process: asyncio's child watcher does, and a kill is
one signal. At most one question is open at a time. After a loss or a kill no
byte of the process is read any more.
"""

from __future__ import annotations

import asyncio
import os
import signal
import sys
from collections.abc import Callable
from contextlib import suppress
from typing import Self, cast

from edgectl.records.entries import Json
from edgectl.worker.frames import Frame, FrameDecoder, FrameError, FrameKind, encode_frame

CHILD = "edgectl.worker.child"

# A plan has about ten kilobytes. Parsing is done in the event loop, and 8 MiB would hold it up
# for more than a tenth of a second: so an answer may be large, but not that large.
ANSWER_LIMIT_BYTES = 2**20

# What is kept of the worker's standard error: enough for the last line of a traceback.
TAIL_BYTES = 4096

# A process that hangs up is on its way out; one that is still there after this is killed.
# The same time is given to its last words when something else holds its pipes open.
LINGER_S = 0.2

STDIN, STDOUT, STDERR = 0, 1, 2


class WorkerGoneError(Exception):
    """The process died, or spoke nonsense and was killed; the message says which."""


class WorkerProcess(asyncio.SubprocessProtocol):
    """Start it with `start`, question it with `ask`, end it with `kill`.

    Parameters
    ----------
    on_lost : Callable
        Called once, in the loop, when the process is lost without having been
        killed by `kill`; by then `lost` says why.
    """

    def __init__(self, on_lost: Callable[[WorkerProcess], None]) -> None:
        self.gone = asyncio.Event()
        """Set when the process is reaped and its pipes are closed."""
        self.lost: str | None = None
        self._on_lost = on_lost
        self._silenced = False
        self._decoder = FrameDecoder(ANSWER_LIMIT_BYTES)
        self._answer: asyncio.Future[Frame] | None = None
        self._tail = b""
        self._linger: asyncio.TimerHandle | None = None
        self._transport: asyncio.SubprocessTransport

    @classmethod
    async def start(cls, on_lost: Callable[[WorkerProcess], None]) -> Self:
        """Start a Python of our own kind with the child in it. Raises OSError."""
        loop = asyncio.get_running_loop()
        _, process = await loop.subprocess_exec(
            lambda: cls(on_lost),
            *(sys.executable, "-m", CHILD, str(os.getpid())),
            # Ctrl-C at the terminal is for the parent, which then ends its workers itself.
            start_new_session=True,
        )
        return process

    @property
    def pid(self) -> int:
        return self._transport.get_pid()

    @property
    def busy(self) -> bool:
        """A question is open."""
        return self._answer is not None

    async def ask(self, kind: FrameKind, payload: Json) -> Frame:
        """Send one frame and wait for the one that answers it.

        When the wait is cancelled the question stays open: the process is then
        of no more use, and the caller kills it.

        Raises
        ------
        WorkerGoneError
            It died or spoke nonsense meanwhile, or before.
        """
        if self._silenced:
            raise WorkerGoneError(self.lost or "was killed")
        if self._answer is not None:
            raise RuntimeError("the worker has not answered the question before")
        data = encode_frame(Frame(kind, payload))
        answer: asyncio.Future[Frame] = asyncio.get_running_loop().create_future()
        self._answer = answer
        stdin = cast(asyncio.WriteTransport, self._transport.get_pipe_transport(STDIN))
        stdin.write(data)
        frame = await answer
        self._answer = None
        return frame

    def lose(self, why: str) -> None:
        """Give the process up for what it did: kill it, and whoever waits for it hears why."""
        if self._silenced:
            return
        self.lost = why
        self.kill()
        self._on_lost(self)

    def kill(self) -> None:
        """SIGKILL: a hung native call ignores everything else. Returns at once."""
        self._silenced = True
        # It may have died on its own a moment ago.
        with suppress(ProcessLookupError):
            self._transport.kill()
        if self._answer is not None and not self._answer.done():
            self._answer.set_exception(WorkerGoneError(self.lost or "was killed"))

    # -- called by asyncio ------------------------------------------------------------------

    def connection_made(self, transport: asyncio.BaseTransport) -> None:
        self._transport = cast(asyncio.SubprocessTransport, transport)

    def pipe_data_received(self, fd: int, data: bytes) -> None:
        if fd == STDERR:
            self._tail = (self._tail + data)[-TAIL_BYTES:]
        elif not self._silenced:
            try:
                for frame in self._decoder.feed(data):
                    self._take(frame)
            except FrameError as error:
                self.lose(f"spoke nonsense: {error}")

    def pipe_connection_lost(self, fd: int, exc: Exception | None) -> None:
        if fd == STDOUT:
            self._leave_time(self._lose_if_alive)

    def process_exited(self) -> None:
        # Its pipes usually close with it; then `connection_lost` comes at once.
        self._leave_time(self._transport.close)

    def connection_lost(self, exc: Exception | None) -> None:
        if self._linger is not None:
            self._linger.cancel()
        self.lose(self._last_words())
        self._transport.close()
        self.gone.set()

    def _lose_if_alive(self) -> None:
        if self._transport.get_returncode() is None:
            self.lose("closed the wire")

    def _leave_time(self, then: Callable[[], None]) -> None:
        if self._linger is not None:
            self._linger.cancel()
        self._linger = asyncio.get_running_loop().call_later(LINGER_S, then)

    def _take(self, frame: Frame) -> None:
        if self._answer is None or self._answer.done():
            self.lose(f"sent a {frame.kind.name} frame that nobody asked for")
        else:
            self._answer.set_result(frame)

    def _last_words(self) -> str:
        code = self._transport.get_returncode()
        if code is not None and code < 0:
            return f"died from {signal.Signals(-code).name}"
        lines = self._tail.decode("utf-8", "replace").strip().splitlines()
        return f"ended with exit code {code}" + (f": {lines[-1]}" if lines else "")
