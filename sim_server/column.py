"""The simulated column's own dynamic equations, vectorised over the stages.

Two states per stage: total holdup and methanol holdup [kmol]. Everything else
is algebraic: bubble-point temperature from modified Raoult's law with NRTL,
vapour composition from the Murphree efficiency, vapour flow from the
quasi-steady energy balance, liquid flow from the Francis weir, pressure from
the tray drops. Three quantities are remembered from the evaluation before, one
plant second old at most: temperatures (one Newton step each time follows the
bubble point to well below a millikelvin), vapour flows (for the dry head) and
pressures. At a steady state they agree with the present ones exactly.

Stages: 0 = reflux drum, 1..36 trays from the top, 37 = reboiler and sump.
Flows in kmol/s, enthalpies in kJ/kmol (= J/mol), pressures in Pa.

References
----------
Francis weir: ISO 1438; dry and residual head: R. K. Sinnott, Chemical
Engineering Design, ch. 11; flooding: M. Lygeros, G. Magoulas, Hydrocarbon
Processing 65(12) (1986) 43 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from edgectl.properties.activity import nrtl_ln_gamma
from edgectl.properties.density import (
    ideal_vapour_density_mol_m3,
    liquid_density_mol_m3,
    mixture_liquid_density_mol_m3,
)
from edgectl.properties.enthalpy import heat_of_vaporisation_j_mol, liquid_enthalpy_j_mol
from edgectl.properties.surface_tension import surface_tension_n_m
from edgectl.properties.vapour_pressure import antoine_pa, antoine_slope_1_k
from sim_server.plant_data import PlantData

Array = npt.NDArray[np.float64]

GRAVITY_M_S2: Final = 9.81
FRANCIS_M05_S: Final = 1.84
DOWNCOMER_LOSS_M: Final = 0.02
"""Head lost under the downcomer apron, taken as constant."""
MIN_HOLDUP_KMOL: Final = 1e-3


@dataclass(slots=True)
class Inputs:
    """What acts on the column during one step."""

    feed_kmol_s: float
    feed_x: float
    feed_temperature_k: float
    reflux_kmol_s: float
    distillate_kmol_s: float
    bottoms_kmol_s: float
    duty_kw: float
    drum_pressure_pa: float
    efficiency_top: float
    efficiency_bottom: float


@dataclass(slots=True)
class Stages:
    """The algebraic quantities of one evaluation, each of shape (38,)."""

    x: Array
    y: Array
    temperature_k: Array
    pressure_pa: Array
    liquid_kmol_s: Array
    vapour_kmol_s: Array
    condenser_duty_kw: float


class Column:
    """Right-hand side of the column with its short memory.

    Parameters
    ----------
    data : PlantData
        Geometry and properties.
    temperature_k : array, shape (38,)
        First guess of the temperatures [K].
    drum_pressure_pa : float
        For the first guess of the pressure profile [Pa].
    vapour_kmol_s : float
        First guess of the vapour flow on every stage [kmol/s].
    """

    def __init__(
        self,
        data: PlantData,
        temperature_k: Array,
        drum_pressure_pa: float,
        vapour_kmol_s: float,
    ) -> None:
        self._data = data
        self._count = data.column.trays + 2
        self._temperature_k = temperature_k.copy()
        self._vapour_kmol_s = np.full(self._count, vapour_kmol_s)
        self._pressure_pa = np.full(self._count, drum_pressure_pa)
        self._pressure_pa[1:] += data.column.condenser_drop_pa
        self._above_feed = np.arange(self._count) < data.column.feed_tray
        # The shell loses heat evenly; the drum's loss is part of the condenser's duty.
        self._loss_kw = data.column.heat_loss_kw / (self._count - 1)
        self._drum_enthalpy = self._pure_liquid_enthalpies(data.column.drum_temperature_k)
        self._refresh_properties()

    def copy(self) -> Column:
        """A column with the same memory, so that a trial evaluation leaves no trace."""
        twin = Column(self._data, self._temperature_k, 0.0, 0.0)
        twin._pressure_pa = self._pressure_pa.copy()
        twin._vapour_kmol_s = self._vapour_kmol_s.copy()
        return twin

    @property
    def pressure_pa(self) -> Array:
        """Pressure profile after the last evaluation [Pa], shape (38,)."""
        return self._pressure_pa

    @property
    def sump_temperature_k(self) -> float:
        """Temperature of the reboiler after the last evaluation [K]."""
        return float(self._temperature_k[-1])

    def step(self, holdup_kmol: Array, inputs: Inputs, dt_s: float = 1.0) -> tuple[Array, Stages]:
        """One Heun step of length `dt_s`.

        Parameters
        ----------
        holdup_kmol : array, shape (2, 38)
            Total and methanol holdups [kmol].
        inputs : Inputs
            Held during the step.
        dt_s : float
            Length of the step [s].

        Returns
        -------
        array, shape (2, 38)
            Holdups after the step [kmol].
        Stages
            The algebraic quantities at the predicted end of the step.
        """
        # Enthalpies and densities move little in a second: once per step is enough.
        self._refresh_properties()
        first, _ = self.rates(holdup_kmol, inputs)
        predicted = self._bounded(holdup_kmol + dt_s * first)
        second, stages = self.rates(predicted, inputs)
        return self._bounded(holdup_kmol + (0.5 * dt_s) * (first + second)), stages

    def settle(self, holdup_kmol: Array, inputs: Inputs, rounds: int = 12) -> tuple[Array, Stages]:
        """Repeat the evaluation until the memory agrees with the present state."""
        for _ in range(rounds):
            self._refresh_properties()
            rates, stages = self.rates(holdup_kmol, inputs)
        return rates, stages

    def rates(self, holdup_kmol: Array, inputs: Inputs) -> tuple[Array, Stages]:
        """Time derivatives of the holdups; the memory moves on.

        Parameters
        ----------
        holdup_kmol : array, shape (2, 38)
            Total and methanol holdups [kmol].
        inputs : Inputs
            What acts on the column.

        Returns
        -------
        array, shape (2, 38)
            Rates of change [kmol/s].
        Stages
            The algebraic quantities.
        """
        column = self._data.column
        total = holdup_kmol[0]
        x = holdup_kmol[1] / total
        y_equilibrium = self._bubble_point(x)
        y = self._murphree(y_equilibrium, inputs)

        liquid, clear_m, dry_m, mass_density = self._weirs(total, x, y)
        liquid[0] = inputs.reflux_kmol_s
        liquid[-1] = inputs.bottoms_kmol_s

        h_liquid, h_vapour = self._enthalpies(x, y)
        vapour = self._energy_balance(liquid, h_liquid, h_vapour, inputs)
        drop_pa = mass_density * GRAVITY_M_S2 * (dry_m + clear_m) + GRAVITY_M_S2 * 12.5
        self._vapour_kmol_s = vapour
        self._pressure_pa = self._profile(inputs.drum_pressure_pa, drop_pa)

        # Each stage loses its liquid downwards and its vapour upwards to its neighbours.
        down, up = _with_methanol(liquid, x), _with_methanol(vapour, y)
        rate = -down - up
        rate[:, 1:] += down[:, :-1]
        rate[:, :-1] += up[:, 1:]
        rate[0, column.feed_tray] += inputs.feed_kmol_s
        rate[1, column.feed_tray] += inputs.feed_kmol_s * inputs.feed_x
        rate[0, 0] -= inputs.distillate_kmol_s
        rate[1, 0] -= inputs.distillate_kmol_s * x[0]

        condensate = h_vapour[1] - self._drum_liquid_enthalpy(float(y[1]))
        return rate, Stages(
            x=x,
            y=y,
            temperature_k=self._temperature_k,
            pressure_pa=self._pressure_pa,
            liquid_kmol_s=liquid,
            vapour_kmol_s=vapour,
            condenser_duty_kw=float(vapour[1] * condensate),
        )

    def flooding(self, stages: Stages) -> Array:
        """Approach to flooding of every tray.

        Parameters
        ----------
        stages : Stages
            The algebraic quantities of an evaluation.

        Returns
        -------
        array, shape (36,)
            Net vapour velocity over flooding velocity [-].
        """
        data = self._data
        trays = slice(1, self._count - 1)
        x, y = stages.x[trays], stages.y[trays]
        t, p = stages.temperature_k[trays], stages.pressure_pa[trays]
        methanol, water = data.components
        densities = (methanol.liquid_density, water.liquid_density)
        liquid_density = mixture_liquid_density_mol_m3(densities, t, (x, 1.0 - x)) / 1e3
        vapour_density = ideal_vapour_density_mol_m3(p, t) / 1e3
        mass_x, mass_y = self._molar_mass(x), self._molar_mass(y)
        rho_l, rho_v = liquid_density * mass_x, vapour_density * mass_y
        vapour = np.maximum(stages.vapour_kmol_s[trays], 1e-9)
        liquid = stages.liquid_kmol_s[trays]
        flow_parameter = liquid * mass_x / (vapour * mass_y) * np.sqrt(rho_v / rho_l)
        capacity = 0.0105 + 8.127e-4 * (1e3 * data.trays.tray_spacing_m) ** 0.755 * np.exp(
            -1.463 * flow_parameter**0.842
        )
        tensions = (methanol.surface_tension_n_m, water.surface_tension_n_m)
        sigma = surface_tension_n_m(tensions, (x, 1.0 - x))
        limit = capacity * (sigma / 0.020) ** 0.2 * np.sqrt((rho_l - rho_v) / rho_v)
        velocity = vapour / vapour_density / data.trays.net_area_m2
        return np.asarray(velocity / limit)

    def liquid_density_kmol_m3(self, x: float, temperature_k: float) -> float:
        """Molar density of a liquid [kmol/m3] at mole fraction `x` [-] and temperature [K]."""
        densities = tuple(component.liquid_density for component in self._data.components)
        mixture = mixture_liquid_density_mol_m3(densities, temperature_k, (x, 1.0 - x))
        return float(mixture) / 1e3

    def _bounded(self, holdup_kmol: Array) -> Array:
        # Large upsets may empty a tray or wash out a component within a step.
        bounded = np.empty_like(holdup_kmol)
        total = np.maximum(holdup_kmol[0], MIN_HOLDUP_KMOL)
        bounded[0] = total
        bounded[1] = np.minimum(np.maximum(holdup_kmol[1], 1e-12 * total), (1.0 - 1e-9) * total)
        return bounded

    def _molar_mass(self, x: Array) -> Array:
        methanol, water = self._data.components
        difference = methanol.molar_mass_kg_kmol - water.molar_mass_kg_kmol
        return water.molar_mass_kg_kmol + difference * x

    def _pure_liquid_enthalpies(self, temperature_k: float) -> tuple[float, float]:
        methanol, water = self._data.components
        return (
            float(liquid_enthalpy_j_mol(methanol.liquid_cp, temperature_k)),
            float(liquid_enthalpy_j_mol(water.liquid_cp, temperature_k)),
        )

    def _drum_liquid_enthalpy(self, x: float) -> float:
        methanol, water = self._drum_enthalpy
        return water + x * (methanol - water)

    def _refresh_properties(self) -> None:
        t = self._temperature_k
        methanol, water = self._data.components
        self._liquid_methanol = liquid_enthalpy_j_mol(methanol.liquid_cp, t)
        self._liquid_water = liquid_enthalpy_j_mol(water.liquid_cp, t)
        self._vapour_methanol = self._liquid_methanol + heat_of_vaporisation_j_mol(
            np, methanol.heat_of_vaporisation, t
        )
        self._vapour_water = self._liquid_water + heat_of_vaporisation_j_mol(
            np, water.heat_of_vaporisation, t
        )
        self._volume_methanol = 1e3 / liquid_density_mol_m3(methanol.liquid_density, t)
        self._volume_water = 1e3 / liquid_density_mol_m3(water.liquid_density, t)

    def _bubble_point(self, x: Array) -> Array:
        """One Newton step on the temperatures; equilibrium vapour mole fractions."""
        t = self._temperature_k
        methanol, water = self._data.components
        ln_gamma = nrtl_ln_gamma(np, self._data.nrtl, t, (x, 1.0 - x))
        p_methanol = x * np.exp(ln_gamma[0]) * antoine_pa(np, methanol.antoine, t)
        p_water = (1.0 - x) * np.exp(ln_gamma[1]) * antoine_pa(np, water.antoine, t)
        total = p_methanol + p_water
        y = p_methanol / total
        slope_water = antoine_slope_1_k(water.antoine, t)
        slope = slope_water + y * (antoine_slope_1_k(methanol.antoine, t) - slope_water)
        self._temperature_k = t - np.log(total / self._pressure_pa) / slope
        return np.asarray(y)

    def _murphree(self, y_equilibrium: Array, inputs: Inputs) -> Array:
        # A linear recurrence from the reboiler up: plain floats beat 36 array calls.
        star = y_equilibrium.tolist()
        feed_tray = self._data.column.feed_tray
        below = star[-1]
        efficiency = inputs.efficiency_bottom
        for stage in range(self._count - 2, 0, -1):
            if stage == feed_tray - 1:
                efficiency = inputs.efficiency_top
            below += efficiency * (star[stage] - below)
            star[stage] = below
        return np.array(star)

    def _weirs(self, total: Array, x: Array, y: Array) -> tuple[Array, Array, Array, Array]:
        """Liquid flows, clear and dry heads, liquid mass densities."""
        trays = self._data.trays
        molar_volume = self._volume_water + x * (self._volume_methanol - self._volume_water)
        mass_density = self._molar_mass(x) / molar_volume
        vapour_density = ideal_vapour_density_mol_m3(self._pressure_pa, self._temperature_k) / 1e3
        hole_velocity = self._vapour_kmol_s / (
            vapour_density * (trays.hole_area_m2 * trays.orifice_coefficient)
        )
        vapour_mass_density = vapour_density * self._molar_mass(y)
        dry = 0.051 * hole_velocity * hole_velocity * vapour_mass_density / mass_density
        residual = 12.5 / mass_density
        # n/rho = A_a h_cl + A_dc (h_cl + (h_d + h_cl + h_r) + 0.02), solved for h_cl.
        backed_up = trays.downcomer_area_m2 * (dry + residual + DOWNCOMER_LOSS_M)
        area = trays.active_area_m2 + 2.0 * trays.downcomer_area_m2
        clear = np.maximum((total * molar_volume - backed_up) / area, 0.0)
        crest = np.maximum(clear - trays.aeration * trays.weir_height_m, 0.0)
        volume_flow = (FRANCIS_M05_S * trays.weir_length_m) * crest * np.sqrt(crest)
        return volume_flow / molar_volume, clear, dry, mass_density

    def _enthalpies(self, x: Array, y: Array) -> tuple[Array, Array]:
        h_liquid = self._liquid_water + x * (self._liquid_methanol - self._liquid_water)
        h_liquid[0] = self._drum_liquid_enthalpy(float(x[0]))
        h_vapour = self._vapour_water + y * (self._vapour_methanol - self._vapour_water)
        return h_liquid, h_vapour

    def _energy_balance(
        self,
        liquid: Array,
        h_liquid: Array,
        h_vapour: Array,
        inputs: Inputs,
    ) -> Array:
        """Vapour flows from the stages' quasi-steady energy balances, reboiler first."""
        methanol, water = self._pure_liquid_enthalpies(inputs.feed_temperature_k)
        h_feed = water + inputs.feed_x * (methanol - water)
        feed_tray = self._data.column.feed_tray
        source = np.full(self._count, -self._loss_kw)
        source[1:] += liquid[:-1] * (h_liquid[:-1] - h_liquid[1:])
        source[feed_tray] += inputs.feed_kmol_s * (h_feed - h_liquid[feed_tray])
        source[-1] += inputs.duty_kw
        latent = h_vapour - h_liquid
        carried = np.zeros(self._count)
        carried[:-1] = (h_vapour[1:] - h_liquid[:-1]) / latent[:-1]
        offsets, gains = (source / latent).tolist(), carried.tolist()
        flows = [0.0] * self._count
        below = 0.0
        for stage in range(self._count - 1, 0, -1):
            # More cooling than vapour: the rest condenses and nothing rises.
            below = max(0.0, gains[stage] * below + offsets[stage])
            flows[stage] = below
        return np.array(flows)

    def _profile(self, drum_pressure_pa: float, drop_pa: Array) -> Array:
        profile = np.empty(self._count)
        profile[0] = drum_pressure_pa
        top = drum_pressure_pa + self._data.column.condenser_drop_pa
        profile[1] = top
        profile[2:] = top + np.cumsum(drop_pa[1:-1])
        return profile


def _with_methanol(flow: Array, fraction: Array) -> Array:
    """Total and methanol flows, shape (2, 38): cheaper than stacking."""
    both = np.empty((2, flow.size))
    both[0] = flow
    np.multiply(flow, fraction, out=both[1])
    return both
