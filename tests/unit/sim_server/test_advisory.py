"""The board: which numbers on it ask for a hand."""

from __future__ import annotations

import pytest

from sim_server.advisory import AdvisoryBoard


@pytest.mark.parametrize("reason", ["no_change", "taken", "loop_in_manual"])
def test_a_target_that_asks_for_nothing_is_not_entered_again(reason: str) -> None:
    board = AdvisoryBoard()
    board.write("ADV.FIC-2103.target", 8000.0, 0.0)
    board.write("ADV.FIC-2103.reason", reason, 0.0)
    assert board.targets() == {"FIC-2103": None, "TIC-2107": None}


@pytest.mark.parametrize("reason", ["economics", "limit_reached", "setpoint", "only_together"])
def test_a_target_with_a_reason_to_move_is_a_suggestion(reason: str) -> None:
    board = AdvisoryBoard()
    board.write("ADV.FIC-2103.target", 8000.0, 0.0)
    board.write("ADV.FIC-2103.reason", reason, 0.0)
    assert board.targets()["FIC-2103"] == 8000.0


def test_a_bare_number_is_a_suggestion() -> None:
    board = AdvisoryBoard()
    board.write("ADV.TIC-2107.target", 100.0, 0.0)
    assert board.targets()["TIC-2107"] == 100.0
