"""Every drill on real processes: the plant's server, the runtime, its killed workers.

    python tests/bench/drills.py [--drill NAME ...] [--speed 15] [--long] [--keep DIR]

Per drill: `edgectl demo --drill NAME` with a crew that follows, then one line per promise,
judged from the journal, from the server's own write log and from the plant's true values.
`--long` runs the frozen analyser until its CV is dropped (over four hours of plant time).
With `--keep DIR`, a drill that is already there is judged again and not run.
Exits 1 when a promise is broken. Timings are of this machine as busy as it is.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
import tempfile
from pathlib import Path

# The benches are scripts: what one offers the next one finds beside it.
sys.path.insert(0, str(Path(__file__).resolve().parent))

from drill_checks import Verdict
from drill_promises import DRILLS, common
from evidence import Evidence

HOURS = {
    "slow-solver": 0.4,
    "bad-quality": 0.5,
    "server-drop": 0.4,
    "frozen-analyser": 1.25,
    "loop-manual": 0.75,
    "valve-limit": 0.6,
    "operator-off": 0.6,
}
"""Long enough for each fault to begin (a third of the run, at most 20 min), pass and be over."""
LONG_HOURS = 4.25
"""A frozen analyser goes on for an hour with new times, then its CV is dropped after three."""


def rehearse(drill: str, hours: float, speed: float, seed: int, folder: Path) -> None:
    """One drill, unless it is there already."""
    if (folder / "journal.sqlite").exists():
        return
    command = [sys.executable, "-m", "edgectl.console", "demo", "--drill", drill]
    command += ["--crew", "follows", "--seed", str(seed), "--hours", str(hours)]
    command += ["--speed", str(speed), "--keep", str(folder), "--json", str(folder) + ".json"]
    folder.parent.mkdir(parents=True, exist_ok=True)
    done = subprocess.run(
        command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True, check=False
    )
    if done.returncode not in (0, 1):
        raise SystemExit(f"{drill}: the demo ended with code {done.returncode}: {done.stderr}")


def judged(drill: str, folder: Path) -> list[Verdict]:
    """All verdicts of one drill."""
    evidence = Evidence(folder)
    return [*DRILLS[drill](evidence), *common(evidence)]


def print_verdicts(drill: str, verdicts: list[Verdict], about: str) -> None:
    print(f"{drill} ({about})")
    for verdict in verdicts:
        print(f"  {'kept  ' if verdict.kept else 'BROKEN'} {verdict.promise}: {verdict.figures}")
    sys.stdout.flush()


def main() -> int:
    """Run, judge, print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--drill", nargs="+", choices=sorted(DRILLS), default=list(DRILLS))
    parser.add_argument("--speed", type=float, default=15.0)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--long", action="store_true", help="the frozen analyser to its end")
    parser.add_argument("--keep", type=Path, help="folder for what the drills leave")
    options = parser.parse_args()
    root = options.keep or Path(tempfile.mkdtemp(prefix="edgectl-drills-"))
    print(f"journals and reports in {root}", flush=True)
    broken: list[str] = []
    for drill in options.drill:
        long_run = options.long and drill == "frozen-analyser"
        hours = LONG_HOURS if long_run else HOURS[drill]
        folder = root.resolve() / (f"{drill}-long" if long_run else drill)
        rehearse(drill, hours, options.speed, options.seed, folder)
        verdicts = judged(drill, folder)
        load = os.getloadavg()[0]
        about = f"{60.0 * hours:.0f} plant min at {options.speed:g}x, load {load:.1f}"
        print_verdicts(drill, verdicts, about)
        broken += [f"{drill}: {verdict.promise}" for verdict in verdicts if not verdict.kept]
    print(f"{len(options.drill)} drills, {len(broken)} promises broken")
    return 1 if broken else 0


if __name__ == "__main__":
    sys.exit(main())
