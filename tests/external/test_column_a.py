"""`edgectl.column` with its simplest options is Skogestad's column A.

Sources stand in `data/column_a.json`. Values under `published` are the author's; those under
`computed` come from an independent program and are tighter, but are not evidence from print.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from edgectl.column.assembly import column_rates
from edgectl.column.equilibrium import RelativeVolatility
from edgectl.column.layout import (
    VARIABLES_PER_STAGE,
    Column,
    ColumnModel,
    Component,
    Inputs,
    Overflow,
    StageState,
    Weirs,
)
from edgectl.column.stages import LATENT_SCALE_KJ_KMOL
from edgectl.column.steady import PuritySpecification, solve_steady

Vector = NDArray[np.float64]

MIN_PER_H = 60.0
COMPLEX_STEP = 1e-30


@pytest.fixture(scope="module")
def reference() -> dict[str, Any]:
    content: dict[str, Any] = json.loads(
        (Path(__file__).parent / "data" / "column_a.json").read_text()
    )
    return content


@dataclass(frozen=True)
class SolvedColumn:
    """Column A at a steady state, with its equations in one vector."""

    model: ColumnModel
    inputs: Inputs
    point: Vector
    """(stages x variables of a stage), flat."""

    @property
    def free(self) -> NDArray[np.bool_]:
        """All but the holdups of drum and sump, which perfect level control keeps."""
        mask = np.ones(self.point.size, dtype=bool)
        mask[[1, self.point.size - VARIABLES_PER_STAGE + 1]] = False
        return mask

    @property
    def differential(self) -> NDArray[np.bool_]:
        """Compositions and tray holdups."""
        mask = np.zeros((self.model.column.stages, VARIABLES_PER_STAGE), dtype=bool)
        mask[:, :2] = True
        return mask.ravel() & self.free

    @property
    def light(self) -> Vector:
        """Liquid mole fractions, drum to reboiler."""
        return self.point[::VARIABLES_PER_STAGE]

    @property
    def products(self) -> Vector:
        return self.light[[0, -1]]

    def residual(self, point: NDArray[Any], inputs: Inputs) -> NDArray[Any]:
        """Rates and residuals, in the order of the variables they belong to."""
        states = [StageState(*row) for row in point.reshape(-1, VARIABLES_PER_STAGE)]
        return np.ravel([list(rates) for rates in column_rates(np, self.model, states, inputs)])

    def slopes(self) -> Vector:
        """d residual / d point by complex step: exact to rounding."""
        columns = []
        for k in range(self.point.size):
            probe = self.point.astype(complex)
            probe[k] += 1j * COMPLEX_STEP
            columns.append(np.imag(self.residual(probe, self.inputs)) / COMPLEX_STEP)
        return np.array(columns).T

    def input_slopes(self, names: Sequence[str]) -> Vector:
        columns = []
        for name in names:
            probe = replace(self.inputs, **{name: getattr(self.inputs, name) + 1j * COMPLEX_STEP})
            columns.append(np.imag(self.residual(self.point, probe)) / COMPLEX_STEP)
        return np.array(columns).T

    def linearise(self, names: Sequence[str]) -> tuple[Vector, Vector, Vector]:
        """State matrices [1/min] and the rows of both product compositions."""
        d, a = self.differential, self.free & ~self.differential
        slopes, by_input = self.slopes(), self.input_slopes(names)
        inner = np.linalg.solve(
            slopes[np.ix_(a, a)], np.hstack([slopes[np.ix_(a, d)], by_input[a]])
        )
        reduced = np.hstack([slopes[np.ix_(d, d)], by_input[d]]) - slopes[np.ix_(d, a)] @ inner
        states = int(d.sum())
        outputs = np.eye(self.point.size)[[0, self.point.size - VARIABLES_PER_STAGE]][:, d]
        return reduced[:, :states] / MIN_PER_H, reduced[:, states:] / MIN_PER_H, outputs

    def gains(self, names: Sequence[str]) -> Vector:
        """Steady gains of the products, per kmol/h or mole fraction or kW."""
        a, b, c = self.linearise(names)
        gains: Vector = -c @ np.linalg.solve(a, b)
        return gains

    def with_inputs(self, inputs: Inputs) -> SolvedColumn:
        """The steady state that other inputs lead to, by Newton's method."""
        solved = replace(self, inputs=inputs)
        for _ in range(20):
            residual = solved.residual(solved.point, inputs)
            if np.max(np.abs(residual)) < 1e-9:
                return solved
            free, point = solved.free, solved.point.copy()
            step = np.linalg.solve(solved.slopes()[np.ix_(free, free)], residual[free])
            point[free] -= step
            solved = replace(solved, point=point)
        raise AssertionError("no steady state found")


