"""Steady states of the simulated column.

`python -m sim_server.steady` solves the operating point of the data file and
prints it; with `--write` it also stores the solution as the packaged start,
from which the plant polishes its own first state in a fraction of a second.
"""

from __future__ import annotations

import argparse
import tomllib
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from sim_server.column import Array, Column, Inputs, Stages
from sim_server.plant_data import DATA, PlantData, load_plant_data

START_FILE: Final = DATA / "methanol_water_start.toml"
TOLERANCE: Final = 1e-9
LARGEST_STEP: Final = 1.0
"""Newton steps are cut so that no logarithmic unknown moves further than this."""


class SteadyStateError(RuntimeError):
    """Newton's method did not reach a steady state."""


@dataclass(slots=True)
class SteadyState:
    """A column at rest and what keeps it there."""

    column: Column
    holdup_kmol: Array
    inputs: Inputs
    stages: Stages


@dataclass(slots=True)
class Specification:
    """Which inputs are free, where they start, and what must hold instead."""

    free: tuple[str, ...]
    """Names of `Inputs` fields."""
    errors: Callable[[Array, Stages, Inputs], Sequence[float]]
    """As many errors as free inputs, each of order one or smaller near the solution."""


def mass_to_mole(methanol_wt: float, data: PlantData) -> float:
    """Methanol mole fraction [-] of a mass fraction [-]."""
    methanol, water = data.components
    moles = methanol_wt / methanol.molar_mass_kg_kmol
    return moles / (moles + (1.0 - methanol_wt) / water.molar_mass_kg_kmol)


def mole_to_mass(methanol_x: float, data: PlantData) -> float:
    """Methanol mass fraction [-] of a mole fraction [-]."""
    methanol, water = data.components
    mass = methanol_x * methanol.molar_mass_kg_kmol
    return mass / (mass + (1.0 - methanol_x) * water.molar_mass_kg_kmol)


def molar_mass_kg_kmol(methanol_x: float, data: PlantData) -> float:
    """Mean molar mass [kg/kmol] at a methanol mole fraction [-]."""
    methanol, water = data.components
    return methanol_x * methanol.molar_mass_kg_kmol + (1.0 - methanol_x) * water.molar_mass_kg_kmol


def level_pct(column: Column, holdup_kmol: Array, end: int, data: PlantData) -> float:
    """Level [%] of the drum (`end` 0) or the sump (`end` -1), linear in volume."""
    x = float(holdup_kmol[1, end] / holdup_kmol[0, end])
    if end == 0:
        temperature_k, volume_m3 = data.column.drum_temperature_k, data.column.drum_volume_m3
    else:
        temperature_k, volume_m3 = column.sump_temperature_k, data.column.sump_volume_m3
    density = column.liquid_density_kmol_m3(x, temperature_k)
    return 100.0 * float(holdup_kmol[0, end]) / density / volume_m3


def base_layer_specification(column: Column, data: PlantData) -> Specification:
    """Tray-30 temperature and both levels at their setpoints; reflux given."""
    target = data.base_layer

    def errors(holdup: Array, stages: Stages, inputs: Inputs) -> Sequence[float]:
        del inputs
        return (
            (float(stages.temperature_k[30]) - 273.15 - target.tray_temperature_degc) / 10.0,
            (level_pct(column, holdup, 0, data) - target.drum_level_pct) / 100.0,
            (level_pct(column, holdup, -1, data) - target.sump_level_pct) / 100.0,
        )

    return Specification(("duty_kw", "distillate_kmol_s", "bottoms_kmol_s"), errors)


