"""The equations of one stage: drum, tray, reboiler.

Every function sees the stage, what enters it from its neighbours, and the
shared inputs; nothing else. Rates are per hour. Energy is quasi-steady: the
heat stored on a tray is neglected, so the vapour flow is algebraic.

References
----------
Skogestad, S. (1997), Trans. IChemE 75A, 539-562 (structure of tray models);
Murphree, E. V. (1925), Ind. Eng. Chem. 17, 747-750 (vapour efficiency).
"""

from __future__ import annotations

from typing import Any, NamedTuple

from edgectl.column.layout import Column, Overflow, StageState
from edgectl.properties.mathematics import Mathematics


class Stream(NamedTuple):
    """What flows from one stage to the next."""

    flow: Any
    """[kmol/h]"""
    light: Any
    """Mole fraction [-]."""
    enthalpy: Any
    """[kJ/kmol], above liquid at 298.15 K."""


class StageRates(NamedTuple):
    """Time derivatives and the residuals of the algebraic equations."""

    light_rate: Any
    """d(light)/dt [1/h]."""
    holdup_rate: Any
    """d(holdup)/dt [kmol/h]."""
    bubble: Any
    """Bubble-point residual [-]."""
    vapour_light: Any
    """Murphree residual [-]."""
    energy: Any
    """Energy residual, in units of a kmol/h of boil-up [kmol/h]."""


LATENT_SCALE_KJ_KMOL = 38000.0
"""Scales energy residuals to flows; any value of the right size serves."""


def liquid_enthalpy(light: Any, temp_k: Any, column: Column) -> Any:
    """Enthalpy of a liquid mixture, no heat of mixing.

    Parameters
    ----------
    light : float or symbol
        Light mole fraction [-].
    temp_k : float or symbol
        Temperature [K].
    column : Column
        For the components' data.

    Returns
    -------
    float or symbol
        Above liquid at 298.15 K [kJ/kmol].
    """
    return light * column.light.liquid_enthalpy_kj_kmol(temp_k) + (
        1.0 - light
    ) * column.heavy.liquid_enthalpy_kj_kmol(temp_k)


def vapour_enthalpy(xp: Mathematics, light: Any, temp_k: Any, column: Column) -> Any:
    """Enthalpy of an ideal vapour: the liquid's plus the heats of vaporisation.

    Parameters
    ----------
    xp : Mathematics
        `math`, `cmath`, `numpy` or `casadi`.
    light : float or symbol
        Light mole fraction of the vapour [-].
    temp_k : float or symbol
        Temperature [K].
    column : Column
        For the components' data.

    Returns
    -------
    float or symbol
        Above liquid at 298.15 K [kJ/kmol].
    """
    latent = light * column.light.latent_heat_kj_kmol(xp, temp_k) + (
        1.0 - light
    ) * column.heavy.latent_heat_kj_kmol(xp, temp_k)
    return liquid_enthalpy(light, temp_k, column) + latent


def liquid_leaving(here: StageState, flow: Any, column: Column) -> Stream:
    """The liquid stream out of a stage at its own composition and temperature.

    Parameters
    ----------
    here : StageState
        The stage.
    flow : float or symbol
        Liquid that leaves [kmol/h].
    column : Column
        For the components' data.

    Returns
    -------
    Stream
        Flow [kmol/h], composition [-], enthalpy [kJ/kmol].
    """
    if column.overflow is Overflow.CONSTANT_MOLAR:
        return Stream(flow, here.light, 0.0)
    return Stream(flow, here.light, liquid_enthalpy(here.light, here.temp_k, column))


def vapour_leaving(xp: Mathematics, here: StageState, column: Column) -> Stream:
    """The vapour stream out of a stage.

    Parameters
    ----------
    xp : Mathematics
        `math`, `cmath`, `numpy` or `casadi`.
    here : StageState
        The stage.
    column : Column
        For the components' data.

    Returns
    -------
    Stream
        Flow [kmol/h], composition [-], enthalpy [kJ/kmol].
    """
    if column.overflow is Overflow.CONSTANT_MOLAR:
        return Stream(here.vapour, here.vapour_light, LATENT_SCALE_KJ_KMOL)
    return Stream(
        here.vapour,
        here.vapour_light,
        vapour_enthalpy(xp, here.vapour_light, here.temp_k, column),
    )


