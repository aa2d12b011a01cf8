"""The plant with its people on the fixed grid of plant time, without any server."""

from __future__ import annotations

import io
import json
from collections.abc import Mapping
from datetime import UTC, datetime
from typing import Any

import pytest

from sim_server.crew import Crew, CrewMode
from sim_server.faults import Drill, DrillName
from sim_server.plant import SimulatedPlant
from sim_server.scoring import TruthFile
from sim_server.signals import Plant, Signal, SignalSpec
from sim_server.simulation import BAD_OUT_OF_RANGE, CREW, DRILL, SetupError, Simulation
from sim_server.watchdog import AdviceWatchdog
from sim_server.writelog import WriteLog

START = datetime(2031, 3, 1, 6, 0, tzinfo=UTC).timestamp()
FAR = datetime(2032, 1, 1, tzinfo=UTC)


class Rehearsal:
    """A simulation on the real plant, with its files in memory."""

    def __init__(
        self, crew: CrewMode = CrewMode.IGNORES, drill: DrillName = DrillName.NONE
    ) -> None:
        plant = SimulatedPlant(1)
        self.log = io.StringIO()
        self.truth = io.StringIO()

        def plant_time() -> float:
            return START + plant.time_s

        self.simulation = Simulation(
            plant,
            Crew(crew, 1),
            Drill(drill, 60.0, 120.0),
            AdviceWatchdog(),
            plant_time,
            WriteLog(self.log, lambda: (plant_time(), 0.0)),
            TruthFile(self.truth, plant.true_values()),
        )

    def run(self, until_s: float) -> None:
        while self.simulation.plant.time_s < until_s:
            self.simulation.step()

    def advise(self, heartbeat: int, **targets: float) -> None:
        board, now = self.simulation.board, START + self.simulation.plant.time_s
        made_at = datetime.fromtimestamp(now, UTC)
        for loop, target in targets.items():
            board.write(f"ADV.{loop.replace('_', '-')}.target", target, now)
            board.write("ADV.made_at", made_at, now)
        board.write("ADV.valid_until", FAR, now)
        board.write("ADV.heartbeat", heartbeat, now)
        board.write("ADV.valid", True, now)

    def value(self, name: str) -> float:
        return self.simulation.plant.signals[name].value

    def writes(self) -> list[dict[str, Any]]:
        return [json.loads(line) for line in self.log.getvalue().splitlines()]


def test_a_following_crew_moves_the_plant_and_its_writes_are_logged() -> None:
    rehearsal = Rehearsal(CrewMode.FOLLOWS)
    rehearsal.run(10.0)
    for heartbeat in range(1, 6):
        rehearsal.advise(heartbeat, TIC_2107=101.5)
        rehearsal.run(10.0 + 30.0 * heartbeat)
    # Re-stamped in every beat, the suggestion was new again and again until one stood long enough.
    assert rehearsal.value("TIC-2107.SP") == 102.0
    for heartbeat in range(6, 11):
        rehearsal.advise(heartbeat)
        rehearsal.run(10.0 + 30.0 * heartbeat)
    assert rehearsal.value("TIC-2107.SP") == 101.5
    (entry,) = rehearsal.writes()
    assert (entry["user"], entry["node"], entry["accepted"]) == (CREW, "TIC-2107.SP", True)
    assert rehearsal.simulation.crew_actions == 1


def test_the_crew_does_not_act_after_the_heartbeat_has_stopped() -> None:
    rehearsal = Rehearsal(CrewMode.LATE)
    rehearsal.run(10.0)
    rehearsal.advise(1, FIC_2103=8200.0)
    rehearsal.run(2400.0)
    assert rehearsal.simulation.usable is False
    assert rehearsal.writes() == []


def test_a_setpoint_that_the_plant_refuses_is_logged_as_refused() -> None:
    rehearsal = Rehearsal(CrewMode.FOLLOWS)
    rehearsal.run(10.0)
    rehearsal.advise(1)
    rehearsal.run(12.0)
    rehearsal.advise(2, FIC_2103=99999.0)
    for heartbeat in range(3, 8):
        rehearsal.run(12.0 + 30.0 * heartbeat)
        rehearsal.advise(heartbeat)
    (entry,) = rehearsal.writes()
    assert entry["status_code"] == BAD_OUT_OF_RANGE
    assert entry["accepted"] is False
    assert rehearsal.simulation.crew_actions == 0


def test_truth_has_a_row_every_thirty_plant_seconds() -> None:
    rehearsal = Rehearsal()
    rehearsal.run(120.0)
    header, *rows = rehearsal.truth.getvalue().splitlines()
    assert header.startswith("time_s,bottoms_methanol_wt_ppm,")
    assert header.endswith(",advice_usable,crew_actions")
    assert [row.split(",")[0] for row in rows] == ["30", "60", "90", "120"]


@pytest.mark.parametrize(
    "drill", [DrillName.BAD_QUALITY, DrillName.FROZEN_ANALYSER, DrillName.SERVER_DROP]
)
def test_a_drill_of_the_instruments_leaves_the_plant_itself_as_it_was(drill: DrillName) -> None:
    plain, drilled = Rehearsal(), Rehearsal(drill=drill)
    plain.run(300.0)
    drilled.run(300.0)
    assert drilled.simulation.plant.true_values() == plain.simulation.plant.true_values()
    assert drilled.simulation.plant.signals == plain.simulation.plant.signals


def test_loop_manual_and_operator_off_are_done_and_undone_by_the_board() -> None:
    manual, off = Rehearsal(drill=DrillName.LOOP_MANUAL), Rehearsal(drill=DrillName.OPERATOR_OFF)
    manual.run(60.0)
    off.run(60.0)
    assert manual.value("FIC-2103.MODE") == 0.0
    assert off.simulation.board.advice_on is False
    manual.run(180.0)
    off.run(180.0)
    assert manual.value("FIC-2103.MODE") == 2.0
    assert off.simulation.board.advice_on is True
    assert [entry["user"] for entry in manual.writes() + off.writes()] == [DRILL] * 4


def test_valve_limit_drives_the_steam_loop_to_its_end_until_it_is_freed() -> None:
    rehearsal = Rehearsal(drill=DrillName.VALVE_LIMIT)
    rehearsal.run(60.0)
    free = rehearsal.value("FIC-2104.OP")
    rehearsal.run(178.0)
    assert rehearsal.value("FIC-2104.OP") > free + 5.0
    assert rehearsal.value("FIC-2104.PV") < 120.0 * free
    rehearsal.run(600.0)
    assert rehearsal.value("TI-2107.PV") == pytest.approx(102.0, abs=4.0)


class WithoutValves:
    """A plant whose valves cannot be limited."""

    specs: tuple[SignalSpec, ...] = ()
    time_s = 0.0
    signals: Mapping[str, Signal] = {}

    def advance(self, until_s: float) -> None: ...

    def write(self, name: str, value: float) -> None: ...

    def true_values(self) -> Mapping[str, float]:
        return {}


def test_a_drill_that_the_plant_cannot_do_is_refused_at_once() -> None:
    plant: Plant = WithoutValves()
    with pytest.raises(SetupError, match="cannot limit its valves"):
        Simulation(
            plant,
            Crew(CrewMode.IGNORES, 1),
            Drill(DrillName.VALVE_LIMIT),
            AdviceWatchdog(),
            lambda: START,
            WriteLog(None, lambda: (START, 0.0)),
        )