@pytest.fixture(scope="module")
def column_a(reference: dict[str, Any]) -> SolvedColumn:
    """Column A solved for its purities, then given its own holdups and tray lags."""
    data = reference["data"]
    component = Component(name="any", molar_mass_kg_kmol=1.0)
    column = Column(
        stages=data["stages"],
        # Counted from the reboiler (1) there, from the drum (0) here.
        feed_stage=data["stages"] - data["feed_stage_from_bottom"],
        light=component,
        heavy=component,
        equilibrium=RelativeVolatility(data["alpha"]),
        overflow=Overflow.CONSTANT_MOLAR,
        murphree_efficiency=1.0,
        drum_temperature_k=350.0,
        condenser_drop_kpa=0.0,
        tray=None,
        drum_holdup_kmol=data["M_all_kmol"],
        sump_holdup_kmol=data["M_all_kmol"],
    )
    inputs = Inputs(
        reflux_kmol_h=0.0,
        duty_kw=0.0,
        feed_kmol_h=data["F_kmol_min"] * MIN_PER_H,
        feed_light=data["zF"],
        feed_temp_k=350.0,
        drum_pressure_kpa=100.0,
        column_dp_kpa=0.0,
        efficiency=1.0,
    )
    profile = reference["published"]["initial_profile_bottom_to_top"]
    steady = solve_steady(column, inputs, PuritySpecification(profile[-1], profile[0]))
    holdup = data["M_all_kmol"]
    trays = len(column.trays)
    weirs = Weirs(
        flow_kmol_h=steady.liquid_kmol_h[1:-1],
        holdup_kmol=(holdup,) * trays,
        lag_h=(data["tau_L_min"] / MIN_PER_H,) * trays,
    )
    states = [state._replace(holdup=holdup) for state in steady.states]
    return SolvedColumn(ColumnModel(column, weirs), steady.inputs, np.ravel(states))


def boil_up_kmol_h(duty_kw: float) -> float:
    """What a duty evaporates under constant molar overflow."""
    return duty_kw * 3600.0 / LATENT_SCALE_KJ_KMOL


def gains_per_kmol_min(column: SolvedColumn, names: Sequence[str]) -> Vector:
    """Gains as the source states them: flows in kmol/min, duty as boil-up."""
    scale = {"reflux_kmol_h": MIN_PER_H, "feed_kmol_h": MIN_PER_H, "feed_light": 1.0,
             "duty_kw": MIN_PER_H / boil_up_kmol_h(1.0)}  # fmt: skip
    per_kmol_min: Vector = column.gains(names) * np.array([scale[name] for name in names])
    return per_kmol_min


def test_reflux_and_boil_up(column_a: SolvedColumn, reference: dict[str, Any]) -> None:
    published = reference["published"]
    reflux = column_a.inputs.reflux_kmol_h / MIN_PER_H
    boil_up = boil_up_kmol_h(column_a.inputs.duty_kw) / MIN_PER_H
    assert reflux == pytest.approx(published["L0"], abs=1e-5)
    assert boil_up == pytest.approx(published["V0"], abs=1e-5)


def test_it_is_steady_with_its_own_holdups(column_a: SolvedColumn) -> None:
    residual = column_a.residual(column_a.point, column_a.inputs)
    assert np.max(np.abs(residual)) < 1e-6


def test_the_profile_is_the_published_one(
    column_a: SolvedColumn, reference: dict[str, Any]
) -> None:
    published = np.array(reference["published"]["initial_profile_bottom_to_top"])
    # Five digits are printed.
    np.testing.assert_allclose(column_a.light[::-1], published, rtol=0.0, atol=1e-5)


def test_gains_of_reflux_and_boil_up(column_a: SolvedColumn, reference: dict[str, Any]) -> None:
    gains = gains_per_kmol_min(column_a, ["reflux_kmol_h", "duty_kw"])
    np.testing.assert_allclose(gains, reference["computed"]["G_LV_rows_xD_xB_cols_L_V"], rtol=1e-4)
    # The published reduced model is rounded: 0.75 % is what that costs.
    rounded = 0.01 * np.array(reference["five_state_model"]["G0"])
    np.testing.assert_allclose(gains, rounded, rtol=0.01)


def test_gains_of_the_feed(column_a: SolvedColumn, reference: dict[str, Any]) -> None:
    gains = gains_per_kmol_min(column_a, ["feed_kmol_h", "feed_light"])
    np.testing.assert_allclose(gains, reference["computed"]["Gd_cols_F_zF"], rtol=1e-4)
    rounded = 0.01 * np.array(reference["five_state_model"]["Gd0"]) / np.array([0.2, 0.1])
    np.testing.assert_allclose(gains, rounded, rtol=0.02)
    published = reference["published"]
    linear = [published["linear_dyD_for_F_plus_1pct"], published["linear_dxB_for_F_plus_1pct"]]
    # Two digits are printed.
    np.testing.assert_allclose(0.01 * gains[:, 0], linear, rtol=0.0, atol=5e-5)


def test_relative_gains(column_a: SolvedColumn, reference: dict[str, Any]) -> None:
    gains = gains_per_kmol_min(column_a, ["reflux_kmol_h", "duty_kw"])
    relative = gains * np.linalg.inv(gains).T
    np.testing.assert_allclose(relative, reference["computed"]["RGA"], rtol=0.005)


def test_the_slowest_time_constant(column_a: SolvedColumn, reference: dict[str, Any]) -> None:
    matrix, _, _ = column_a.linearise(["reflux_kmol_h"])
    eigenvalues = np.linalg.eigvals(matrix)
    slowest = np.max(eigenvalues.real)
    published = reference["published"]
    assert slowest == pytest.approx(published["slowest_eigenvalue_per_min"], rel=0.01)
    assert -1.0 / slowest == pytest.approx(published["tau1_min"], rel=0.01)


def test_a_larger_feed_moves_the_products_as_published(
    column_a: SolvedColumn, reference: dict[str, Any]
) -> None:
    more = replace(column_a.inputs, feed_kmol_h=1.01 * column_a.inputs.feed_kmol_h)
    change = column_a.with_inputs(more).products - column_a.products
    published = reference["published"]
    printed = [published[f"nonlinear_d{x}_for_F_plus_1pct"] for x in ("yD", "xB")]
    np.testing.assert_allclose(change, printed, rtol=0.0, atol=5e-5)
    np.testing.assert_allclose(change, reference["computed"]["nonlinear_feed_step"], rtol=1e-3)
