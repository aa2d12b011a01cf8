"""The plant's own control: flow, level, pressure and temperature loops.

The board works on these; the runtime only advises. All tunings are invented.
Scanned once per plant second, before the column moves.

    FFIC-2103 ratio -> FIC-2103 reflux
    TIC-2107 tray 30 -> FIC-2104 steam
    LIC-2113 drum    -> FIC-2105 distillate
    LIC-2114 sump    -> FIC-2106 bottoms
    FIC-2101 feed: its setpoint comes from upstream; PIC-2111: drum pressure
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Final

from sim_server.loops import Loop, Valve
from sim_server.plant_data import PlantData
from sim_server.signals import Mode

TRAY_GAIN_KW_K: Final = 100.0
TRAY_RESET_S: Final = 600.0
RATIO_FILTER_S: Final = 300.0
PRESSURE_LAG_S: Final = 60.0
FEED_LAG_S: Final = 5.0
STICTION_PCT: Final = 0.2
RATIO_HIGH: Final = 1.0
ALL_MODES: Final = frozenset(Mode)
SLAVES: Final[Mapping[str, str]] = {
    "FIC-2104": "TIC-2107",
    "FIC-2105": "LIC-2113",
    "FIC-2106": "LIC-2114",
}
PV_TAG: Final[Mapping[str, str]] = {"TIC-2107": "TI-2107"}
"""The instrument that measures for a loop, where the names differ."""
READ_ONLY: Final = frozenset(("FIC-2101",))
"""Set upstream of this column."""


@dataclass(frozen=True, slots=True)
class Flows:
    """True flows [kg/h]."""

    feed: float
    reflux: float
    steam: float
    distillate: float
    bottoms: float


class BaseLayer:
    """All loops and valves of the column.

    Parameters
    ----------
    data : PlantData
        Setpoints at the start, steam properties.
    ranges : mapping
        Instrument range (low, high) by tag [tag's unit].
    flows : Flows
        True flows of the steady state at the start.
    """

    def __init__(
        self, data: PlantData, ranges: Mapping[str, tuple[float, float]], flows: Flows
    ) -> None:
        base = data.base_layer
        self.ranges: dict[str, tuple[float, float]] = {
            "FIC-2101": ranges["FIC-2101"],
            "FIC-2103": ranges["FIC-2103"],
            "FFIC-2103": (0.0, RATIO_HIGH),
            "FIC-2104": ranges["FIC-2104"],
            "FIC-2105": ranges["FIC-2105"],
            "FIC-2106": ranges["FIC-2106"],
            "TIC-2107": ranges["TI-2107"],
            "PIC-2111": ranges["PIC-2111"],
            "LIC-2113": ranges["LIC-2113"],
            "LIC-2114": ranges["LIC-2114"],
        }
        self.feed_kg_h = flows.feed
        self.drum_pressure_kpa = base.drum_pressure_kpa
        self.filtered_feed_kg_h = flows.feed
        self._start_feed_kg_h = flows.feed
        self.measured_ratio = base.reflux_ratio
        self.loops, self.valves = self._build(data, flows)

    def _build(self, data: PlantData, flows: Flows) -> tuple[dict[str, Loop], dict[str, Valve]]:
        base = data.base_layer
        flow_of = {
            "FIC-2103": flows.reflux,
            "FIC-2104": flows.steam,
            "FIC-2105": flows.distillate,
            "FIC-2106": flows.bottoms,
        }
        loops: dict[str, Loop] = {}
        valves: dict[str, Valve] = {}
        for tag, flow in flow_of.items():
            full = self.ranges[tag][1]
            opening = 100.0 * flow / full
            stiction = STICTION_PCT if tag in ("FIC-2103", "FIC-2104") else 0.0
            valves[tag] = Valve(full, opening, stiction)
            loops[tag] = Loop(
                tag, 50.0 / full, 8.0, flow, opening, Mode.CASCADE, ALL_MODES, filter_s=3.0
            )
        steam_pct = 100.0 * flows.steam / self.ranges["FIC-2104"][1]
        kg_h_per_kw = 3600.0 / data.steam.latent_heat_kj_kg
        tray_gain = 100.0 * TRAY_GAIN_KW_K * kg_h_per_kw / self.ranges["FIC-2104"][1]
        loops["TIC-2107"] = Loop(
            "TIC-2107", tray_gain, TRAY_RESET_S, base.tray_temperature_degc, steam_pct
        )
        drum_pct = 100.0 * flows.distillate / self.ranges["FIC-2105"][1]
        sump_pct = 100.0 * flows.bottoms / self.ranges["FIC-2106"][1]
        loops["LIC-2113"] = Loop(
            "LIC-2113", -2.5, 2700.0, base.drum_level_pct, drum_pct, filter_s=30.0
        )
        loops["LIC-2114"] = Loop(
            "LIC-2114", -1.5, 2400.0, base.sump_level_pct, sump_pct, filter_s=30.0
        )
        # These three are regulated ideally; a Loop only carries their faceplate.
        cascade, automatic = frozenset((Mode.CASCADE,)), frozenset((Mode.AUTOMATIC,))
        feed_pct = 100.0 * flows.feed / self.ranges["FIC-2101"][1]
        loops["FIC-2101"] = Loop("FIC-2101", 0.0, 1.0, flows.feed, feed_pct, Mode.CASCADE, cascade)
        loops["PIC-2111"] = Loop(
            "PIC-2111", 0.0, 1.0, base.drum_pressure_kpa, 50.0, modes=automatic
        )
        reflux_pct = 100.0 * flows.reflux / self.ranges["FIC-2103"][1]
        loops["FFIC-2103"] = Loop(
            "FFIC-2103", 0.0, 1.0, base.reflux_ratio, reflux_pct, modes=automatic
        )
        return loops, valves

    def scan(
        self, measured: Mapping[str, float], feed_factor: float, condenser_duty_kw: float
    ) -> None:
        """One scan: measured values in, valves moved.

        Parameters
        ----------
        measured : mapping
            Readings by instrument tag.
        feed_factor : float
            The feed setpoint from upstream over that at the start [-].
        condenser_duty_kw : float
            For the position of the cooling valve that PIC-2111 shows [kW].
        """
        self._feed(feed_factor)
        self._pressure(condenser_duty_kw)
        self._ratio(measured["FIC-2101"], measured["FIC-2103"])
        for slave, master in SLAVES.items():
            self._cascade(
                self.loops[master], self.loops[slave], measured[PV_TAG.get(master, master)]
            )
        for tag, valve in self.valves.items():
            valve.move(self.loops[tag].scan(measured[tag]))

    def _feed(self, factor: float) -> None:
        loop = self.loops["FIC-2101"]
        loop.setpoint = self._start_feed_kg_h * factor
        keep = math.exp(-1.0 / FEED_LAG_S)
        self.feed_kg_h = keep * self.feed_kg_h + (1.0 - keep) * loop.setpoint
        loop.output = 100.0 * self.feed_kg_h / self.ranges["FIC-2101"][1]

    def _pressure(self, condenser_duty_kw: float) -> None:
        loop = self.loops["PIC-2111"]
        keep = math.exp(-1.0 / PRESSURE_LAG_S)
        self.drum_pressure_kpa = keep * self.drum_pressure_kpa + (1.0 - keep) * loop.setpoint
        loop.output = min(100.0, max(0.0, condenser_duty_kw / 80.0))

    def _ratio(self, measured_feed: float, measured_reflux: float) -> None:
        keep = math.exp(-1.0 / RATIO_FILTER_S)
        self.filtered_feed_kg_h = keep * self.filtered_feed_kg_h + (1.0 - keep) * measured_feed
        feed = max(1.0, self.filtered_feed_kg_h)
        station, reflux = self.loops["FFIC-2103"], self.loops["FIC-2103"]
        high = self.ranges["FIC-2103"][1]
        if reflux.mode is Mode.CASCADE:
            reflux.setpoint = min(high, station.setpoint * feed)
        else:
            if reflux.manual:
                reflux.setpoint = reflux.filtered
            # The station follows the loop, so that the return to cascade is bumpless.
            station.setpoint = min(RATIO_HIGH, reflux.setpoint / feed)
        station.output = 100.0 * reflux.setpoint / high
        self.measured_ratio = min(RATIO_HIGH, measured_reflux / feed)

    def _cascade(self, master: Loop, slave: Loop, measured: float) -> None:
        high = self.ranges[slave.tag][1]
        output = master.scan(
            measured, hold_high=slave.output >= 100.0, hold_low=slave.output <= 0.0
        )
        if slave.mode is Mode.CASCADE:
            slave.setpoint = output * high / 100.0
            return
        if slave.manual:
            slave.setpoint = min(high, max(0.0, slave.filtered))
        # The slave does not listen: be ready for its return without a bump.
        master.follow(100.0 * slave.setpoint / high)

    def limit_valve(self, tag: str, high: float | None) -> None:
        """Keep a valve from opening further than `high` [%]; None frees it."""
        if tag not in self.valves:
            raise ValueError(f"{tag} has no control valve; choose from {', '.join(self.valves)}")
        if high is None:
            self.valves[tag].high = 100.0
            return
        if not 0.0 <= high <= 100.0:
            raise ValueError(f"{tag}: a valve stop of {high:g} % is outside 0 to 100 %")
        self.valves[tag].high = high

    def board_writes(self, tag: str, item: str, value: float) -> None:
        """A person changes SP, OP or MODE of a loop.

        Parameters
        ----------
        tag : str
            The loop.
        item : str
            `SP`, `OP` or `MODE`.
        value : float
            In the unit of that signal.

        Raises
        ------
        ValueError
            The loop's present mode, its range or its kind does not allow it.
        """
        loop = self.loops[tag]
        if item == "MODE":
            self._change_mode(loop, value)
        elif item == "SP":
            self._change_setpoint(loop, value)
        elif not loop.manual:
            raise ValueError(f"{tag}.OP: the loop is not in manual")
        elif not 0.0 <= value <= 100.0:
            raise ValueError(f"{tag}.OP: {value:g} is outside 0 to 100 %")
        else:
            loop.output = value

    def _change_mode(self, loop: Loop, value: float) -> None:
        if value not in [int(mode) for mode in loop.modes]:
            allowed = ", ".join(f"{int(mode)} {mode.name.lower()}" for mode in sorted(loop.modes))
            raise ValueError(f"{loop.tag}.MODE: {value:g} is not one of {allowed}")
        loop.mode = Mode(int(value))

    def _change_setpoint(self, loop: Loop, value: float) -> None:
        low, high = self.ranges[loop.tag]
        if not low <= value <= high:
            raise ValueError(f"{loop.tag}.SP: {value:g} is outside {low:g} to {high:g}")
        reflux = self.loops["FIC-2103"]
        if loop.tag == "FFIC-2103" and reflux.mode is not Mode.CASCADE:
            raise ValueError("FFIC-2103.SP: the station follows FIC-2103, which is not in cascade")
        if loop is reflux and loop.mode is Mode.CASCADE:
            # "This flow now": the ratio changes and reflux goes on following the feed.
            feed = max(1.0, self.filtered_feed_kg_h)
            self.loops["FFIC-2103"].setpoint = min(RATIO_HIGH, value / feed)
        elif loop.mode is Mode.CASCADE:
            raise ValueError(f"{loop.tag}.SP: the loop is in cascade, its master sets it")
        elif loop.manual and loop.tag in self.valves:
            raise ValueError(f"{loop.tag}.SP: the loop is in manual, its setpoint follows the PV")
        loop.setpoint = value
