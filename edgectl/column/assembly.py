"""The stages in a row: rates and residuals of the whole column.

References
----------
Skogestad, S. (1997), Trans. IChemE 75A, 539-562 (structure of tray models, linear
tray hydraulics); a straight pressure profile between the measured ends: own choice.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from edgectl.column.layout import Column, ColumnModel, Inputs, Overflow, StageState
from edgectl.column.stages import (
    StageRates,
    Stream,
    drum,
    liquid_enthalpy,
    liquid_leaving,
    reboiler,
    tray,
    vapour_leaving,
)
from edgectl.properties.mathematics import Mathematics


def stage_pressures_kpa(column: Column, inputs: Inputs) -> list[Any]:
    """Drum pressure, then a straight line from the top tray to the reboiler.

    Returns
    -------
    list
        One pressure per stage [kPa]: the drum's, then top tray to reboiler.
    """
    top = inputs.drum_pressure_kpa + column.condenser_drop_kpa
    steps = column.stages - 2
    return [inputs.drum_pressure_kpa] + [
        top + inputs.column_dp_kpa * (i / steps) for i in range(steps + 1)
    ]


def liquid_flows(model: ColumnModel, states: Sequence[StageState], inputs: Inputs) -> list[Any]:
    """Liquid leaving each stage [kmol/h]; the drum's is the reflux, the reboiler's the bottoms."""
    weirs = model.weirs
    flows: list[Any] = [inputs.reflux_kmol_h]
    for i in model.column.trays:
        excess = states[i].holdup - weirs.holdup_kmol[i - 1]
        flows.append(weirs.flow_kmol_h[i - 1] + excess / weirs.lag_h[i - 1])
    flows.append(flows[-1] - states[-1].vapour)
    return flows


def column_rates(
    xp: Mathematics, model: ColumnModel, states: Sequence[StageState], inputs: Inputs
) -> list[StageRates]:
    """Rates and residuals of every stage, drum to reboiler.

    Parameters
    ----------
    xp : Mathematics
        `numpy` or `casadi`.
    model : ColumnModel
        Column and weirs.
    states : sequence of StageState
        One per stage, numbers or symbols.
    inputs : Inputs
        Shared inputs.

    Returns
    -------
    list of StageRates
        One per stage; rates per hour [1/h, kmol/h], residuals zero at a solution [-].
    """
    column = model.column
    pressures = stage_pressures_kpa(column, inputs)
    flows = liquid_flows(model, states, inputs)
    liquids = [
        liquid_leaving(state, flow, column) for state, flow in zip(states, flows, strict=True)
    ]
    vapours = [vapour_leaving(xp, state, column) for state in states]
    feed = Stream(inputs.feed_kmol_h, inputs.feed_light, _feed_enthalpy(column, inputs))
    no_feed = Stream(0.0, 0.0, 0.0)
    rates = [drum(states[0], vapours[1], column)]
    rates += [
        tray(
            xp,
            states[i],
            liquids[i - 1],
            vapours[i + 1],
            feed if i == column.feed_stage else no_feed,
            liquids[i],
            pressures[i],
            inputs.efficiency,
            column,
        )
        for i in column.trays
    ]
    rates.append(reboiler(xp, states[-1], liquids[-2], inputs.duty_kw, pressures[-1], column))
    return rates


def _feed_enthalpy(column: Column, inputs: Inputs) -> Any:
    """A liquid feed at its own temperature; saturated under constant molar overflow [kJ/kmol]."""
    if column.overflow is Overflow.CONSTANT_MOLAR:
        return 0.0
    return liquid_enthalpy(inputs.feed_light, inputs.feed_temp_k, column)
