"""The numbers of the simulated plant, read from the packaged data file."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

from edgectl.properties.activity import Nrtl
from edgectl.properties.density import LiquidDensity
from edgectl.properties.enthalpy import HeatCapacity, HeatOfVaporisation
from edgectl.properties.vapour_pressure import Antoine

DATA: Final = Path(__file__).parent / "data"
J_PER_CAL: Final = 4.184


@dataclass(frozen=True, slots=True)
class Component:
    """Pure-component properties of one component."""

    molar_mass_kg_kmol: float
    surface_tension_n_m: float
    antoine: Antoine
    heat_of_vaporisation: HeatOfVaporisation
    liquid_density: LiquidDensity
    liquid_cp: HeatCapacity


@dataclass(frozen=True, slots=True)
class ColumnData:
    """Layout of the column and its two ends."""

    trays: int
    feed_tray: int
    efficiency_top: float
    efficiency_bottom: float
    condenser_drop_pa: float
    drum_temperature_k: float
    drum_volume_m3: float
    sump_volume_m3: float
    heat_loss_kw: float


@dataclass(frozen=True, slots=True)
class TrayData:
    """Geometry of one sieve tray; all trays are alike."""

    active_area_m2: float
    downcomer_area_m2: float
    net_area_m2: float
    hole_area_m2: float
    weir_length_m: float
    weir_height_m: float
    tray_spacing_m: float
    orifice_coefficient: float
    aeration: float


@dataclass(frozen=True, slots=True)
class FeedData:
    """Feed at the start."""

    flow_kg_h: float
    methanol_wt: float
    temperature_k: float


@dataclass(frozen=True, slots=True)
class BaseLayerData:
    """Setpoints at the start."""

    reflux_ratio: float
    tray_temperature_degc: float
    drum_pressure_kpa: float
    drum_level_pct: float
    sump_level_pct: float


@dataclass(frozen=True, slots=True)
class SteamData:
    """Steam side of the reboiler."""

    latent_heat_kj_kg: float
    lag_s: float


@dataclass(frozen=True, slots=True)
class InstrumentData:
    """A plain transmitter: range, noise and the bound of its slow drift."""

    tag: str
    description: str
    low: float
    high: float
    unit: str
    noise: float = 0.0
    relative_noise: float = 0.0
    drift: float = 0.0
    relative_drift: float = 0.0


@dataclass(frozen=True, slots=True)
class AnalyserData:
    """A cyclic analyser with a fixed delay, or a laboratory with a varying one."""

    tag: str
    description: str
    low: float
    high: float
    unit: str
    noise: float
    relative_noise: float
    cycle_s: int
    delay_s: int = 0
    first_sample_s: int = 0
    delay_low_s: int = 0
    delay_high_s: int = 0


@dataclass(frozen=True, slots=True)
class PlantData:
    """Everything the simulated plant is made of."""

    name: str
    column: ColumnData
    trays: TrayData
    feed: FeedData
    base_layer: BaseLayerData
    steam: SteamData
    nrtl: Nrtl
    components: tuple[Component, Component]
    """Methanol, water."""
    instruments: tuple[InstrumentData, ...]
    analysers: tuple[AnalyserData, ...]


def load_plant_data() -> PlantData:
    """The packaged methanol/water column."""
    raw = tomllib.loads((DATA / "methanol_water.toml").read_text(encoding="utf-8"))
    return PlantData(
        name=raw["scenario"]["name"],
        column=ColumnData(**raw["column"]),
        trays=TrayData(**raw["trays"]),
        feed=FeedData(**raw["feed"]),
        base_layer=BaseLayerData(**raw["base_layer"]),
        steam=SteamData(**raw["steam"]),
        nrtl=_nrtl(raw["nrtl"]),
        components=(_component(raw["methanol"]), _component(raw["water"])),
        instruments=tuple(InstrumentData(**entry) for entry in raw["instrument"]),
        analysers=tuple(AnalyserData(**entry) for entry in raw["analyser"]),
    )


def _nrtl(raw: dict[str, Any]) -> Nrtl:
    b12 = raw["b12_cal_mol"] * J_PER_CAL
    b21 = raw["b21_cal_mol"] * J_PER_CAL
    alpha = raw["alpha"]
    return Nrtl(energies_j_mol=((0.0, b12), (b21, 0.0)), alphas=((0.0, alpha), (alpha, 0.0)))


def _component(raw: dict[str, Any]) -> Component:
    return Component(
        molar_mass_kg_kmol=raw["molar_mass_kg_kmol"],
        surface_tension_n_m=raw["surface_tension_n_m"],
        antoine=Antoine(**raw["antoine"]),
        heat_of_vaporisation=HeatOfVaporisation(**raw["heat_of_vaporisation"]),
        liquid_density=LiquidDensity(*raw["liquid"]["density_mol_m3"]),
        liquid_cp=HeatCapacity(tuple(raw["liquid"]["cp_j_mol_k"])),
    )
