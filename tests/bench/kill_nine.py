"""Kill the runtime (SIGKILL) again and again beside a plant that runs on; see that nothing is lost.

    python tests/bench/kill_nine.py [--kills 50] [--seed 1] [--speed 15] [--keep DIR] [--json FILE]

One simulated plant with a crew that follows, and one `edgectl run` after the other on the
same journal. Each is killed at an instant drawn beforehand: while it starts, at any time of
its cycles, just as its journal is written, just as it publishes. After every kill:

- the chain is intact, and what was the newest hash after the kill before is still in it;
- every receipt that the runtime logged, and every cycle that the server saw, has its decision;
- no worker of it is left.

At the end, from the server's write log: no crew action on advice that had expired; and every
start went through `starting`. Exits 1 when something of this is not so.
"""

from __future__ import annotations

import argparse
import asyncio
import json
import os
import random
import secrets
import signal
import socket
import sys
import tempfile
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

# The benches are scripts: what one offers the next one finds beside it.
sys.path.insert(0, str(Path(__file__).resolve().parent))

from evidence import (
    Decided,
    Evidence,
    Publication,
    undocumented,
    unrecorded,
    untimely_crew_actions,
)

from edgectl.clock import PlantClock
from edgectl.console.children import Child
from edgectl.console.demo import example_site_text
from edgectl.journal.verify import verify
from edgectl.records.advice import Standing

UP_S = 120.0
"""Wall seconds that a process may take until it is ready."""
GONE_S = 2.0
"""Wall seconds in which a killed runtime's workers must be gone; a busy machine takes its time."""
POLL_S = 0.001
LAST_CYCLES = 5
"""After the last kill one runtime is left alone for so long: warm-up, and then some advice."""
SOON_S = {"journal": 0.012, "publish": 0.03}
"""Wall seconds after the first sign of a phase within which the kill falls."""
ENDPOINT = 'endpoint = "opc.tcp://127.0.0.1:48400/"'


@dataclass(frozen=True)
class Plan:
    """When one runtime is to be killed."""

    aim: str
    """`start`: before it is ready; `any`, `journal`, `publish`: see above."""
    after_s: float
    """From its start, or from its first cycle; for the last two: from when on to look out."""
    then_s: float
    """After the sign that was looked out for."""


def plans(kills: int, seed: int, period_s: float, most_cycles: float) -> Iterator[Plan]:
    """The instants, drawn beforehand: the same in every run with this seed."""
    draw = random.Random(f"kill {seed}")
    for _ in range(kills):
        aim = draw.choices(("start", "any", "journal", "publish"), (1, 4, 3, 3))[0]
        cycles = draw.uniform(0.0, 2.0 if aim == "start" else most_cycles)
        yield Plan(aim, cycles * period_s, draw.uniform(0.0, SOON_S.get(aim, 0.0)))


@dataclass
class Tally:
    """What the kills came to."""

    kills: int = 0
    problems: list[str] = field(default_factory=list)
    found_in: Counter[str] = field(default_factory=Counter)
    """What the runtime was doing, by what it left behind."""
    valid_when_killed: int = 0
    receipts: int = 0
    workers: int = 0
    openings: int = 0
    anchor: str | None = None


class Rig:
    """A plant, and one runtime at a time, in one folder."""

    def __init__(self, folder: Path, speed: float, seed: int) -> None:
        self.folder, self.speed, self.seed = folder, speed, seed
        self.journal = folder / "journal.sqlite"
        self.writes = folder / "writes.jsonl"
        self.period_s = 30.0 / speed
        self.lives = 0
        self._children: list[Child] = []
        self._order: dict[str, Any] = {}
        self._environment = {
            f"EDGECTL_SIM_{user}_PASSWORD": secrets.token_urlsafe(18)
            for user in ("BOARD", "ADVISOR")
        } | {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}

    async def start_plant(self) -> None:
        with socket.socket() as probe:
            probe.bind(("127.0.0.1", 0))
            port = probe.getsockname()[1]
        text = example_site_text()
        assert ENDPOINT in text
        here = ENDPOINT.replace("48400", str(port))
        (self.folder / "site.toml").write_text(text.replace(ENDPOINT, here), "utf-8")
        plant = await self._start(
            "plant",
            *("-m", "sim_server", "--port", str(port), "--speed", str(self.speed)),
            *("--seed", str(self.seed), "--crew", "follows", "--until-stdin-closes"),
            *("--truth", str(self.folder / "truth.csv"), "--write-log", str(self.writes)),
        )
        ready = json.loads(await plant.first_line(UP_S))
        self._order = {name: ready[name] for name in ("plant_start", "anchor", "speed")}

    async def start_runtime(self) -> Child:
        self.lives += 1
        site, folder = str(self.folder / "site.toml"), str(self.folder)
        command = ("-m", "edgectl.console", "run", site, "--journal", folder, "--rehearsal")
        runtime = await self._start(self.log_name(self.lives), *command)
        await runtime.write_line(json.dumps({"measure": 0, "slow_cycles": None}))
        return runtime

    async def let_go(self, runtime: Child, cycles: int) -> None:
        """Wait until it is ready, and send it into its cycles."""
        await runtime.first_line(UP_S)
        await runtime.write_line(json.dumps({**self._order, "cycles": cycles}))

    def log_name(self, life: int) -> str:
        return f"runtime-{life}"

    async def end(self) -> None:
        # The plant was started first and is ended last, as in the demo.
        for child in reversed(self._children):
            await child.end()

    async def _start(self, name: str, *arguments: str) -> Child:
        log = self.folder / f"{name}.log"
        command = (sys.executable, *arguments)
        child = await Child.start(f"the {name}", command, self._environment, log)
        self._children.append(child)
        return child


