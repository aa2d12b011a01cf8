"""The operating point of the example column, and what is refused."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from edgectl.column.assembly import column_rates
from edgectl.column.describe import column_from_site, operating_inputs, purity_specification
from edgectl.column.layout import mass_fraction, molar_mass, mole_fraction
from edgectl.column.steady import NoSteadyStateError, SteadyState, solve_steady

# The same column solved by an independent programme (modified Raoult, the same Antoine
# and Wilson parameters, computed tray by tray pressure drops): the invented plant's
# nominal case.
NOMINAL = {"reflux_kmol_h": 248.39856, "duty_kw": 5140.04077, "bottoms_degc": 108.717735}
TRAY_30_DEGC = 96.134
HYDRAULIC_LAG_S = (3.55176144, 5.98483144)


def test_the_nominal_case_is_reproduced(steady: SteadyState) -> None:
    assert steady.inputs.reflux_kmol_h == pytest.approx(NOMINAL["reflux_kmol_h"], rel=3e-3)
    assert steady.inputs.duty_kw == pytest.approx(NOMINAL["duty_kw"], rel=3e-3)
    assert steady.states[-1].temp_k - 273.15 == pytest.approx(NOMINAL["bottoms_degc"], abs=0.1)
    # Straight pressure profile here, computed there: the sensitive tray feels it most.
    assert steady.states[30].temp_k - 273.15 == pytest.approx(TRAY_30_DEGC, abs=0.1)


def test_rates_vanish_and_balances_close(steady: SteadyState) -> None:
    rates = column_rates(np, steady.model, steady.states, steady.inputs)
    worst = max(
        abs(float(r.light_rate) * s.holdup) for r, s in zip(rates, steady.states, strict=True)
    )
    assert worst < 1e-6
    inputs = steady.inputs
    distillate, bottoms = steady.distillate_kmol_h, steady.liquid_kmol_h[-1]
    assert distillate + bottoms == pytest.approx(inputs.feed_kmol_h, rel=1e-9)
    light = distillate * steady.states[0].light + bottoms * steady.states[-1].light
    assert light == pytest.approx(inputs.feed_kmol_h * inputs.feed_light, rel=1e-9)


def test_weirs_pass_their_own_flow_and_lag_as_trays_do(steady: SteadyState) -> None:
    weirs = steady.model.weirs
    assert weirs.flow_kmol_h == pytest.approx(steady.liquid_kmol_h[1:-1])
    low, high = HYDRAULIC_LAG_S
    lags_s = np.array(weirs.lag_h) * 3600.0
    # The independent programme linearised the whole holdup; ours leaves the drop's share out.
    assert lags_s.min() > 0.8 * low
    assert lags_s.max() < 1.5 * high


def test_more_efficient_trays_need_less_heat(
    site_table: dict[str, Any], steady: SteadyState
) -> None:
    column = column_from_site(site_table)
    better = replace(operating_inputs(site_table, column), efficiency=0.75)
    solved = solve_steady(column, better, purity_specification(site_table, column))
    assert solved.inputs.duty_kw < steady.inputs.duty_kw


def test_purities_that_do_not_straddle_the_feed_are_refused(site_table: dict[str, Any]) -> None:
    column = column_from_site(site_table)
    inputs = operating_inputs(site_table, column)
    purities = replace(purity_specification(site_table, column), distillate_light=0.1)
    with pytest.raises(NoSteadyStateError, match="must rise from bottoms"):
        solve_steady(column, inputs, purities)


def test_purities_out_of_reach_are_said_so(site_table: dict[str, Any]) -> None:
    column = replace(column_from_site(site_table), stages=8, feed_stage=4)
    inputs = operating_inputs(site_table, column)
    with pytest.raises(NoSteadyStateError, match="within reach"):
        solve_steady(column, inputs, purity_specification(site_table, column), max_iterations=15)


def test_mass_and_mole_fractions_are_inverse(steady: SteadyState) -> None:
    column = steady.model.column
    for fraction in (1e-6, 0.38, 0.999):
        assert mass_fraction(mole_fraction(fraction, column), column) == pytest.approx(fraction)
    assert molar_mass(1.0, column) == column.light.molar_mass_kg_kmol
