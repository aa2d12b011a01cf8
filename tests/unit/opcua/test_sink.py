"""The order of the writes, without a server."""

from __future__ import annotations

import pytest

from edgectl.opcua.sink import is_plain_good, publishing_steps, withdrawing_steps
from edgectl.records.advice import Advice, Standing, SuggestedMove


def advice(valid: bool, target: float | None = 1.0, made_at: float | None = 5.0) -> Advice:
    move = SuggestedMove("FIC-2103", target, False, made_at, "no_move", "Leave it.")
    return Advice(3, Standing.ADVISING, "reason", "Sentence.", valid, 95.0, made_at, 3, (move,), ())


@pytest.mark.parametrize("valid", [True, False])
def test_valid_is_false_while_anything_changes(valid: bool) -> None:
    steps = list(publishing_steps(advice(valid), 9))
    assert steps[0] == {"valid": False}
    assert steps[2] == {"valid_until": 95.0, "cycle": 3, "heartbeat": 9}
    assert steps[3:] == ([{"valid": True}] if valid else [])
    assert not any("valid" in step for step in steps[1:3])


def test_what_was_never_suggested_is_not_written() -> None:
    values = list(publishing_steps(advice(False, target=None, made_at=None), 9))[1]
    assert "FIC-2103.target" not in values
    assert "made_at" not in values
    assert values["FIC-2103.reason"] == "no_move"


def test_withdrawing_lets_valid_fall_first() -> None:
    first, second = withdrawing_steps("stopping", "The advisor stops.")
    assert first == {"valid": False}
    assert second == {"standing": "silent", "reason": "stopping", "sentence": "The advisor stops."}


@pytest.mark.parametrize(
    ("code", "accepted"),
    [(0x00000000, True), (0x00000400, True), (0x00300000, False), (0x801F0000, False)],
)
def test_clamped_is_not_accepted(code: int, accepted: bool) -> None:
    assert is_plain_good(code) is accepted
