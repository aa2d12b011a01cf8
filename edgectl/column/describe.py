"""From the site file's `[column]` and `[operating_point]` to the model's values.

References
----------
Unit conversions by definition; the correlations' sources stand in `properties`.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from edgectl.column.equilibrium import Equilibrium, ModifiedRaoult
from edgectl.column.hydraulics import SieveTray
from edgectl.column.layout import Column, Component, Inputs, Overflow, mole_fraction
from edgectl.column.steady import PuritySpecification
from edgectl.properties.activity import Wilson
from edgectl.properties.density import LiquidDensity
from edgectl.properties.enthalpy import HeatCapacity, HeatOfVaporisation
from edgectl.properties.vapour_pressure import Antoine

KELVIN = 273.15

Table = Mapping[str, Any]


def column_from_site(site: Table) -> Column:
    """The column of a validated site file.

    Parameters
    ----------
    site : mapping
        The site file's tables, validated (`settings.load_site(...).as_dict()`).

    Returns
    -------
    Column
        Compositions in mole fractions [-], holdups in kmol.
    """
    table = site["column"]
    light, heavy = (_component(entry) for entry in table["component"])
    drum_k = table["drum_temperature_degc"] + KELVIN
    sump_k = boiling_label_k(table, site["operating_point"])
    return Column(
        stages=table["stages"],
        feed_stage=table["feed_stage"],
        light=light,
        heavy=heavy,
        equilibrium=_equilibrium(table),
        overflow=Overflow(table["overflow"]),
        murphree_efficiency=table["murphree_efficiency"],
        drum_temperature_k=drum_k,
        condenser_drop_kpa=table["condenser_drop_kpa"],
        tray=_tray(table["trays"]),
        drum_holdup_kmol=_vessel_holdup_kmol(table["drum"], light, drum_k),
        drum_capacity_kmol=table["drum"]["volume_m3"] * light.liquid_density_kmol_m3(drum_k),
        sump_holdup_kmol=_vessel_holdup_kmol(table["sump"], heavy, sump_k),
    )


def operating_inputs(site: Table, column: Column) -> Inputs:
    """Inputs of the operating point; reflux and duty are what the two purities make them.

    Parameters
    ----------
    site : mapping
        The site file's tables, validated.
    column : Column
        The column that `column_from_site` made of them.

    Returns
    -------
    Inputs
        Feed [kmol/h], compositions [-], pressures [kPa]; reflux and duty are zero.
    """
    point = site["operating_point"]
    feed_light = mole_fraction(point["feed_wt_fraction_light"], column)
    feed_mass = (
        feed_light * column.light.molar_mass_kg_kmol
        + (1.0 - feed_light) * column.heavy.molar_mass_kg_kmol
    )
    return Inputs(
        reflux_kmol_h=0.0,
        duty_kw=0.0,
        feed_kmol_h=point["feed_kg_h"] / feed_mass,
        feed_light=feed_light,
        feed_temp_k=point["feed_temperature_degc"] + KELVIN,
        drum_pressure_kpa=point["drum_pressure_kpa"],
        column_dp_kpa=point["column_dp_kpa"],
        efficiency=column.murphree_efficiency,
    )


def purity_specification(site: Table, column: Column) -> PuritySpecification:
    """The two product purities that fix the operating point.

    Parameters
    ----------
    site : mapping
        The site file's tables, validated.
    column : Column
        The column that `column_from_site` made of them.

    Returns
    -------
    PuritySpecification
        Light mole fractions [-].
    """
    point = site["operating_point"]
    return PuritySpecification(
        distillate_light=mole_fraction(point["distillate_wt_fraction_light"], column),
        bottoms_light=mole_fraction(point["bottoms_wt_fraction_light"], column),
    )


def boiling_label_k(table: Table, point: Table) -> float:
    """Boiling point of the heavy component at the reboiler's pressure, for its density.

    Parameters
    ----------
    table : mapping
        The site file's `[column]`.
    point : mapping
        Its `[operating_point]`.

    Returns
    -------
    float
        Temperature [K].
    """
    heavy = _antoine(table["component"][1])
    pressure = point["drum_pressure_kpa"] + table["condenser_drop_kpa"] + point["column_dp_kpa"]
    return ModifiedRaoult(heavy, heavy, _wilson(table)).guess_temp_k(0.0, pressure)


def _component(entry: Table) -> Component:
    vaporisation = entry["heat_of_vaporisation"]
    return Component(
        name=entry["name"],
        molar_mass_kg_kmol=entry["molar_mass_kg_kmol"],
        vaporisation=HeatOfVaporisation(
            c1=vaporisation["c1"],
            c2=vaporisation["c2"],
            c3=vaporisation["c3"],
            c4=vaporisation["c4"],
            critical_k=vaporisation["critical_k"],
        ),
        liquid_cp=HeatCapacity(tuple(entry["liquid_cp"])),
        liquid_density=LiquidDensity(*entry["liquid_density"]),
    )


def _antoine(entry: Table) -> Antoine:
    antoine = entry["antoine"]
    return Antoine(antoine["a"], antoine["b"], antoine["c"], antoine["low_k"], antoine["high_k"])


def _wilson(table: Table) -> Wilson:
    wilson = table["wilson"]
    return Wilson(
        volumes_cm3_mol=(wilson["v1_cm3_mol"], wilson["v2_cm3_mol"]),
        energies_j_mol=((0.0, wilson["a12_j_mol"]), (wilson["a21_j_mol"], 0.0)),
    )


def _equilibrium(table: Table) -> Equilibrium:
    light, heavy = (_antoine(entry) for entry in table["component"])
    return ModifiedRaoult(light=light, heavy=heavy, wilson=_wilson(table))


def _tray(table: Table) -> SieveTray:
    return SieveTray(
        active_area_m2=table["active_area_m2"],
        downcomer_area_m2=table["downcomer_area_m2"],
        weir_length_m=table["weir_length_m"],
        weir_height_m=table["weir_height_m"],
        aeration=table["aeration"],
    )


def _vessel_holdup_kmol(table: Table, component: Component, temp_k: float) -> float:
    """Normal liquid in a vessel, taken as the pure component it nearly is [kmol]."""
    return float(
        table["volume_m3"] * table["normal_fraction"] * component.liquid_density_kmol_m3(temp_k)
    )