async def kill_once(rig: Rig, plan: Plan, tally: Tally) -> None:
    """One runtime's life, its end, and what it left."""
    runtime = await rig.start_runtime()
    if plan.aim != "start":
        await rig.let_go(runtime, cycles=10**6)
    await asyncio.sleep(plan.after_s)
    if plan.aim == "journal":
        await _changed(lambda: _stamp(rig.journal.with_name(rig.journal.name + "-wal")))
    elif plan.aim == "publish":
        await _changed(lambda: _size(rig.writes))
    await asyncio.sleep(plan.then_s)
    workers = workers_of(runtime.pid)
    if runtime.exit_code is not None:
        tally.problems.append(f"life {rig.lives} ended before its kill: {runtime.last_words(300)}")
        return
    os.kill(runtime.pid, signal.SIGKILL)
    await runtime.end()
    tally.kills += 1
    tally.workers += len(workers)
    clock = PlantClock.real()
    gone_by = clock.wall() + GONE_S
    while left := workers_of(runtime.pid):
        if clock.wall() > gone_by:
            tally.problems.append(f"kill {tally.kills}: workers {left} live on")
            break
        await asyncio.sleep(POLL_S)
    check(rig, tally)


def check(rig: Rig, tally: Tally) -> None:
    """What stands on the disk after a kill, against what was promised and seen."""
    if not rig.journal.exists():
        tally.found_in["before its first cycle"] += 1
        return
    evidence = Evidence(rig.folder)
    chain = verify(rig.journal, tally.anchor)
    if not chain.intact:
        tally.problems.append(f"kill {tally.kills}: {chain.why}")
    tally.anchor = chain.newest_hash
    cycles = {decided.seq: decided.record.cycle for decided in evidence.decisions}
    for seq, cycle in receipts(rig.folder / f"{rig.log_name(rig.lives)}.log"):
        tally.receipts += 1
        if cycles.get(seq) != cycle:
            tally.problems.append(f"kill {tally.kills}: receipt {seq} of cycle {cycle} is lost")
    tally.problems += [
        # The whole log is looked through after each kill: what is known is not told again.
        f"kill {tally.kills}: {problem}"
        for problem in undocumented(evidence)
        if not any(known.endswith(problem) for known in tally.problems)
    ]
    begun = len(evidence.openings) > tally.openings
    tally.openings = len(evidence.openings)
    last = evidence.publications[-1] if evidence.publications else None
    tally.valid_when_killed += last is not None and last.valid
    tally.found_in[_found_in(evidence, last) if begun else "before its first cycle"] += 1


def _found_in(evidence: Evidence, last: Publication | None) -> str:
    """What the runtime was doing when it died, by what it left."""
    if not evidence.decisions:
        return "before its first cycle"
    decided: Decided = evidence.decisions[-1]
    if decided.seq < evidence.openings[-1][0]:
        return "before its first decision"
    if last is None or evidence.published(decided.record.cycle) is None:
        return (
            "publishing, before the stamps" if last and last.cycle is None else "decision durable"
        )
    if decided.record.advice.valid and not last.valid:
        return "publishing, before valid = true"
    if decided.seq not in evidence.deliveries:
        return "published, delivery not yet on record"
    return "between two decisions"


def receipts(log: Path) -> Iterator[tuple[int, int]]:
    """Number and cycle of every decision that a runtime said to be durable."""
    for line in log.read_text("utf-8", "replace").splitlines():
        if not (line.startswith("{") and line.endswith("}")):
            continue
        said = json.loads(line)
        if said.get("event") == "cycle" and said.get("decision_seq") is not None:
            yield int(said["decision_seq"]), int(said["cycle"])


def workers_of(pid: int) -> list[int]:
    """Live worker processes of this runtime, orphaned or not: they are told its pid."""
    found = []
    for entry in Path("/proc").iterdir():
        if not entry.name.isdigit():
            continue
        try:
            words = (entry / "cmdline").read_bytes().split(b"\0")
        except OSError:
            continue
        if b"edgectl.worker.child" in words and str(pid).encode() in words:
            found.append(int(entry.name))
    return found


