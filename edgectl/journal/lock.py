"""Two processes never write one journal: a lock file beside it, held while it is open."""

from __future__ import annotations

import fcntl
import os
from pathlib import Path

from edgectl.ports import NotJournalledError


class JournalLockedError(NotJournalledError):
    """Another process writes this journal."""


class FileLock:
    """`flock` on a side file. The kernel releases it when its holder dies, however it dies.

    The side file stays: removing it would let two holders lock two files of one name.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._descriptor: int | None = None

    def acquire(self) -> None:
        """Take the lock, or raise JournalLockedError (OSError if the file cannot be made)."""
        if self._descriptor is not None:
            return
        descriptor = os.open(self._path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o640)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError as error:
            holder = os.read(descriptor, 32).decode("ascii", "replace").strip() or "unknown"
            os.close(descriptor)
            raise JournalLockedError(
                f"{self._path} is held by process {holder}: one journal has one writer; "
                "stop that process, or give this one its own journal"
            ) from error
        os.ftruncate(descriptor, 0)
        os.write(descriptor, f"{os.getpid()}\n".encode("ascii"))
        self._descriptor = descriptor

    def release(self) -> None:
        if self._descriptor is not None:
            os.close(self._descriptor)
            self._descriptor = None
