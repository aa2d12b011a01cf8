"""Drills, on time passed in."""

from __future__ import annotations

import pytest

from sim_server.faults import BoardWrite, Drill, DrillName, Switch, ValveLimit
from sim_server.signals import BAD_SENSOR_FAILURE, GOOD, Signal


def signals_at(now_s: float) -> dict[str, Signal]:
    return {
        "TI-2107.PV": Signal(96.0 + now_s / 1e4, GOOD, now_s),
        "AI-2116.PV": Signal(300.0 + now_s, GOOD, now_s - now_s % 600.0),
        "FIC-2103.MODE": Signal(2.0, GOOD, now_s),
        "FIC-2104.OP": Signal(74.0, GOOD, now_s),
    }


@pytest.mark.parametrize("name", list(DrillName))
def test_outside_its_time_a_drill_changes_nothing(name: DrillName) -> None:
    drill = Drill(name, begin_s=1200.0)
    for now_s in (0.0, 1198.0, drill.end_s, drill.end_s + 1e5):
        fresh = Drill(name, begin_s=1200.0)
        assert fresh.seen(now_s, signals_at(now_s)) == signals_at(now_s)
        assert fresh.endpoint_up(now_s)
        assert fresh.orders(now_s, signals_at(now_s)) == ()


@pytest.mark.parametrize("name", [DrillName.NONE, DrillName.SLOW_SOLVER])
def test_drills_of_others_leave_the_plant_alone(name: DrillName) -> None:
    drill = Drill(name, 0.0, 3600.0)
    assert drill.orders(10.0, signals_at(10.0)) == ()
    assert drill.seen(10.0, signals_at(10.0)) == signals_at(10.0)


def test_bad_quality_breaks_one_instrument_and_no_other() -> None:
    seen = Drill(DrillName.BAD_QUALITY).seen(1200.0, signals_at(1200.0))
    changed = {name for name, signal in seen.items() if signal != signals_at(1200.0)[name]}
    assert changed == {"TI-2107.PV"}
    assert seen["TI-2107.PV"].status == BAD_SENSOR_FAILURE


def test_server_drop_takes_the_endpoint_away_for_its_time() -> None:
    drill = Drill(DrillName.SERVER_DROP, 1200.0, 180.0)
    states = [drill.endpoint_up(now_s) for now_s in (1199.0, 1200.0, 1379.0, 1380.0)]
    assert states == [True, False, False, True]


def test_a_frozen_analyser_repeats_its_result_with_new_stamps_and_then_goes_quiet() -> None:
    drill = Drill(DrillName.FROZEN_ANALYSER, 1200.0)
    seen = {
        now_s: drill.seen(now_s, signals_at(now_s))["AI-2116.PV"]
        for now_s in (1200.0, 1800.0, 4790.0, 4800.0, 9000.0)
    }
    assert {signal.value for signal in seen.values()} == {1500.0}
    assert all(signal.status == GOOD for signal in seen.values())
    assert [signal.source_time_s for signal in seen.values()] == [1200, 1800, 4200, 4200, 4200]


def test_loop_manual_gives_back_the_mode_it_found() -> None:
    drill = Drill(DrillName.LOOP_MANUAL, 1200.0, 60.0)
    orders = [drill.orders(now_s, signals_at(now_s)) for now_s in (1198.0, 1200.0, 1202.0, 1260.0)]
    assert orders == [
        (),
        (BoardWrite("FIC-2103.MODE", 0.0),),
        (),
        (BoardWrite("FIC-2103.MODE", 2.0),),
    ]


def test_valve_limit_stops_the_steam_valve_below_where_it_stands_and_frees_it() -> None:
    drill = Drill(DrillName.VALVE_LIMIT, 1200.0, 60.0)
    (limit,) = drill.orders(1200.0, signals_at(1200.0))
    assert isinstance(limit, ValveLimit)
    assert limit.loop == "FIC-2104"
    assert limit.high is not None
    assert limit.high < 74.0
    assert drill.orders(1260.0, signals_at(1260.0)) == (ValveLimit("FIC-2104", None),)


def test_operator_off_turns_the_switch_off_and_on_again() -> None:
    drill = Drill(DrillName.OPERATOR_OFF, 1200.0, 60.0)
    assert drill.orders(1200.0, signals_at(1200.0)) == (Switch(on=False),)
    assert drill.orders(1260.0, signals_at(1260.0)) == (Switch(on=True),)
