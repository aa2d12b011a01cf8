"""Processes that the demo starts, and ends again whatever happens."""

from __future__ import annotations

import asyncio
import contextlib
import os
import signal
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import IO, Final

GRACE_S: Final = 10.0
"""Wall seconds between asking a process to end and ending it."""


class ChildError(Exception):
    """A process did not come up or did not say what it should; the message has its own words."""


class Child:
    """One process in a session of its own: a Ctrl-C at the terminal reaches only us.

    So the order in which things stop is ours: first the runtime, which withdraws its
    advice, then the plant.
    """

    def __init__(self, name: str, process: asyncio.subprocess.Process, log: Path) -> None:
        self.name = name
        self._process = process
        self._log = log

    @classmethod
    async def start(
        cls, name: str, command: Sequence[str], environment: Mapping[str, str], log: Path
    ) -> Child:
        """Start it; what it says on standard error goes to `log`. Raises ChildError."""
        try:
            with log.open("wb") as errors:
                process = await _spawn(command, environment, errors)
        except OSError as error:
            raise ChildError(f"{name} cannot be started: {error}") from error
        return cls(name, process, log)

    @property
    def pid(self) -> int:
        return self._process.pid

    @property
    def exit_code(self) -> int | None:
        """None while it runs."""
        return self._process.returncode

    async def first_line(self, timeout_s: float) -> str:
        """The first line of its standard output. Raises ChildError: none in time, or it ended."""
        assert self._process.stdout is not None
        budget = asyncio.timeout(timeout_s)
        try:
            async with budget:
                line = await self._process.stdout.readline()
        except TimeoutError as error:
            raise ChildError(f"{self.name} said nothing within {timeout_s:g} s") from error
        if not line:
            await self._process.wait()
            raise ChildError(f"{self.name} ended with code {self.exit_code}: {self.last_words()}")
        return line.decode("utf-8", "replace")

    async def write_line(self, line: str) -> None:
        """A line on its standard input. Raises ChildError when it is gone."""
        assert self._process.stdin is not None
        try:
            self._process.stdin.write(line.encode("utf-8") + b"\n")
            await self._process.stdin.drain()
        except (BrokenPipeError, ConnectionResetError) as error:
            raise ChildError(f"{self.name} is gone: {self.last_words()}") from error

    async def end(self) -> None:
        """Ask it to end, and end it if it does not. Safe to call twice."""
        if self._process.stdin is not None:
            self._process.stdin.close()
        if self.exit_code is None:
            with contextlib.suppress(ProcessLookupError):
                self._process.terminate()
            with contextlib.suppress(TimeoutError):
                async with asyncio.timeout(GRACE_S):
                    await self._process.wait()
        if self.exit_code is None:
            with contextlib.suppress(ProcessLookupError):
                # Its own session, so this is its whole group: nothing of it stays behind.
                os.killpg(self.pid, signal.SIGKILL)
            await self._process.wait()

    def last_words(self, most: int = 1500) -> str:
        """The end of what it said on standard error."""
        try:
            text = self._log.read_text("utf-8", "replace").strip()
        except OSError:
            return "(no log)"
        return text[-most:] or "(it said nothing)"


async def _spawn(
    command: Sequence[str], environment: Mapping[str, str], errors: IO[bytes]
) -> asyncio.subprocess.Process:
    return await asyncio.create_subprocess_exec(
        *command,
        stdin=asyncio.subprocess.PIPE,
        stdout=asyncio.subprocess.PIPE,
        stderr=errors,
        env={**os.environ, **environment},
        start_new_session=True,
    )