async def _changed(look: Callable[[], int]) -> None:
    """Return as soon as something is written. A runtime has a cycle every second or two."""
    before = look()
    async with asyncio.timeout(UP_S):
        while look() == before:  # noqa: ASYNC110 (another process writes: there is no event)
            await asyncio.sleep(POLL_S)


def _stamp(path: Path) -> int:
    return path.stat().st_mtime_ns if path.exists() else 0


def _size(path: Path) -> int:
    return path.stat().st_size if path.exists() else 0


def starts(evidence: Evidence) -> tuple[list[str], int, int]:
    """Starts that did not go through `starting`; starts with cycles; starts that got to advise."""
    warm_up = evidence.site.cycle.warm_up_cycles
    problems, with_cycles, advised = [], 0, 0
    ends = [seq for seq, _ in evidence.openings[1:]] + [sys.maxsize]
    for (begin, _), end in zip(evidence.openings, ends, strict=True):
        life = [d.record for d in evidence.decisions if begin < d.seq < end]
        with_cycles += bool(life)
        advised += any(record.advice.valid for record in life)
        for record in life[:warm_up]:
            seen = evidence.published(record.cycle)
            shown = seen is None or seen.values.get("standing", "starting") == "starting"
            if record.advice.standing is not Standing.STARTING or record.advice.valid or not shown:
                problems.append(f"cycle {record.cycle} after a start: {record.advice.standing}")
    return problems, with_cycles, advised


def figures(evidence: Evidence, tally: Tally) -> dict[str, Any]:
    """What it all came to; problems of the whole run are added to the tally."""
    untimely, left = untimely_crew_actions(evidence.writes)
    tally.problems += [f"crew acted on expired advice: {action}" for action in untimely]
    badly, with_cycles, advised = starts(evidence)
    tally.problems += badly
    counts = evidence.counts
    if counts.outside_fence or counts.refused:
        tally.problems.append(f"{counts.outside_fence} writes outside, {counts.refused} refused")
    restored = sum(opening.restored_from_seq is not None for _, opening in evidence.openings)
    return {
        "kills": tally.kills,
        "killed_while": dict(tally.found_in),
        "valid_when_killed": tally.valid_when_killed,
        "workers_gone": tally.workers,
        "receipts_checked": tally.receipts,
        "decisions": len(evidence.decisions),
        "deliveries_seen": len(evidence.publications),
        "valid_seen": sum(seen.valid for seen in evidence.publications),
        "not_recorded_in_time": unrecorded(evidence),
        "entries": evidence.chain.entries,
        "journal_intact": evidence.chain.intact,
        "starts_with_cycles": with_cycles,
        "starts_that_advised": advised,
        "starts_with_memory": restored,
        "crew_actions": len(left),
        "crew_nearest_to_expiry_s": round(min(left), 1) if left else None,
        "writes": counts.accepted,
        "problems": tally.problems,
    }


async def rehearse(rig: Rig, kills: int, most_cycles: float) -> tuple[Evidence, Tally]:
    """All kills, and one runtime that lives."""
    tally = Tally()
    try:
        await rig.start_plant()
        for plan in plans(kills, rig.seed, rig.period_s, most_cycles):
            await kill_once(rig, plan, tally)
            print(
                f"kill {tally.kills}: aimed at {plan.aim}, {tally.workers} workers gone so far,"
                f" problems {len(tally.problems)}",
                file=sys.stderr,
                flush=True,
            )
        last = await rig.start_runtime()
        await rig.let_go(last, LAST_CYCLES)
        async with asyncio.timeout(UP_S + 3.0 * LAST_CYCLES * rig.period_s):
            while last.exit_code is None:  # noqa: ASYNC110 (it is another process)
                await asyncio.sleep(0.1)
        if last.exit_code != 0:
            tally.problems.append(f"the last one ended with {last.exit_code}: {last.last_words()}")
    finally:
        await rig.end()
    return Evidence(rig.folder), tally


def main() -> int:
    """Kill, check, print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--kills", type=int, default=50)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--speed", type=float, default=15.0)
    parser.add_argument("--most-cycles", type=float, default=9.0, help="that a runtime may live")
    parser.add_argument("--keep", type=Path, help="empty folder for what it leaves")
    parser.add_argument("--json", type=Path, help="the figures, as JSON")
    options = parser.parse_args()
    folder = (options.keep or Path(tempfile.mkdtemp(prefix="edgectl-kills-"))).resolve()
    folder.mkdir(parents=True, exist_ok=True)
    rig = Rig(folder, options.speed, options.seed)
    evidence, tally = asyncio.run(rehearse(rig, options.kills, options.most_cycles))
    told = figures(evidence, tally)
    for name, value in told.items():
        if name != "problems":
            print(f"{name:26}{value}")
    print(f"problems {len(tally.problems)}; all of it is in {folder}")
    print(*tally.problems, sep="\n", end="\n" if tally.problems else "")
    if options.json is not None:
        options.json.write_text(json.dumps(told, indent=2) + "\n", "utf-8")
    return 1 if tally.problems or tally.kills < options.kills else 0


if __name__ == "__main__":
    sys.exit(main())
