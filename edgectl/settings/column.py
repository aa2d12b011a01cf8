"""`[column]` and `[operating_point]`: what the column model is built from.

Other equilibria, more components and other condensers will be further words of
the literals below, each with its own section beside `wilson`.
"""

from __future__ import annotations

from typing import Annotated, Literal, TypeAlias

from pydantic import Field

from edgectl.settings.fields import Fraction, NotNegative, Number, Positive, Section, Text

Coefficients: TypeAlias = Annotated[tuple[Number, Number, Number], Field(strict=False)]
Temperature: TypeAlias = Annotated[Number, Field(gt=-100, lt=500)]


class Antoine(Section):
    """Vapour pressure: log10(P [Pa]) = a - b/(T [K] + c)."""

    a: Number
    """Dimensionless."""
    b: Positive
    """In K."""
    c: Number
    """In K."""
    low_k: Positive
    """Lowest temperature of the fit."""
    high_k: Positive
    """Highest temperature of the fit."""


class HeatOfVaporisation(Section):
    """DIPPR 106: c1 (1 - Tr)^(c2 + c3 Tr + c4 Tr^2) in J/mol, Tr = T/critical_k."""

    c1: Positive
    """In J/mol."""
    c2: Number
    """Dimensionless."""
    c3: Number
    """Dimensionless."""
    c4: Number
    """Dimensionless."""
    critical_k: Positive
    """Critical temperature."""


class Component(Section):
    """One component, the most volatile first."""

    name: Text
    """Name, as people call it."""
    molar_mass_kg_kmol: Positive
    """Molar mass."""
    antoine: Antoine
    """Vapour pressure coefficients."""
    heat_of_vaporisation: HeatOfVaporisation
    """Heat of vaporisation coefficients."""
    liquid_cp: Coefficients
    """Liquid heat capacity in J/(mol K): k0 + k1 T + k2 T^2, T in K."""
    liquid_density: Coefficients
    """Liquid molar density in mol/m3: k0 + k1 T + k2 T^2, T in K."""


class Wilson(Section):
    """Wilson activity coefficients: Lambda_ij = V_j/V_i exp(-a_ij/(R T))."""

    a12_j_mol: Number
    """Interaction of the first component with the second."""
    a21_j_mol: Number
    """Interaction of the second component with the first."""
    v1_cm3_mol: Positive
    """Liquid molar volume of the first component."""
    v2_cm3_mol: Positive
    """Liquid molar volume of the second component."""
    source: Text
    """Where the numbers come from."""


class Trays(Section):
    """Tray geometry and holdup."""

    holdup: Literal["linear_weir"]
    """How liquid is held: a Francis weir, linearised at the operating point."""
    diameter_m: Positive
    """Inner diameter of the column; only bounds areas and weir."""
    active_area_m2: Positive
    """Bubbling area of one tray."""
    downcomer_area_m2: Positive
    """Area of one downcomer."""
    net_area_m2: Positive
    """Area open to vapour above a tray; only bounds the other two."""
    weir_length_m: Positive
    """Length of the outlet weir, over all passes."""
    weir_height_m: Positive
    """Height of the outlet weir."""
    tray_spacing_m: Positive
    """Distance between trays; only bounds the weir's height."""
    aeration: Annotated[Number, Field(gt=0, le=1)]
    """Clear liquid over the weir height."""


class Vessel(Section):
    """The reflux drum or the sump."""

    volume_m3: Positive
    """Full volume."""
    normal_fraction: Fraction
    """How full it usually is."""


class Column(Section):
    """The column. Stage 0 is the reflux drum, the last stage the reboiler."""

    stages: Annotated[int, Field(ge=4, le=200)]
    """Stages, drum and reboiler counted."""
    feed_stage: Annotated[int, Field(ge=1, le=198)]
    """Stage that the feed enters."""
    equilibrium: Literal["wilson"]
    """Vapour-liquid equilibrium: Wilson liquid, ideal vapour."""
    overflow: Literal["energy_balance", "constant_molar"]
    """How the internal flows are found."""
    condenser: Literal["total"]
    """Kind of condenser."""
    drum_temperature_degc: Temperature
    """Temperature of the liquid in the drum."""
    condenser_drop_kpa: NotNegative
    """Pressure drop from the top tray to the drum."""
    murphree_efficiency: Annotated[Number, Field(gt=0, le=1)]
    """Murphree vapour efficiency of the trays."""
    trays: Trays
    """Tray geometry."""
    drum: Vessel
    """Reflux drum."""
    sump: Vessel
    """Sump."""
    # Wilson needs exactly two; a model for more will lift this.
    component: Annotated[tuple[Component, ...], Field(strict=False, min_length=2, max_length=2)]
    """The components, written as [[column.component]]."""
    wilson: Wilson
    """Wilson parameters."""


class OperatingPoint(Section):
    """Two specifications that fix the column's steady state, and its feed."""

    feed_kg_h: Positive
    """Feed flow."""
    feed_wt_fraction_light: Fraction
    """Mass fraction of the first component in the feed."""
    feed_temperature_degc: Temperature
    """Feed temperature."""
    drum_pressure_kpa: Positive
    """Absolute pressure in the drum."""
    column_dp_kpa: NotNegative
    """Pressure drop from the reboiler to the top tray."""
    distillate_wt_fraction_light: Fraction
    """Mass fraction of the first component in the distillate."""
    bottoms_wt_fraction_light: Fraction
    """Mass fraction of the first component in the bottoms."""
