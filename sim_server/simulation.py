"""The plant with its people: plant, drill, watchdog, crew and scoring, step by step.

Runs on a fixed grid of two plant seconds, whatever the wall clock does, so that
a slow machine changes when things are published but not what happens.
Knows nothing of OPC UA.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Final

from sim_server.advisory import MOVES, SWITCH, AdvisoryBoard
from sim_server.crew import BoardView, Crew
from sim_server.faults import BoardWrite, Drill, LimitsValves, Order, Switch, ValveLimit
from sim_server.scoring import ROW_PERIOD_S, TruthFile
from sim_server.signals import GOOD, Mode, Plant, Signal
from sim_server.watchdog import AdviceWatchdog
from sim_server.writelog import WriteLog

STEP_S: Final = 2.0
BAD_OUT_OF_RANGE: Final = 0x803C0000
CREW: Final = "board (crew)"
DRILL: Final = "board (drill)"


class SetupError(Exception):
    """The rehearsal cannot start as asked; the message says why."""


class Simulation:
    """One rehearsal of the plant.

    Parameters
    ----------
    plant : Plant
    crew, drill, watchdog
        Pure logic that is told the time.
    plant_time : callable
        Plant time by the clock that the runtime shares [s since the Unix epoch];
        advice is dated by it, so the watchdog judges by it.
    write_log : WriteLog
    truth : TruthFile, optional
        Receives the true values.

    Raises
    ------
    SetupError
        The drill needs something that this plant cannot do.
    """

    def __init__(
        self,
        plant: Plant,
        crew: Crew,
        drill: Drill,
        watchdog: AdviceWatchdog,
        plant_time: Callable[[], float],
        write_log: WriteLog,
        truth: TruthFile | None = None,
    ) -> None:
        if drill.needs_valve_limit and not isinstance(plant, LimitsValves):
            raise SetupError(f"drill {drill.name}: this plant cannot limit its valves")
        self.plant = plant
        self.board = AdvisoryBoard()
        self.usable = False
        self.crew_actions = 0
        self._crew = crew
        self._drill = drill
        self._watchdog = watchdog
        self._plant_time = plant_time
        self._write_log = write_log
        self._truth = truth
        self._next_row_s = ROW_PERIOD_S

    @property
    def endpoint_up(self) -> bool:
        """False while a drill wants the OPC UA server away."""
        return self._drill.endpoint_up(self.plant.time_s)

    @property
    def signals(self) -> Mapping[str, Signal]:
        """What the instruments show, the drill's fault included."""
        return self._drill.seen(self.plant.time_s, self.plant.signals)

    def step(self) -> None:
        """Two plant seconds: the plant first, then whatever people and faults do to it."""
        self.plant.advance(self.plant.time_s + STEP_S)
        now_s = self.plant.time_s
        for order in self._drill.orders(now_s, self.plant.signals):
            self._carry_out(order)
        self.judge()
        for action in self._crew.look(now_s, self._view()):
            if self._board_writes(CREW, action.signal, action.value):
                self.crew_actions += 1
        if self._truth is not None and now_s >= self._next_row_s:
            self._next_row_s += ROW_PERIOD_S
            values = self.plant.true_values()
            self._truth.record(now_s, values, self.usable, self.crew_actions)

    def judge(self) -> None:
        """Let the watchdog look again; called after every step and every write."""
        self.usable = self._watchdog.usable(self._plant_time(), self.board.seen())

    def _view(self) -> BoardView:
        signals = self.plant.signals
        return BoardView(
            usable=self.usable,
            made_at=self.board.made_at,
            targets=self.board.targets(),
            setpoints={move: signals[f"{move}.SP"].value for move in MOVES},
            in_manual=frozenset(
                move for move in MOVES if signals[f"{move}.MODE"].value == Mode.MANUAL
            ),
        )

    def _carry_out(self, order: Order) -> None:
        match order:
            case BoardWrite(signal, value):
                self._board_writes(DRILL, signal, value)
            case Switch(on):
                self.board.advice_on = on
                self._write_log.record(DRILL, SWITCH, on, GOOD)
            case ValveLimit(loop, high):
                assert isinstance(self.plant, LimitsValves)
                self.plant.limit_valve(loop, high)

    def _board_writes(self, who: str, signal: str, value: float) -> bool:
        """Write as a person at the board would; a refusal is logged like a client's."""
        status_code = GOOD
        try:
            self.plant.write(signal, value)
        except ValueError:
            status_code = BAD_OUT_OF_RANGE
        self._write_log.record(who, signal, value, status_code)
        return status_code == GOOD
