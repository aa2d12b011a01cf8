"""How well the plant's base layer does alone, without any advice.

    python tests/bench/base_layer.py --seeds 5 [--hours 4] [--story default] [--grid]

Prints, per seed, the share of time within specification after the first hour
and the energy per tonne of distillate at the usual margin; with `--grid` also
for tighter settings, and the tightest of hindsight: the least energy that still
keeps at least 98 % in specification on every seed. A report, not a gate.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import partial

from sim_server.plant import SimulatedPlant

BOTTOMS_LIMIT_PPM = 500.0
DISTILLATE_LIMIT_PCT = 0.5
SAMPLE_S = 30
# A cooler tray 30 leaves more room at the top and less at the bottom, so the tightest
# settings lie along a diagonal.
GRID = (
    (0.425, 97.0),
    (0.430, 97.0),
    (0.430, 98.0),
    (0.435, 98.0),
    (0.435, 99.0),
    (0.440, 99.0),
    (0.440, 100.0),
    (0.450, 101.0),
)


@dataclass(frozen=True)
class Run:
    """One shift of one plant."""

    seed: int
    in_spec_pct: float
    kwh_per_t: float
    bottoms_mean_ppm: float
    bottoms_max_ppm: float
    distillate_mean_pct: float
    distillate_max_pct: float
    flooding_max: float
    hourly: tuple[tuple[float, float], ...]
    """Per hour: share within specification [%], energy [kWh/t]."""
    cpu_ms_per_s: float


def run(seed: int, ratio: float, temperature_degc: float, hours: float, story: str) -> Run:
    """One seed at one setting; the first hour is not scored (nor the settings' settling)."""
    plant = SimulatedPlant(seed, story)
    plant.write("FFIC-2103.SP", ratio)
    plant.write("TIC-2107.SP", temperature_degc)
    rows = []
    begin = time.process_time()
    for until in range(SAMPLE_S, int(hours * 3600) + 1, SAMPLE_S):
        plant.advance(until)
        rows.append(plant.true_values())
    cpu_ms = (time.process_time() - begin) * 1e3 / (hours * 3600)
    scored = [row for row in rows if row["time_s"] > 3600.0] or rows
    bottoms = [row["bottoms_methanol_wt_ppm"] for row in scored]
    distillate = [row["distillate_water_wt_pct"] for row in scored]
    per_hour = 3600 // SAMPLE_S
    hourly = [_score(rows[k : k + per_hour]) for k in range(0, len(rows), per_hour)]
    return Run(
        seed,
        *_score(scored),
        sum(bottoms) / len(bottoms),
        max(bottoms),
        sum(distillate) / len(distillate),
        max(distillate),
        max(row["flooding_max"] for row in scored),
        tuple(hourly),
        cpu_ms,
    )


def _score(rows: Sequence[Mapping[str, float]]) -> tuple[float, float]:
    good = sum(
        row["bottoms_methanol_wt_ppm"] < BOTTOMS_LIMIT_PPM
        and row["distillate_water_wt_pct"] < DISTILLATE_LIMIT_PCT
        for row in rows
    )
    duty = sum(row["reboiler_duty_kw"] for row in rows)
    distillate_t = sum(row["distillate_kg_h"] for row in rows) / 1e3
    return 100.0 * good / len(rows), duty / distillate_t


def _mean(values: Sequence[float]) -> float:
    return sum(values) / len(values)


def print_runs(title: str, runs: Sequence[Run]) -> None:
    """One line per seed and one for the mean."""
    print(title)
    print("  seed  in spec %  kWh/t  bottoms ppm mean/max  water wt% mean/max  flood  ms/s")
    for r in runs:
        print(
            f"  {r.seed:4d}  {r.in_spec_pct:9.1f}  {r.kwh_per_t:5.1f}"
            f"  {r.bottoms_mean_ppm:11.0f} /{r.bottoms_max_ppm:5.0f}"
            f"  {r.distillate_mean_pct:12.3f} /{r.distillate_max_pct:.3f}"
            f"  {r.flooding_max:5.3f}  {r.cpu_ms_per_s:.2f}"
        )
    print(
        f"  mean  {_mean([r.in_spec_pct for r in runs]):9.1f}"
        f"  {_mean([r.kwh_per_t for r in runs]):5.1f}"
    )
    for hour in range(len(runs[0].hourly)):
        share = _mean([r.hourly[hour][0] for r in runs])
        energy = _mean([r.hourly[hour][1] for r in runs])
        print(f"  hour {hour + 1}: in spec {share:5.1f} %, {energy:.1f} kWh/t")


def main() -> None:
    """Read the options, run, print."""
    parser = argparse.ArgumentParser(description="The base layer alone.")
    parser.add_argument("--seeds", type=int, default=5)
    parser.add_argument("--hours", type=float, default=4.0)
    parser.add_argument("--story", default="default")
    parser.add_argument("--grid", action="store_true", help="also settings of hindsight")
    options = parser.parse_args()
    seeds = range(1, options.seeds + 1)
    with ProcessPoolExecutor(max_workers=2) as pool:

        def all_seeds(ratio: float, temperature: float) -> list[Run]:
            one = partial(
                run,
                ratio=ratio,
                temperature_degc=temperature,
                hours=options.hours,
                story=options.story,
            )
            return list(pool.map(one, seeds))

        print_runs("usual margin: reflux/feed 0.461, TIC-2107 102 degC", all_seeds(0.461, 102.0))
        if not options.grid:
            return
        best: tuple[float, float, float] | None = None
        print("settings of hindsight: ratio, degC -> worst in spec %, mean kWh/t")
        for ratio, temperature in GRID:
            runs = all_seeds(ratio, temperature)
            worst = min(r.in_spec_pct for r in runs)
            energy = _mean([r.kwh_per_t for r in runs])
            print(f"  {ratio:.3f} {temperature:5.1f} -> {worst:5.1f} %  {energy:.1f}")
            if worst >= 98.0 and (best is None or energy < best[2]):
                best = (ratio, temperature, energy)
        if best is not None:
            print_runs(
                f"tightest base layer of hindsight: {best[0]:.3f}, {best[1]:g} degC",
                all_seeds(best[0], best[1]),
            )


if __name__ == "__main__":
    main()
