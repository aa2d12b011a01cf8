"""The plant's equations: an independent solution, closed balances, survival."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from edgectl.properties.activity import nrtl_ln_gamma
from edgectl.properties.enthalpy import liquid_enthalpy_j_mol
from edgectl.properties.vapour_pressure import antoine_pa
from sim_server.column import Column, Inputs
from sim_server.plant_data import PlantData, load_plant_data
from sim_server.steady import (
    SteadyState,
    SteadyStateError,
    base_layer_specification,
    molar_mass_kg_kmol,
    mole_to_mass,
    operating_point,
    purity_specification,
    solve,
)

DATA = load_plant_data()
KMOL_H = 3600.0

# An earlier, independent solution of the same column: all equations at once in an
# interior-point solver, residual 4e-11, with 0.70 on all trays and no heat loss.
REFLUX_KMOL_H = 244.7939
DUTY_KW = 5103.557
CONDENSER_KW = 4572.973
BOILUP_KMOL_H = 454.562
TOP_DEGC = 66.53716
BOTTOM_DEGC = 108.6686
FLOODING = 0.7169318
DROP_KPA = 28.22713
DISTILLATE_KMOL_H = 214.6993


@pytest.fixture(scope="module")
def start() -> SteadyState:
    return operating_point(DATA)


def liquid_enthalpy(x: float, temperature_k: float, data: PlantData = DATA) -> float:
    methanol, water = data.components
    return float(
        x * liquid_enthalpy_j_mol(methanol.liquid_cp, temperature_k)
        + (1.0 - x) * liquid_enthalpy_j_mol(water.liquid_cp, temperature_k)
    )


def test_an_independent_solution_is_reproduced(start: SteadyState) -> None:
    plain = replace(DATA, column=replace(DATA.column, heat_loss_kw=0.0))
    column = Column(plain, start.stages.temperature_k, 105e3, 0.127)
    inputs = replace(start.inputs, efficiency_top=0.70, efficiency_bottom=0.70)
    specification = purity_specification(column, plain, 0.9965, 0.0003)
    state = solve(column, start.holdup_kmol, inputs, specification)
    stages = state.stages
    assert state.inputs.reflux_kmol_s * KMOL_H == pytest.approx(REFLUX_KMOL_H, rel=1e-5)
    assert state.inputs.duty_kw == pytest.approx(DUTY_KW, rel=1e-5)
    assert state.inputs.distillate_kmol_s * KMOL_H == pytest.approx(DISTILLATE_KMOL_H, rel=1e-5)
    assert stages.condenser_duty_kw == pytest.approx(CONDENSER_KW, rel=1e-5)
    assert stages.vapour_kmol_s[-1] * KMOL_H == pytest.approx(BOILUP_KMOL_H, rel=1e-5)
    assert stages.temperature_k[1] - 273.15 == pytest.approx(TOP_DEGC, abs=0.001)
    assert stages.temperature_k[-1] - 273.15 == pytest.approx(BOTTOM_DEGC, abs=0.001)
    assert column.flooding(stages).max() == pytest.approx(FLOODING, rel=1e-4)
    drop_kpa = (stages.pressure_pa[-1] - stages.pressure_pa[1]) / 1e3
    assert drop_kpa == pytest.approx(DROP_KPA, rel=1e-4)


def test_mass_closes_at_the_start(start: SteadyState) -> None:
    inputs, x = start.inputs, start.stages.x
    out = inputs.distillate_kmol_s + inputs.bottoms_kmol_s
    assert out == pytest.approx(inputs.feed_kmol_s, rel=1e-7)
    methanol = inputs.distillate_kmol_s * x[0] + inputs.bottoms_kmol_s * x[-1]
    assert methanol == pytest.approx(inputs.feed_kmol_s * inputs.feed_x, rel=1e-7)


def test_energy_closes_at_the_start(start: SteadyState) -> None:
    inputs, stages = start.inputs, start.stages
    drum_k = DATA.column.drum_temperature_k
    into = inputs.duty_kw + inputs.feed_kmol_s * liquid_enthalpy(
        inputs.feed_x, inputs.feed_temperature_k
    )
    out = (
        stages.condenser_duty_kw
        + DATA.column.heat_loss_kw
        + inputs.distillate_kmol_s * liquid_enthalpy(float(stages.x[0]), drum_k)
        + inputs.bottoms_kmol_s
        * liquid_enthalpy(float(stages.x[-1]), float(stages.temperature_k[-1]))
    )
    assert into == pytest.approx(out, rel=1e-6)


def test_the_start_is_the_operating_point_of_the_data(start: SteadyState) -> None:
    stages, inputs = start.stages, start.inputs
    assert stages.temperature_k[30] - 273.15 == pytest.approx(102.0, abs=1e-6)
    reflux = inputs.reflux_kmol_s * KMOL_H * molar_mass_kg_kmol(float(stages.x[0]), DATA)
    assert reflux == pytest.approx(0.461 * 18000.0, rel=1e-7)
    assert inputs.efficiency_bottom == 0.66
    # Well inside both specifications, as an operator's margin is.
    assert mole_to_mass(float(stages.x[-1]), DATA) < 250e-6
    assert 1.0 - mole_to_mass(float(stages.x[0]), DATA) < 0.003


def test_trays_are_less_efficient_from_the_feed_down(start: SteadyState) -> None:
    stages = start.stages
    methanol, water = DATA.components
    x, y, t = stages.x, stages.y, stages.temperature_k
    gamma = np.exp(nrtl_ln_gamma(np, DATA.nrtl, t, (x, 1.0 - x)))
    pressures = (
        x * gamma[0] * antoine_pa(np, methanol.antoine, t),
        (1.0 - x) * gamma[1] * antoine_pa(np, water.antoine, t),
    )
    assert (pressures[0] + pressures[1])[1:] == pytest.approx(stages.pressure_pa[1:], rel=1e-9)
    equilibrium = pressures[0] / stages.pressure_pa
    efficiency = (y[1:37] - y[2:]) / (equilibrium[1:37] - y[2:])
    assert efficiency[:22] == pytest.approx(0.70, rel=1e-6)
    assert efficiency[22:] == pytest.approx(0.66, rel=1e-6)


def test_the_start_stays_where_it_is(start: SteadyState) -> None:
    column, holdup = start.column.copy(), start.holdup_kmol
    for _ in range(600):
        holdup, stages = column.step(holdup, start.inputs)
    assert np.max(np.abs(holdup / start.holdup_kmol - 1.0)) < 1e-4
    assert stages.temperature_k[30] == pytest.approx(start.stages.temperature_k[30], abs=1e-3)


def test_half_the_step_gives_the_same_transient(start: SteadyState) -> None:
    inputs = replace(start.inputs, duty_kw=1.05 * start.inputs.duty_kw)
    temperatures = []
    for dt_s in (1.0, 0.5):
        column, holdup = start.column.copy(), start.holdup_kmol
        for _ in range(int(900 / dt_s)):
            holdup, stages = column.step(holdup, inputs, dt_s)
        temperatures.append(stages.temperature_k[1:])
    assert np.max(np.abs(temperatures[0] - start.stages.temperature_k[1:])) > 3.0
    assert temperatures[0] == pytest.approx(temperatures[1], abs=0.02)


@pytest.mark.parametrize(
    "upset",
    [
        {"duty_kw": 0.0},
        {"duty_kw": 7100.0},
        {"feed_kmol_s": 0.0},
        {"reflux_kmol_s": 0.0},
        {"efficiency_top": 0.05, "efficiency_bottom": 0.05},
    ],
)
def test_large_upsets_stay_finite_and_physical(start: SteadyState, upset: dict[str, float]) -> None:
    column, holdup = start.column.copy(), start.holdup_kmol
    inputs: Inputs = replace(start.inputs, **upset)
    for _ in range(1800):
        holdup, stages = column.step(holdup, inputs)
    for values in (holdup, stages.temperature_k, stages.pressure_pa, stages.vapour_kmol_s):
        assert np.all(np.isfinite(values))
        assert np.all(values >= 0.0)
    assert np.all(holdup[1] <= holdup[0])
    assert np.all(stages.temperature_k[1:] > 320.0)
    assert np.all(stages.temperature_k[1:] < 390.0)


def test_a_hopeless_specification_is_refused(start: SteadyState) -> None:
    column = start.column.copy()
    specification = base_layer_specification(
        column,
        replace(DATA, base_layer=replace(DATA.base_layer, tray_temperature_degc=180.0)),
    )
    with pytest.raises(SteadyStateError, match="no steady state after 5 steps"):
        solve(column, start.holdup_kmol, start.inputs, specification, iterations=5)
