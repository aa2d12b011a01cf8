"""The same stage equations serve numbers and symbols."""

from __future__ import annotations

from dataclasses import fields, replace

import casadi as ca
import numpy as np
import pytest

from edgectl.column.assembly import column_rates, stage_pressures_kpa
from edgectl.column.hydraulics import weir_crest_m, weir_lag_h
from edgectl.column.layout import Inputs, StageState
from edgectl.column.steady import SteadyState


def test_numbers_and_symbols_agree(steady: SteadyState) -> None:
    disturbed = replace(steady.inputs, reflux_kmol_h=260.0, feed_kmol_h=800.0)
    numbers = column_rates(np, steady.model, steady.states, disturbed)
    symbols = ca.SX.sym("s", len(steady.states), 5)
    states = [StageState(*(symbols[i, k] for k in range(5))) for i in range(len(steady.states))]
    inputs = Inputs(**{f.name: getattr(disturbed, f.name) for f in fields(disturbed)})
    rates = column_rates(ca, steady.model, states, inputs)
    function = ca.Function("rates", [symbols], [ca.vertcat(*(ca.vertcat(*r) for r in rates))])
    evaluated = np.array(function(np.array(steady.states))).ravel()
    assert evaluated == pytest.approx(np.ravel(numbers), rel=1e-9, abs=1e-9)


def test_a_stage_sees_only_its_neighbours(steady: SteadyState) -> None:
    before = np.array(column_rates(np, steady.model, steady.states, steady.inputs))
    states = list(steady.states)
    states[10] = states[10]._replace(light=0.5, temp_k=350.0, vapour=400.0, holdup=3.0)
    after = np.array(column_rates(np, steady.model, states, steady.inputs))
    touched = set(np.flatnonzero(np.any(before != after, axis=1)))
    assert touched == {9, 10, 11}


def test_the_pressure_profile_ends_at_the_measured_drop(steady: SteadyState) -> None:
    pressures = stage_pressures_kpa(steady.model.column, steady.inputs)
    assert pressures[0] == 105.0
    assert pressures[1] == 109.0
    assert pressures[-1] - pressures[1] == pytest.approx(28.46)


def test_weir_lag_is_the_slope_of_the_holdup(steady: SteadyState) -> None:
    tray = steady.model.column.tray
    assert tray is not None
    density, flow, step = 25.0, 250.0, 1e-4
    area = tray.active_area_m2 + tray.downcomer_area_m2

    def holdup(kmol_h: float) -> float:
        return density * area * weir_crest_m(kmol_h / density / 3600.0, tray.weir_length_m)

    slope = (holdup(flow + step) - holdup(flow - step)) / (2 * step)
    assert weir_lag_h(flow, density, tray) == pytest.approx(slope, rel=1e-6)
