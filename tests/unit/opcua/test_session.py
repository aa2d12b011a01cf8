"""Pauses between attempts to connect."""

from __future__ import annotations

from random import Random

from edgectl.opcua.session import Backoff


def test_pauses_double_from_one_second_to_a_minute() -> None:
    backoff = Backoff()
    longest = [1.0, 2.0, 4.0, 8.0, 16.0, 32.0, 60.0, 60.0]
    for failures, most_s in enumerate(longest, start=1):
        pauses = [backoff.pause_s(failures, Random(seed)) for seed in range(50)]
        assert 0.5 * most_s <= min(pauses) < max(pauses) <= most_s


def test_the_same_seed_pauses_alike() -> None:
    one, other = Random(3), Random(3)
    backoff = Backoff()
    assert [backoff.pause_s(n, one) for n in (1, 2)] == [backoff.pause_s(n, other) for n in (1, 2)]


def test_ten_thousand_failures_still_pause_a_minute() -> None:
    assert Backoff().pause_s(10_000, Random(1)) <= 60.0
