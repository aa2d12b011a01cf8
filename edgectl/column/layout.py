"""What a column is: its options, its stages, its units.

Stage 0 is the reflux drum, stage `stages - 1` the reboiler; trays are numbered
from the top between them.

References
----------
Mole and mass fractions by definition; the model's structure: Skogestad, S.
(1997), Trans. IChemE 75A, 539-562.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Any, NamedTuple

from edgectl.column.equilibrium import Equilibrium
from edgectl.column.hydraulics import SieveTray
from edgectl.properties.density import LiquidDensity, liquid_density_mol_m3
from edgectl.properties.enthalpy import (
    HeatCapacity,
    HeatOfVaporisation,
    heat_of_vaporisation_j_mol,
    liquid_enthalpy_j_mol,
)
from edgectl.properties.mathematics import Mathematics


class Overflow(StrEnum):
    """How vapour flows follow from one another."""

    ENERGY_BALANCE = "energy_balance"
    CONSTANT_MOLAR = "constant_molar"


@dataclass(frozen=True, slots=True)
class Component:
    """Pure-component data of the column model."""

    name: str
    molar_mass_kg_kmol: float
    vaporisation: HeatOfVaporisation | None = None
    liquid_cp: HeatCapacity | None = None
    liquid_density: LiquidDensity | None = None

    def liquid_enthalpy_kj_kmol(self, temp_k: Any) -> Any:
        """Above liquid at 298.15 K [kJ/kmol]; the same number as J/mol."""
        if self.liquid_cp is None:
            return 0.0
        return liquid_enthalpy_j_mol(self.liquid_cp, temp_k)

    def latent_heat_kj_kmol(self, xp: Mathematics, temp_k: Any) -> Any:
        """Heat of vaporisation [kJ/kmol]."""
        if self.vaporisation is None:
            raise ValueError(f"component {self.name} has no heat of vaporisation")
        return heat_of_vaporisation_j_mol(xp, self.vaporisation, temp_k)

    def liquid_density_kmol_m3(self, temp_k: Any) -> Any:
        """Saturated liquid molar density [kmol/m3]."""
        if self.liquid_density is None:
            raise ValueError(f"component {self.name} has no liquid density")
        return liquid_density_mol_m3(self.liquid_density, temp_k) / 1000.0


@dataclass(frozen=True, slots=True)
class Column:
    """A binary column with a total condenser.

    Later options (more components, partial condensers, several feeds) extend
    this class; nothing else knows what a column consists of.
    """

    stages: int
    feed_stage: int
    light: Component
    heavy: Component
    equilibrium: Equilibrium
    overflow: Overflow
    murphree_efficiency: float
    """Vapour efficiency of every tray [-]; the reboiler is an equilibrium stage."""
    drum_temperature_k: float
    condenser_drop_kpa: float
    tray: SieveTray | None
    drum_holdup_kmol: float
    sump_holdup_kmol: float
    drum_capacity_kmol: float = 0.0
    """Liquid in a full drum; turns a rising level into a flow. 0: not known."""

    @property
    def reboiler(self) -> int:
        """Index of the last stage [-]."""
        return self.stages - 1

    @property
    def trays(self) -> range:
        """Indices of the stages between drum and reboiler [-]."""
        return range(1, self.stages - 1)


class StageState(NamedTuple):
    """The unknowns of one stage, in the order every vector keeps them."""

    light: Any
    """Mole fraction of the light component in the liquid [-]."""
    holdup: Any
    """Liquid on the stage [kmol]; constant in drum and reboiler."""
    temp_k: Any
    """Temperature [K]; the drum's is given."""
    vapour_light: Any
    """Mole fraction of the light component in the vapour that leaves [-]."""
    vapour: Any
    """Vapour that leaves [kmol/h]; none leaves the drum."""


VARIABLES_PER_STAGE = len(StageState._fields)


@dataclass(frozen=True, slots=True)
class Inputs:
    """What acts on the column from outside, shared by all stages."""

    reflux_kmol_h: Any
    duty_kw: Any
    feed_kmol_h: Any
    feed_light: Any
    """Mole fraction [-]."""
    feed_temp_k: Any
    drum_pressure_kpa: Any
    column_dp_kpa: Any
    """Top tray to reboiler [kPa]."""
    efficiency: Any
    """Murphree vapour efficiency of the trays [-]."""


@dataclass(frozen=True, slots=True)
class Weirs:
    """Linearised Francis weirs: liquid flow against tray holdup, tray by tray.

    Index 0 belongs to tray 1.
    """

    flow_kmol_h: tuple[float, ...]
    holdup_kmol: tuple[float, ...]
    lag_h: tuple[float, ...]
    """dn/dL at the operating point [h]."""


@dataclass(frozen=True, slots=True)
class ColumnModel:
    """A column with its weirs linearised at the operating point."""

    column: Column
    weirs: Weirs


def mole_fraction(mass_fraction: Any, column: Column) -> Any:
    """Light mole fraction for a light mass fraction.

    Parameters
    ----------
    mass_fraction : float, array or symbol
        Light mass fraction [-].
    column : Column
        For the molar masses [kg/kmol].

    Returns
    -------
    float, array or symbol
        Light mole fraction [-].
    """
    light = mass_fraction / column.light.molar_mass_kg_kmol
    heavy = (1.0 - mass_fraction) / column.heavy.molar_mass_kg_kmol
    return light / (light + heavy)


def mass_fraction(light: Any, column: Column) -> Any:
    """Light mass fraction for a light mole fraction.

    Parameters
    ----------
    light : float, array or symbol
        Light mole fraction [-].
    column : Column
        For the molar masses [kg/kmol].

    Returns
    -------
    float, array or symbol
        Light mass fraction [-].
    """
    return light * column.light.molar_mass_kg_kmol / molar_mass(light, column)


def molar_mass(light: Any, column: Column) -> Any:
    """Molar mass of the mixture.

    Parameters
    ----------
    light : float, array or symbol
        Light mole fraction [-].
    column : Column
        For the molar masses [kg/kmol].

    Returns
    -------
    float, array or symbol
        Molar mass [kg/kmol].
    """
    return light * column.light.molar_mass_kg_kmol + (1.0 - light) * column.heavy.molar_mass_kg_kmol