def purity_specification(
    column: Column, data: PlantData, distillate_wt: float, bottoms_wt: float
) -> Specification:
    """Both product purities [mass fraction methanol] and both levels; reflux free."""
    target = data.base_layer

    def errors(holdup: Array, stages: Stages, inputs: Inputs) -> Sequence[float]:
        del inputs
        water_wt = 1.0 - mole_to_mass(float(stages.x[0]), data)
        return (
            float(np.log(water_wt / (1.0 - distillate_wt))),
            float(np.log(mole_to_mass(float(stages.x[-1]), data) / bottoms_wt)),
            (level_pct(column, holdup, 0, data) - target.drum_level_pct) / 100.0,
            (level_pct(column, holdup, -1, data) - target.sump_level_pct) / 100.0,
        )

    free = ("reflux_kmol_s", "duty_kw", "distillate_kmol_s", "bottoms_kmol_s")
    return Specification(free, errors)


def solve(
    column: Column,
    holdup_kmol: Array,
    inputs: Inputs,
    specification: Specification,
    iterations: int = 40,
) -> SteadyState:
    """Newton's method on the column's own right-hand side.

    The unknowns are logarithms: of the holdups, of the odds of the mole
    fractions and of the free inputs, so that nothing can turn negative. The
    Jacobian is kept while the error falls fast.

    Parameters
    ----------
    column : Column
        Its memory moves on to the solution.
    holdup_kmol : array, shape (2, 38)
        First guess of the holdups [kmol].
    inputs : Inputs
        Given inputs, and first guesses of the free ones.
    specification : Specification
        The free inputs and the conditions that fix them.
    iterations : int
        Limit of Newton steps [-].

    Returns
    -------
    SteadyState
        Rates below 1e-9 of the holdups per second.

    Raises
    ------
    SteadyStateError
        Not converged within `iterations`.
    """
    unknowns = _pack(holdup_kmol, inputs, specification)
    error, state = _errors(column, unknowns, inputs, specification, rounds=12)
    jacobian: Array | None = None
    for _ in range(iterations):
        size = float(np.max(np.abs(error)))
        if size < TOLERANCE:
            return state
        if jacobian is None:
            jacobian = _jacobian(column, unknowns, inputs, specification)
        step = -np.linalg.solve(jacobian, error)
        step *= min(1.0, LARGEST_STEP / float(np.max(np.abs(step))))
        unknowns = unknowns + step
        error, state = _errors(column, unknowns, inputs, specification, rounds=12)
        if float(np.max(np.abs(error))) > 0.2 * size:
            jacobian = None
    raise SteadyStateError(f"no steady state after {iterations} steps: error {size:.3g}")


def operating_point(data: PlantData) -> SteadyState:
    """The steady state of the data file's feed and setpoints, from the packaged start."""
    start = tomllib.loads(START_FILE.read_text(encoding="utf-8"))
    feed, base = data.feed, data.base_layer
    total = np.array(start["total_kmol"])
    holdup = np.stack((total, total * np.array(start["methanol_x"])))
    feed_x = mass_to_mole(feed.methanol_wt, data)
    reflux_kg_h = base.reflux_ratio * feed.flow_kg_h
    inputs = Inputs(
        feed_kmol_s=feed.flow_kg_h / molar_mass_kg_kmol(feed_x, data) / 3600.0,
        feed_x=feed_x,
        feed_temperature_k=feed.temperature_k,
        reflux_kmol_s=start["reflux_kmol_s"],
        distillate_kmol_s=start["distillate_kmol_s"],
        bottoms_kmol_s=start["bottoms_kmol_s"],
        duty_kw=start["duty_kw"],
        drum_pressure_pa=base.drum_pressure_kpa * 1e3,
        efficiency_top=data.column.efficiency_top,
        efficiency_bottom=data.column.efficiency_bottom,
    )
    temperature = np.array(start["temperature_k"])
    column = Column(data, temperature, inputs.drum_pressure_pa, start["vapour_kmol_s"])
    specification = base_layer_specification(column, data)
    # The reflux is known in mass; its molar flow depends on the drum's composition,
    # which hardly depends on it: a few rounds of substitution settle it.
    for _ in range(20):
        state = solve(column, holdup, inputs, specification)
        x_drum = float(state.stages.x[0])
        reflux_kmol_s = reflux_kg_h / molar_mass_kg_kmol(x_drum, data) / 3600.0
        holdup = state.holdup_kmol
        if abs(reflux_kmol_s - state.inputs.reflux_kmol_s) < 1e-10:
            return state
        inputs = replace(state.inputs, reflux_kmol_s=reflux_kmol_s)
    raise SteadyStateError("the reflux did not settle")


