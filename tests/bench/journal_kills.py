"""Kill a journal's writer at random instants, and see that nothing it promised was lost.

    python tests/bench/journal_kills.py --kills 50 --seed 1

A child process opens the journal and appends decisions of a real cycle's size as
fast as the disk allows; after each receipt it prints the row's number and hash.
The parent kills it (SIGKILL) after a random time, reads the journal while the
lock is free, and checks: the chain is intact, every printed receipt is in it,
and the next child carries on behind it. SIGKILL does not test the disk's own
cache: for that, cut the power.
"""

from __future__ import annotations

import argparse
import asyncio
import random
import select
import signal
import subprocess
import sys
import tempfile
from pathlib import Path

from edgectl.clock import PlantClock
from edgectl.journal.reader import JournalReader
from edgectl.journal.verify import verify
from edgectl.journal.writer import SqliteJournal
from edgectl.records.entries import Entry, EntryKind, Json

BODY: dict[str, Json] = {f"row_{i}": [0.1 * j for j in range(60)] for i in range(30)}
START_S = 20.0


async def append_for_ever(path: Path) -> None:
    """The child: says `open N`, then `N hash` for each durable row."""
    journal = SqliteJournal(path, PlantClock.real())
    end = await journal.open()
    print(f"open {end.seq}", flush=True)
    while True:
        entry = Entry(EntryKind.DECISION, end.seq, 1.7e9 + end.seq, {**BODY, "n": end.seq})
        receipt = await journal.append(entry, timeout_s=60.0)
        print(f"{receipt.seq} {receipt.entry_hash}", flush=True)


def run_and_kill(path: Path, after_s: float) -> tuple[int, dict[int, str]]:
    """One child's life: where it began, and the receipts that it printed."""
    child = subprocess.Popen(
        [sys.executable, __file__, "--write", str(path)], stdout=subprocess.PIPE
    )
    assert child.stdout is not None
    try:
        if not select.select([child.stdout], [], [], START_S)[0]:
            raise SystemExit(f"the writer did not open the journal within {START_S:g} s")
        opened = child.stdout.readline().decode()
        # A pipe that nobody writes to serves as the clock; the instant is random, not a condition.
        select.select([], [], [], after_s)
    finally:
        child.send_signal(signal.SIGKILL)
        rest = child.stdout.read().decode()
        child.stdout.close()
        child.wait()
    if not opened.startswith("open "):
        raise SystemExit("the writer ended before it opened the journal")
    # The last line may be cut in the middle: then its receipt was never given.
    whole = rest[: rest.rfind("\n") + 1].splitlines()
    return int(opened.split()[1]), {int(n): digest for n, digest in map(str.split, whole)}


def check(path: Path, promised: dict[int, str]) -> list[str]:
    """What is wrong with the journal after a kill."""
    report = verify(path)
    problems = [] if report.intact else [f"chain broken: {report.why}"]
    with JournalReader(path) as reader:
        stored = {entry.seq: entry.entry_hash for entry in reader.entries()}
    problems += [f"row {n} was promised and is lost" for n in promised if n not in stored]
    problems += [f"row {n} changed" for n in promised if stored.get(n, promised[n]) != promised[n]]
    return problems


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--kills", type=int, default=50)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--longest-s", type=float, default=0.5)
    parser.add_argument("--write", type=Path, help="be the child that writes this journal")
    arguments = parser.parse_args()
    if arguments.write:
        asyncio.run(append_for_ever(arguments.write))
    draw = random.Random(arguments.seed)
    promised: dict[int, str] = {}
    unpromised = 0
    problems: list[str] = []
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "journal.db"
        for kill in range(1, arguments.kills + 1):
            began, receipts = run_and_kill(path, draw.uniform(0.0, arguments.longest_s))
            unpromised += began - max(promised, default=0)
            promised |= receipts
            problems += [f"after kill {kill}: {problem}" for problem in check(path, promised)]
        entries = verify(path).entries
    print(
        f"kills {arguments.kills}, rows {entries}, promised {len(promised)}, "
        f"durable but killed before they were promised {unpromised}, problems {len(problems)}"
    )
    print(*problems, sep="\n", end="\n" if problems else "")
    return 1 if problems or len(promised) < arguments.kills else 0


if __name__ == "__main__":
    sys.exit(main())
