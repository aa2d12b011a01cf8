"""Wilson and NRTL against an independent implementation and a printed example.

Sources stand beside each row of `data/activity_coefficients.csv`.
"""

from __future__ import annotations

import csv
import math
from pathlib import Path

import pytest

from edgectl.properties.activity import Nrtl, Wilson, nrtl_ln_gamma, wilson_lambdas, wilson_ln_gamma

DATA = Path(__file__).parent / "data" / "activity_coefficients.csv"
ROWS = tuple(csv.DictReader(DATA.read_text(encoding="utf-8").splitlines()))
J_PER_CAL = 4.184

# From memory: Smith, Van Ness & Abbott, Table 12.5 (7th ed.), after Gmehling & Onken.
WILSON = Wilson((40.73, 18.07), ((0.0, 107.38 * J_PER_CAL), (469.55 * J_PER_CAL, 0.0)))
NRTL = Nrtl(((0.0, -253.88 * J_PER_CAL), (845.21 * J_PER_CAL, 0.0)), ((0.0, 0.2994), (0.2994, 0.0)))

# Sinnott, Chemical Engineering Design, Example 8.15a: methanol, ethanol, 2-propanol, water.
NAMES = ("methanol", "ethanol", "2-propanol", "water")
LAMBDAS = (
    (1.0, 2.3357, 2.7385, 0.4180),
    (0.1924, 1.0, 1.6500, 0.1108),
    (0.2419, 0.5343, 1.0, 0.0465),
    (0.9699, 0.9560, 0.7795, 1.0),
)
PRINTED = {"2-propanol": 2.11, "water": 1.25}


@pytest.mark.parametrize("row", ROWS, ids=[row["id"] for row in ROWS])
def test_activity_coefficients(row: dict[str, str]) -> None:
    x = [float(value) for value in row["x"].split()]
    expected = [float(value) for value in row["values"].split()]
    if row["model"] == "wilson_given":
        name = row["id"].removeprefix("WIL-")
        value = math.exp(wilson_ln_gamma(math, LAMBDAS, x)[NAMES.index(name)])
        assert value == pytest.approx(expected[0], rel=1e-6)
        if name in PRINTED:
            assert value == pytest.approx(PRINTED[name], abs=0.005)
        return
    temperature_k = float(row["temperature_k"])
    if row["model"] == "wilson":
        ln_gamma = wilson_ln_gamma(math, wilson_lambdas(math, WILSON, temperature_k), x)
    else:
        ln_gamma = nrtl_ln_gamma(math, NRTL, temperature_k, x)
    assert [math.exp(value) for value in ln_gamma] == pytest.approx(expected, rel=1e-6)