def drum(here: StageState, vapour_in: Stream, column: Column) -> StageRates:
    """Total condenser and reflux drum: perfect level control, given temperature.

    Parameters
    ----------
    here : StageState
        The drum.
    vapour_in : Stream
        From the top tray [kmol/h].
    column : Column
        For the drum's temperature [K].

    Returns
    -------
    StageRates
        Rates per hour [1/h], residuals zero at a solution [-].
    """
    return StageRates(
        light_rate=vapour_in.flow * (vapour_in.light - here.light) / here.holdup,
        holdup_rate=0.0 * here.holdup,
        bubble=here.temp_k / column.drum_temperature_k - 1.0,
        vapour_light=here.vapour_light - here.light,
        energy=here.vapour,
    )


def tray(
    xp: Mathematics,
    here: StageState,
    liquid_in: Stream,
    vapour_in: Stream,
    feed: Stream,
    liquid_out: Stream,
    pressure_kpa: Any,
    efficiency: Any,
    column: Column,
) -> StageRates:
    """One tray with Murphree efficiency and a quasi-steady energy balance.

    Parameters
    ----------
    xp : Mathematics
        `math`, `cmath`, `numpy` or `casadi`.
    here : StageState
        The tray.
    liquid_in, vapour_in, feed, liquid_out : Stream
        From above, from below, from outside, and to below [kmol/h].
    pressure_kpa : float or symbol
        Pressure [kPa].
    efficiency : float or symbol
        Murphree vapour efficiency [-].
    column : Column
        Options and components.

    Returns
    -------
    StageRates
        Rates per hour [1/h], residuals zero at a solution [-].
    """
    vapour_out = vapour_leaving(xp, here, column)
    equilibrium = column.equilibrium
    star = equilibrium.vapour_light(xp, here.light, here.temp_k, pressure_kpa)
    gained = (
        liquid_in.flow * (liquid_in.light - here.light)
        + vapour_in.flow * (vapour_in.light - here.light)
        + feed.flow * (feed.light - here.light)
        - vapour_out.flow * (vapour_out.light - here.light)
    )
    heat = (
        liquid_in.flow * (liquid_in.enthalpy - liquid_out.enthalpy)
        + vapour_in.flow * (vapour_in.enthalpy - liquid_out.enthalpy)
        + feed.flow * (feed.enthalpy - liquid_out.enthalpy)
        - vapour_out.flow * (vapour_out.enthalpy - liquid_out.enthalpy)
    )
    return StageRates(
        light_rate=gained / here.holdup,
        holdup_rate=liquid_in.flow + vapour_in.flow + feed.flow - liquid_out.flow - here.vapour,
        bubble=equilibrium.bubble_residual(xp, here.light, here.temp_k, pressure_kpa),
        vapour_light=here.vapour_light - vapour_in.light - efficiency * (star - vapour_in.light),
        energy=heat / LATENT_SCALE_KJ_KMOL,
    )


def reboiler(
    xp: Mathematics,
    here: StageState,
    liquid_in: Stream,
    duty_kw: Any,
    pressure_kpa: Any,
    column: Column,
) -> StageRates:
    """Equilibrium reboiler with the sump's holdup under perfect level control.

    Parameters
    ----------
    xp : Mathematics
        `math`, `cmath`, `numpy` or `casadi`.
    here : StageState
        The reboiler.
    liquid_in : Stream
        From the bottom tray [kmol/h].
    duty_kw : float or symbol
        Heat put in [kW].
    pressure_kpa : float or symbol
        Pressure [kPa].
    column : Column
        Options and components.

    Returns
    -------
    StageRates
        Rates per hour [1/h], residuals zero at a solution [-].
    """
    vapour_out = vapour_leaving(xp, here, column)
    enthalpy = liquid_leaving(here, 0.0, column).enthalpy
    equilibrium = column.equilibrium
    gained = liquid_in.flow * (liquid_in.light - here.light) - here.vapour * (
        here.vapour_light - here.light
    )
    heat = (
        liquid_in.flow * (liquid_in.enthalpy - enthalpy)
        + duty_kw * 3600.0
        - here.vapour * (vapour_out.enthalpy - enthalpy)
    )
    return StageRates(
        light_rate=gained / here.holdup,
        holdup_rate=0.0 * here.holdup,
        bubble=equilibrium.bubble_residual(xp, here.light, here.temp_k, pressure_kpa),
        vapour_light=here.vapour_light
        - equilibrium.vapour_light(xp, here.light, here.temp_k, pressure_kpa),
        energy=heat / LATENT_SCALE_KJ_KMOL,
    )
