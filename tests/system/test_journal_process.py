"""The journal among real processes and on a real disk that refuses."""

from __future__ import annotations

import resource
import select
import signal
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from edgectl.clock import PlantClock
from edgectl.journal.lock import JournalLockedError
from edgectl.journal.verify import verify
from edgectl.journal.writer import SqliteJournal
from edgectl.ports import NotJournalledError
from edgectl.records.entries import Entry, EntryKind


def big_entry(n: int) -> Entry:
    return Entry(EntryKind.DECISION, n, 1.7e9 + n, {"text": "x" * 30_000})


def start_writer(repo_root: Path, path: Path) -> subprocess.Popen[bytes]:
    script = repo_root / "tests/bench/journal_kills.py"
    return subprocess.Popen(
        [sys.executable, str(script), "--write", str(path)], stdout=subprocess.PIPE
    )


@contextmanager
def files_end_at(size: int) -> Iterator[None]:
    """No file grows beyond `size` bytes: the kernel refuses the write, as on a full disk."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def test_nothing_promised_is_lost_when_the_writer_is_killed(repo_root: Path) -> None:
    script = repo_root / "tests/bench/journal_kills.py"
    done = subprocess.run(
        [sys.executable, str(script), "--kills", "5", "--seed", "1", "--longest-s", "0.3"],
        capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stdout + done.stderr
    assert "problems 0" in done.stdout


@pytest.mark.asyncio
async def test_a_full_disk_refuses_and_the_journal_goes_on_afterwards(tmp_path: Path) -> None:
    path = tmp_path / "journal.db"
    journal = SqliteJournal(path, PlantClock.real())
    await journal.open()
    await journal.append(big_entry(1), 10.0)
    with files_end_at(20_000):
        for _ in range(3):
            with pytest.raises(NotJournalledError, match="opens the journal again"):
                await journal.append(big_entry(2), 10.0)
    receipt = await journal.append(big_entry(2), 10.0)
    await journal.close()
    assert receipt.seq == 2
    assert verify(path, receipt.entry_hash).entries == 2


@pytest.mark.asyncio
async def test_another_process_that_writes_is_named_and_its_death_frees_the_journal(
    repo_root: Path, tmp_path: Path
) -> None:
    path = tmp_path / "journal.db"
    child = start_writer(repo_root, path)
    assert child.stdout is not None
    try:
        assert select.select([child.stdout], [], [], 30.0)[0]
        assert child.stdout.readline().startswith(b"open ")
        journal = SqliteJournal(path, PlantClock.real())
        with pytest.raises(JournalLockedError, match=f"held by process {child.pid}:"):
            await journal.open()
        assert verify(path).intact  # reading beside it is welcome
    finally:
        child.send_signal(signal.SIGKILL)
        child.stdout.close()
        child.wait()
    journal = SqliteJournal(path, PlantClock.real())
    await journal.open()
    await journal.append(big_entry(1), 10.0)
    await journal.close()
    assert verify(path).intact
