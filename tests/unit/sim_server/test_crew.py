"""The simulated board operator, on time passed in."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from sim_server.crew import BOARD_LIMITS, BoardAction, BoardView, Crew, CrewMode

VIEW = BoardView(
    usable=True,
    made_at=1000.0,
    targets={"FIC-2103": 8200.0, "TIC-2107": 101.0},
    setpoints={"FIC-2103": 8000.0, "TIC-2107": 102.0},
    in_manual=frozenset(),
)
BOTH = (BoardAction("FIC-2103.SP", 8200.0), BoardAction("TIC-2107.SP", 101.0))


def watch(
    crew: Crew, view: BoardView, from_s: int, to_s: int
) -> list[tuple[float, tuple[BoardAction, ...]]]:
    """Look every two seconds; what was done, and when."""
    looks = [(float(now), crew.look(float(now), view)) for now in range(from_s, to_s, 2)]
    return [(now, actions) for now, actions in looks if actions]


@pytest.mark.parametrize("seed", range(20))
def test_follows_takes_a_suggestion_in_full_within_two_minutes_and_once(seed: int) -> None:
    ((acted_at, actions),) = watch(Crew(CrewMode.FOLLOWS, seed), VIEW, 0, 4000)
    assert 30.0 <= acted_at <= 120.0
    assert actions == BOTH


def test_the_same_seed_acts_at_the_same_time_and_another_one_does_not() -> None:
    times = [watch(Crew(CrewMode.FOLLOWS, seed), VIEW, 0, 300)[0][0] for seed in (1, 1, 2)]
    assert times[0] == times[1] != times[2]


def test_late_takes_a_quarter_to_half_an_hour() -> None:
    ((acted_at, actions),) = watch(Crew(CrewMode.LATE, 3), VIEW, 0, 4000)
    assert 900.0 <= acted_at <= 1802.0
    assert actions == BOTH


def test_ignores_never_acts() -> None:
    assert watch(Crew(CrewMode.IGNORES, 1), VIEW, 0, 4000) == []


def test_part_goes_half_way_and_sometimes_moves_one_loop_only() -> None:
    half = {BoardAction("FIC-2103.SP", 8100.0), BoardAction("TIC-2107.SP", 101.5)}
    counts = set()
    for seed in range(30):
        ((_, actions),) = watch(Crew(CrewMode.PART, seed), VIEW, 0, 4000)
        assert set(actions) <= half
        counts.add(len(actions))
    assert counts == {1, 2}


def test_opposes_sometimes_goes_the_other_way_and_never_past_the_boards_limits() -> None:
    opposite = (BoardAction("FIC-2103.SP", 7800.0), BoardAction("TIC-2107.SP", 103.0))
    done = [watch(Crew(CrewMode.OPPOSES, seed), VIEW, 0, 4000) for seed in range(30)]
    assert {len(actions) for actions in done} == {0, 1}
    assert all(actions[0][1] == opposite for actions in done if actions)
    low, high = BOARD_LIMITS["TIC-2107"]
    at_limit = replace(VIEW, targets={"TIC-2107": low}, setpoints={"TIC-2107": high})
    entered = [watch(Crew(CrewMode.OPPOSES, seed), at_limit, 0, 4000) for seed in range(10)]
    assert {actions[0][1][0].value for actions in entered if actions} == {high}


def test_advice_that_is_not_usable_is_never_acted_on() -> None:
    assert watch(Crew(CrewMode.FOLLOWS, 1), replace(VIEW, usable=False), 0, 4000) == []


def test_an_action_in_mind_is_dropped_when_the_advice_is_withdrawn() -> None:
    crew = Crew(CrewMode.FOLLOWS, 1)
    assert watch(crew, VIEW, 0, 20) == []
    assert watch(crew, replace(VIEW, usable=False), 20, 200) == []
    ((acted_at, _),) = watch(crew, VIEW, 200, 400)
    assert acted_at >= 230.0


def test_an_action_in_mind_is_dropped_when_the_suggestion_changes() -> None:
    crew = Crew(CrewMode.FOLLOWS, 1)
    newer = replace(VIEW, made_at=1030.0, targets={"FIC-2103": 8300.0})
    assert watch(crew, VIEW, 0, 28) == []
    ((acted_at, actions),) = watch(crew, newer, 28, 400)
    assert acted_at >= 58.0
    assert actions == (BoardAction("FIC-2103.SP", 8300.0),)


def test_a_repeated_suggestion_is_not_taken_twice_but_a_new_stamp_is_new() -> None:
    crew = Crew(CrewMode.FOLLOWS, 1)
    assert len(watch(crew, VIEW, 0, 300)) == 1
    assert watch(crew, replace(VIEW, usable=False), 300, 400) == []
    assert watch(crew, VIEW, 400, 1000) == []
    assert len(watch(crew, replace(VIEW, made_at=1300.0), 1000, 1300)) == 1


def test_loops_in_manual_and_setpoints_that_stand_there_already_are_left_alone() -> None:
    crew = Crew(CrewMode.FOLLOWS, 1)
    view = replace(VIEW, in_manual=frozenset({"FIC-2103"}))
    ((_, actions),) = watch(crew, view, 0, 300)
    assert actions == BOTH[1:]
    done = replace(VIEW, setpoints={"FIC-2103": 8200.0, "TIC-2107": 101.0})
    assert watch(Crew(CrewMode.FOLLOWS, 1), done, 0, 300) == []


@pytest.mark.parametrize("nonsense", [math.nan, math.inf, None])
def test_a_person_does_not_enter_what_is_not_a_number(nonsense: float | None) -> None:
    view = replace(VIEW, targets={"FIC-2103": nonsense, "TIC-2107": 101.0})
    ((_, actions),) = watch(Crew(CrewMode.FOLLOWS, 1), view, 0, 300)
    assert actions == BOTH[1:]