def _pack(holdup: Array, inputs: Inputs, specification: Specification) -> Array:
    odds = holdup[1] / (holdup[0] - holdup[1])
    free = [getattr(inputs, name) for name in specification.free]
    return np.concatenate((np.log(holdup[0]), np.log(odds), np.log(free)))


def _errors(
    column: Column, unknowns: Array, inputs: Inputs, specification: Specification, rounds: int
) -> tuple[Array, SteadyState]:
    count = (unknowns.size - len(specification.free)) // 2
    total = np.exp(unknowns[:count])
    x = 1.0 / (1.0 + np.exp(-unknowns[count : 2 * count]))
    holdup = np.stack((total, total * x))
    values = np.exp(unknowns[2 * count :]).tolist()
    trial = replace(inputs, **dict(zip(specification.free, values, strict=True)))
    rates, stages = column.settle(holdup, trial, rounds)
    errors = np.array(specification.errors(holdup, stages, trial))
    # Each balance relative to the smaller of its two components' holdups.
    scale = np.minimum(holdup[1], holdup[0] - holdup[1])
    excess = rates[1] - x * rates[0]
    combined = np.concatenate((rates[0] / total, excess / scale, errors))
    return combined, SteadyState(column, holdup, trial, stages)


def _jacobian(
    column: Column, unknowns: Array, inputs: Inputs, specification: Specification
) -> Array:
    increment = 1e-6
    rounds = 6
    base, _ = _errors(column.copy(), unknowns, inputs, specification, rounds)
    jacobian = np.empty((unknowns.size, unknowns.size))
    for k in range(unknowns.size):
        shifted = unknowns.copy()
        shifted[k] += increment
        error, _ = _errors(column.copy(), shifted, inputs, specification, rounds)
        jacobian[:, k] = (error - base) / increment
    return jacobian


def start_text(state: SteadyState) -> str:
    """The packaged start file's text for a steady state."""

    def numbers(values: Array) -> str:
        return "[" + ", ".join(f"{value:.9g}" for value in values) + "]"

    inputs, stages = state.inputs, state.stages
    return "\n".join(
        (
            "# Steady state of the invented column at its start, stage 0 (drum) to 37 (reboiler).",
            "# Written by `python -m sim_server.steady --write`; polished again at every start.",
            f"reflux_kmol_s = {inputs.reflux_kmol_s:.9g}",
            f"distillate_kmol_s = {inputs.distillate_kmol_s:.9g}",
            f"bottoms_kmol_s = {inputs.bottoms_kmol_s:.9g}",
            f"vapour_kmol_s = {float(np.mean(stages.vapour_kmol_s[1:])):.9g}",
            f"duty_kw = {inputs.duty_kw:.9g}",
            f"total_kmol = {numbers(state.holdup_kmol[0])}",
            f"methanol_x = {numbers(stages.x)}",
            f"temperature_k = {numbers(stages.temperature_k)}",
            "",
        )
    )


def main(arguments: Sequence[str] | None = None) -> None:
    """Solve the operating point, print it and, if asked, store it."""
    parser = argparse.ArgumentParser(description="Steady state of the simulated column.")
    parser.add_argument("--write", action="store_true", help="store it as the packaged start")
    options = parser.parse_args(arguments)
    data = load_plant_data()
    state = operating_point(data)
    text = start_text(state)
    if options.write:
        START_FILE.write_text(text, encoding="utf-8")
    print(text)  # noqa: T201  the command's output


if __name__ == "__main__":
    main()
