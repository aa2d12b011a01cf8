"""How long an entry takes to become durable on this disk, and what the loop feels of it.

    python tests/bench/journal_latency.py --entries 500 --body-kb 30

Prints milliseconds: `append` as its caller waits for it, `write` as the receipt
says, `lag` of a 1 ms timer that runs on the same event loop meanwhile.
"""

from __future__ import annotations

import argparse
import asyncio
import tempfile
from pathlib import Path

from edgectl.clock import PlantClock
from edgectl.journal.verify import verify
from edgectl.journal.writer import SqliteJournal
from edgectl.records.entries import Entry, EntryKind, Json

TICK_S = 0.001


async def measure(path: Path, entries: int, body: dict[str, Json]) -> dict[str, list[float]]:
    clock = PlantClock.real()
    journal = SqliteJournal(path, clock)
    await journal.open()
    times: dict[str, list[float]] = {"append": [], "write": [], "lag": []}

    async def probe() -> None:
        while True:
            before = clock.wall()
            await asyncio.sleep(TICK_S)
            times["lag"].append((clock.wall() - before - TICK_S) * 1e3)

    async with asyncio.TaskGroup() as group:
        lag = group.create_task(probe())
        for n in range(entries):
            before = clock.wall()
            receipt = await journal.append(Entry(EntryKind.DECISION, n, 1.7e9 + n, body), 60.0)
            times["append"].append((clock.wall() - before) * 1e3)
            times["write"].append(receipt.write_ms)
        lag.cancel()
    await journal.close()
    print(f"record_bytes {receipt.record_bytes}")
    return times


def at(values: list[float], share: float) -> float:
    return sorted(values)[min(len(values) - 1, int(share * len(values)))]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--entries", type=int, default=500)
    parser.add_argument("--body-kb", type=float, default=30.0)
    parser.add_argument("--folder", type=Path, help="on the disk to measure")
    arguments = parser.parse_args()
    row: list[Json] = [0.1 * j for j in range(60)]
    rows = max(1, round(arguments.body_kb * 1000 / len(str(row))))
    body: dict[str, Json] = {f"row_{i}": row for i in range(rows)}
    clock = PlantClock.real()
    with tempfile.TemporaryDirectory(dir=arguments.folder) as folder:
        path = Path(folder) / "journal.db"
        times = asyncio.run(measure(path, arguments.entries, body))
        began = clock.wall()
        report = verify(path)
        verify_s = clock.wall() - began
    for name, values in times.items():
        p50, p95, p99 = (at(values, share) for share in (0.50, 0.95, 0.99))
        print(f"{name:8s} p50 {p50:7.2f}  p95 {p95:7.2f}  p99 {p99:7.2f}  max {max(values):7.2f}")
    print(f"verify   {report.entries} entries in {verify_s:.2f} s, intact {report.intact}")


if __name__ == "__main__":
    main()
