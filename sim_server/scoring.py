"""How the plant really did: true values, recorded beside the plant and scored later.

True values go to a file and never to OPC UA: no runtime can peek at them.
`python -m sim_server.scoring TRUTH.csv` prints the score as JSON.
"""

from __future__ import annotations

import argparse
import csv
import json
import sys
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Final, TextIO

ROW_PERIOD_S: Final = 30.0
SETTLING_S: Final = 3600.0
"""Runs are scored after their first hour, or as a whole when they are shorter."""

TRUE_DUTY: Final = "reboiler_duty_kw"
TRUE_DISTILLATE: Final = "distillate_kg_h"


@dataclass(frozen=True, slots=True)
class Specification:
    """One product specification of the plant, in true values."""

    name: str
    column: str
    """A name in the plant's `true_values`."""
    unit: str
    high: float
    aim: float | None = None
    """Where a controller was asked to hold it; None when it only has a limit."""


SPECIFICATIONS: Final = (
    Specification("BOTTOMS", "bottoms_methanol_wt_ppm", "wt ppm", high=500.0),
    Specification("DISTILLATE", "distillate_water_wt_pct", "wt %", high=0.5),
)


@dataclass(frozen=True, slots=True)
class QualityScore:
    """How one product did."""

    name: str
    unit: str
    in_spec_fraction: float
    mean: float
    mean_abs_error: float | None
    """From the aim, in the product's unit; None without an aim."""


@dataclass(frozen=True, slots=True)
class Score:
    """How one run did."""

    rows: int
    from_s: float
    to_s: float
    qualities: tuple[QualityScore, ...]
    in_spec_fraction: float
    """All products within specification at once [-]."""
    energy_kwh_per_t_distillate: float
    usable_fraction: float
    """Share of the time in which the plant called the advice usable."""
    crew_actions: int
    """Setpoints entered by the crew in the whole run."""


class TruthFile:
    """Writes one row of true values every 30 plant seconds."""

    def __init__(self, file: TextIO, names: Iterable[str]) -> None:
        """`names` of the true values, in the order of their columns."""
        self._file = file
        self._rows = csv.writer(file)
        self._names = tuple(name for name in names if name != "time_s")
        self._rows.writerow(("time_s", *self._names, "advice_usable", "crew_actions"))

    def record(
        self, time_s: float, true_values: Mapping[str, float], usable: bool, crew_actions: int
    ) -> None:
        values = (f"{true_values[name]:.9g}" for name in self._names)
        self._rows.writerow((f"{time_s:.0f}", *values, int(usable), crew_actions))
        self._file.flush()


def read_truth(path: Path) -> list[dict[str, float]]:
    """The rows of a truth file.

    A last row that a killed server left unfinished is dropped.
    """
    with path.open(encoding="utf-8", newline="") as file:
        return [
            {name: float(value) for name, value in row.items()}
            for row in csv.DictReader(file)
            if all(row.values())
        ]


def score(
    truth_rows: Sequence[Mapping[str, float]],
    after_s: float = SETTLING_S,
    specifications: Sequence[Specification] = SPECIFICATIONS,
) -> Score:
    """Score a run from its true values.

    Parameters
    ----------
    truth_rows : sequence of mappings
        Rows of a truth file, evenly spaced in time.
    after_s : float
        Rows up to this plant second are left out, unless nothing else is there [s].
    specifications : sequence of Specification

    Raises
    ------
    ValueError
        No rows, or no distillate was made.
    """
    if not truth_rows:
        raise ValueError("no true values to score: the truth file has no rows")
    rows = [row for row in truth_rows if row["time_s"] > after_s] or list(truth_rows)
    distillate = sum(row[TRUE_DISTILLATE] for row in rows)
    if distillate <= 0.0:
        raise ValueError("no distillate was made: energy per tonne is not defined")
    return Score(
        rows=len(rows),
        from_s=rows[0]["time_s"],
        to_s=rows[-1]["time_s"],
        qualities=tuple(_quality(rows, spec) for spec in specifications),
        in_spec_fraction=sum(
            all(row[spec.column] < spec.high for spec in specifications) for row in rows
        )
        / len(rows),
        energy_kwh_per_t_distillate=1000.0 * sum(row[TRUE_DUTY] for row in rows) / distillate,
        usable_fraction=sum(row["advice_usable"] for row in rows) / len(rows),
        crew_actions=int(truth_rows[-1]["crew_actions"]),
    )


def _quality(rows: Sequence[Mapping[str, float]], spec: Specification) -> QualityScore:
    values = [row[spec.column] for row in rows]
    aim = spec.aim
    return QualityScore(
        name=spec.name,
        unit=spec.unit,
        in_spec_fraction=sum(value < spec.high for value in values) / len(values),
        mean=sum(values) / len(values),
        mean_abs_error=(
            None if aim is None else sum(abs(value - aim) for value in values) / len(values)
        ),
    )


def main(arguments: Sequence[str] | None = None) -> int:
    """Print the score of the one truth file that is named; the exit code."""
    parser = argparse.ArgumentParser(prog="sim_server.scoring")
    parser.add_argument("truth", type=Path)
    parser.add_argument(
        "--aim",
        action="append",
        default=[],
        metavar="NAME=VALUE",
        help="where a product was to be held; may be given again",
    )
    options = parser.parse_args(arguments)
    try:
        aims = {name: float(value) for name, value in (aim.split("=") for aim in options.aim)}
        specifications = [
            replace(spec, aim=aims.get(spec.name, spec.aim)) for spec in SPECIFICATIONS
        ]
        found = score(read_truth(options.truth), specifications=specifications)
    except (OSError, ValueError, KeyError) as error:
        sys.stderr.write(f"sim_server.scoring: {error}\n")
        return 1
    sys.stdout.write(json.dumps(asdict(found)) + "\n")
    return 0


if __name__ == "__main__":
    sys.exit(main())
