"""The standings table: every pair, refusals, counts, and its picture in the guide."""

from __future__ import annotations

import itertools
import re
from pathlib import Path

import pytest

from edgectl.cycle.standing import (
    TABLE,
    Event,
    RefusedEventError,
    StandingState,
    after,
    as_markdown,
    good_cycle,
    poor_cycle,
)
from edgectl.records.advice import Standing


@pytest.mark.parametrize(("standing", "event"), list(itertools.product(Standing, Event)), ids=str)
def test_every_standing_meets_every_event(standing: Standing, event: Event) -> None:
    state = StandingState(standing, holds=2, good_cycles=1)
    expected = TABLE.get((standing, event))
    if expected is None:
        with pytest.raises(RefusedEventError, match=str(event)):
            after(state, event)
        assert state == StandingState(standing, holds=2, good_cycles=1)
    else:
        assert after(state, event).standing is expected


def test_only_a_supported_cycle_leads_to_advising() -> None:
    into = {event for (_, event), to in TABLE.items() if to is Standing.ADVISING}
    assert into == {Event.SUPPORTED}


def test_the_switch_silences_from_everywhere() -> None:
    assert all(TABLE[standing, Event.FORBIDDEN] is Standing.SILENT for standing in Standing)


def test_the_warm_up_counts_good_cycles_whatever_happens_between() -> None:
    state = StandingState()
    for good in (True, False, True, True):
        assert state.standing is Standing.STARTING
        state = good_cycle(state, 3) if good else poor_cycle(state, 10)
    assert state.good_cycles == 3
    assert good_cycle(state, 3).standing is Standing.ADVISING


def test_holds_in_a_row_end_in_silence_and_a_good_cycle_ends_the_count() -> None:
    state = StandingState(Standing.ADVISING, good_cycles=3)
    for expected in (1, 2):
        state = poor_cycle(state, 2)
        assert (state.standing, state.holds) == (Standing.HOLDING, expected)
    silent = poor_cycle(state, 2)
    assert (silent.standing, silent.holds) == (Standing.SILENT, 0)
    assert poor_cycle(good_cycle(state, 3), 2).holds == 1


def test_silence_during_the_warm_up_does_not_shorten_it() -> None:
    silent = after(StandingState(good_cycles=1), Event.FORBIDDEN)
    assert good_cycle(silent, 3).standing is Standing.STARTING


def test_a_lost_memory_begins_the_warm_up_anew() -> None:
    state = after(StandingState(Standing.ADVISING, good_cycles=3), Event.BEGUN_ANEW)
    assert state == StandingState(Standing.STARTING, 0, 0)


def test_the_picture_names_every_standing_and_event(repo_root: Path) -> None:
    picture = as_markdown()
    assert all(f"`{event}`" in picture for event in Event)
    assert all(f"**{standing}**" in picture for standing in Standing)
    guide = (repo_root / "DEVELOPERS.md").read_text()
    shown = re.search(r"<!-- standings -->\n(.*?)<!-- /standings -->", guide, re.S)
    assert shown is not None
    if shown[1]:
        assert shown[1] == picture, "run: python -m edgectl.cycle.standing"
