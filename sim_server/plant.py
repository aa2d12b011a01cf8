"""The simulated plant: one plant second after another.

Order within a second: outside conditions, base layer on the latest readings,
column, instruments. Nothing here knows OPC UA or the wall clock.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from functools import cache
from types import MappingProxyType
from typing import Final

from sim_server.base_layer import READ_ONLY, BaseLayer, Flows
from sim_server.column import Inputs
from sim_server.disturbances import Disturbances, Story
from sim_server.instruments import Analyser, Transmitter
from sim_server.plant_data import AnalyserData, InstrumentData, PlantData, load_plant_data
from sim_server.signals import GOOD, Mode, Signal, SignalSpec
from sim_server.steady import (
    SteadyState,
    level_pct,
    mass_to_mole,
    molar_mass_kg_kmol,
    mole_to_mass,
    operating_point,
)

TRAY_OF: Final[Mapping[str, int]] = {"TI-2107": 30, "TI-2108": 8, "TI-2109": 18, "TI-2110": 37}
LOOP_UNITS: Final[Mapping[str, str]] = {"TIC-2107": "degC", "FFIC-2103": "-"}
LOOP_DESCRIPTIONS: Final[Mapping[str, str]] = {
    "TIC-2107": "tray 30 temperature control, acts on FIC-2104",
    "FFIC-2103": "reflux to feed ratio, kg/kg",
}
KELVIN: Final = 273.15
DRY_END_KMOL: Final = 1.0
"""Holdup below which the outflow of drum and sump fades out."""


@cache
def _start() -> tuple[PlantData, SteadyState]:
    """Data and first state, the same for every seed; never changed in place."""
    data = load_plant_data()
    return data, operating_point(data)


class SimulatedPlant:
    """Column C-2101 with base layer, instruments and disturbances (all invented).

    Parameters
    ----------
    seed : int
        Fixes noise, drift and disturbances, whatever the board does [-].
    story : str
        `default` or `calm`.
    """

    def __init__(self, seed: int, story: str = "default") -> None:
        self._data, state = _start()
        self._column, self._holdup, self._inputs = (
            state.column.copy(),
            state.holdup_kmol,
            state.inputs,
        )
        self._stages = state.stages
        self._time_s = 0
        self._disturbances = Disturbances(seed, Story(story))
        self._feed_methanol_wt = self._data.feed.methanol_wt
        self._duty_kw = state.inputs.duty_kw
        self._duty_keep = math.exp(-1.0 / self._data.steam.lag_s)
        instruments = self._data.instruments
        ranges = {entry.tag: (entry.low, entry.high) for entry in instruments}
        self._flows = self._start_flows(state)
        self._base = BaseLayer(self._data, ranges, self._flows)
        self._transmitters = {entry.tag: Transmitter(seed, entry) for entry in instruments}
        self._readings: dict[str, float] = {}
        self._read_instruments()
        self._analysers = {
            entry.tag: Analyser(seed, entry, self._analysed(entry.tag))
            for entry in self._data.analysers
        }
        self._specs = self._build_specs()
        self._writable = {spec.name for spec in self._specs if spec.board_writable}
        self._signals: Mapping[str, Signal] | None = None

    @property
    def specs(self) -> tuple[SignalSpec, ...]:
        """Every published signal with unit and range."""
        return self._specs

    @property
    def time_s(self) -> float:
        """Plant seconds since the plant's start."""
        return float(self._time_s)

    @property
    def signals(self) -> Mapping[str, Signal]:
        """Current values by name; a new mapping after every second and every write."""
        if self._signals is None:
            self._signals = MappingProxyType(self._collect_signals())
        return self._signals

    def advance(self, until_s: float) -> None:
        """Integrate in steps of one plant second, as far as `until_s` allows."""
        while self._time_s + 1 <= until_s:
            self._second()

    def write(self, name: str, value: float) -> None:
        """A board action on a writable signal.

        Raises
        ------
        ValueError
            Unknown or not writable, out of range, not finite, or refused by the loop.
        """
        if name not in self._writable:
            raise ValueError(f"{name} is not a signal that the board may write")
        if not math.isfinite(value):
            raise ValueError(f"{name}: {value} is not a finite number")
        tag, _, item = name.partition(".")
        self._base.board_writes(tag, item, value)
        self._signals = None

    def limit_valve(self, loop: str, high: float | None) -> None:
        """A drill: the valve of a flow loop opens no further than `high` [%]; None frees it."""
        self._base.limit_valve(loop, high)

    def _second(self) -> None:
        data, base = self._data, self._base
        conditions = self._disturbances.next(float(self._time_s))
        base.scan(self._readings, conditions.feed_setpoint_factor, self._stages.condenser_duty_kw)
        # A pump loses suction as its vessel runs dry, and a dry reboiler takes up no heat.
        drum_share = min(1.0, float(self._holdup[0, 0]) / DRY_END_KMOL)
        sump_share = min(1.0, float(self._holdup[0, -1]) / DRY_END_KMOL)
        flows = Flows(
            feed=base.feed_kg_h * conditions.feed_wander_factor,
            reflux=base.valves["FIC-2103"].flow * drum_share,
            steam=base.valves["FIC-2104"].flow,
            distillate=base.valves["FIC-2105"].flow * drum_share,
            bottoms=base.valves["FIC-2106"].flow * sump_share,
        )
        steam_kw = flows.steam * data.steam.latent_heat_kj_kg / 3600.0 * sump_share
        self._duty_kw = self._duty_keep * self._duty_kw + (1.0 - self._duty_keep) * steam_kw
        self._feed_methanol_wt = data.feed.methanol_wt + conditions.feed_methanol_shift_wt
        feed_x = mass_to_mole(self._feed_methanol_wt, data)
        drum_mass = 3600.0 * molar_mass_kg_kmol(float(self._stages.x[0]), data)
        sump_mass = 3600.0 * molar_mass_kg_kmol(float(self._stages.x[-1]), data)
        self._inputs = Inputs(
            feed_kmol_s=flows.feed / 3600.0 / molar_mass_kg_kmol(feed_x, data),
            feed_x=feed_x,
            feed_temperature_k=data.feed.temperature_k + conditions.feed_temperature_shift_k,
            reflux_kmol_s=flows.reflux / drum_mass,
            distillate_kmol_s=flows.distillate / drum_mass,
            bottoms_kmol_s=flows.bottoms / sump_mass,
            duty_kw=self._duty_kw,
            drum_pressure_pa=1e3 * (base.drum_pressure_kpa + conditions.drum_pressure_shift_kpa),
            efficiency_top=data.column.efficiency_top + conditions.efficiency_shift,
            efficiency_bottom=data.column.efficiency_bottom + conditions.efficiency_shift,
        )
        self._flows = flows
        self._holdup, self._stages = self._column.step(self._holdup, self._inputs)
        self._time_s += 1
        self._signals = None
        self._read_instruments()
        for tag, analyser in self._analysers.items():
            analyser.advance(self._analysed(tag), self._time_s)

    def _start_flows(self, state: SteadyState) -> Flows:
        data, inputs = self._data, state.inputs
        drum_mass = 3600.0 * molar_mass_kg_kmol(float(state.stages.x[0]), data)
        sump_mass = 3600.0 * molar_mass_kg_kmol(float(state.stages.x[-1]), data)
        return Flows(
            feed=data.feed.flow_kg_h,
            reflux=inputs.reflux_kmol_s * drum_mass,
            steam=inputs.duty_kw * 3600.0 / data.steam.latent_heat_kj_kg,
            distillate=inputs.distillate_kmol_s * drum_mass,
            bottoms=inputs.bottoms_kmol_s * sump_mass,
        )

    def _true_readings(self) -> dict[str, float]:
        """What each transmitter would show without noise and drift."""
        stages, flows = self._stages, self._flows
        readings = {
            "FIC-2101": flows.feed,
            "TI-2102": self._inputs.feed_temperature_k - KELVIN,
            "FIC-2103": flows.reflux,
            "FIC-2104": flows.steam,
            "FIC-2105": flows.distillate,
            "FIC-2106": flows.bottoms,
            "PIC-2111": self._inputs.drum_pressure_pa / 1e3,
            "PDI-2112": float(stages.pressure_pa[-1] - stages.pressure_pa[1]) / 1e3,
            "LIC-2113": level_pct(self._column, self._holdup, 0, self._data),
            "LIC-2114": level_pct(self._column, self._holdup, -1, self._data),
        }
        for tag, stage in TRAY_OF.items():
            readings[tag] = float(stages.temperature_k[stage]) - KELVIN
        return readings

    def _read_instruments(self) -> None:
        true = self._true_readings()
        self._readings = {
            tag: transmitter.read(true[tag], float(self._time_s))
            for tag, transmitter in self._transmitters.items()
        }

    def _analysed(self, tag: str) -> float:
        """True value of what an analyser looks at, in the analyser's unit."""
        end, factor = (0, 100.0) if tag == "AI-2115" else (-1, 1e6)
        wt = mole_to_mass(float(self._holdup[1, end] / self._holdup[0, end]), self._data)
        return factor * (1.0 - wt if end == 0 else wt)

    def _collect_signals(self) -> dict[str, Signal]:
        now_s = float(self._time_s)
        values = {f"{tag}.PV": value for tag, value in self._readings.items()}
        values["TIC-2107.PV"] = self._readings["TI-2107"]
        values["FFIC-2103.PV"] = self._base.measured_ratio
        for tag, loop in self._base.loops.items():
            values[f"{tag}.SP"] = loop.setpoint
            values[f"{tag}.OP"] = loop.output
            values[f"{tag}.MODE"] = float(loop.mode)
        signals = {name: Signal(value, GOOD, now_s) for name, value in values.items()}
        signals.update((f"{tag}.PV", analyser.result) for tag, analyser in self._analysers.items())
        return signals

    def _build_specs(self) -> tuple[SignalSpec, ...]:
        units = {entry.tag: entry.unit for entry in self._data.instruments}
        described = {entry.tag: entry.description for entry in self._data.instruments}
        units.update(LOOP_UNITS)
        described.update(LOOP_DESCRIPTIONS)
        plain: list[InstrumentData | AnalyserData] = [
            *self._data.instruments,
            *self._data.analysers,
        ]
        specs = [
            SignalSpec(f"{entry.tag}.PV", entry.description, entry.unit, entry.low, entry.high)
            for entry in plain
            if entry.tag not in self._base.ranges
        ]
        for tag, (low, high) in self._base.ranges.items():
            text, unit, writable = described[tag], units[tag], tag not in READ_ONLY
            two_modes = len(self._base.loops[tag].modes) > 1
            controls = writable and (two_modes or tag in ("FFIC-2103", "PIC-2111"))
            specs += (
                SignalSpec(f"{tag}.PV", text, unit, low, high),
                SignalSpec(
                    f"{tag}.SP", f"{text}, setpoint", unit, low, high, board_writable=controls
                ),
                SignalSpec(
                    f"{tag}.OP",
                    f"{text}, output",
                    "%",
                    0.0,
                    100.0,
                    board_writable=writable and two_modes,
                ),
                SignalSpec(
                    f"{tag}.MODE",
                    f"{text}, mode: 0 manual, 1 automatic, 2 cascade",
                    "-",
                    float(Mode.MANUAL),
                    float(Mode.CASCADE),
                    integer=True,
                    board_writable=writable and two_modes,
                ),
            )
        return tuple(specs)

    def true_values(self) -> Mapping[str, float]:
        """What no instrument shows; for scoring only, never published."""
        stages, flows, inputs = self._stages, self._flows, self._inputs
        true = self._true_readings()
        return {
            "time_s": float(self._time_s),
            "bottoms_methanol_wt_ppm": self._analysed("AI-2116"),
            "distillate_water_wt_pct": self._analysed("AI-2115"),
            "reflux_kg_h": flows.reflux,
            "feed_kg_h": flows.feed,
            "distillate_kg_h": flows.distillate,
            "bottoms_kg_h": flows.bottoms,
            "steam_kg_h": flows.steam,
            "reboiler_duty_kw": self._duty_kw,
            "condenser_duty_kw": stages.condenser_duty_kw,
            "tray30_temp_degc": true["TI-2107"],
            "flooding_max": float(self._column.flooding(stages).max()),
            "feed_methanol_wt_pct": 100.0 * self._feed_methanol_wt,
            "feed_temp_degc": true["TI-2102"],
            "efficiency_top": inputs.efficiency_top,
            "efficiency_bottom": inputs.efficiency_bottom,
            "drum_level_pct": true["LIC-2113"],
            "sump_level_pct": true["LIC-2114"],
            "column_dp_kpa": true["PDI-2112"],
            "drum_pressure_kpa": true["PIC-2111"],
        }
