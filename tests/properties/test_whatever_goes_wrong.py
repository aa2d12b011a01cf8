"""For all stories of faults, two at once and more, with restarts: the invariants hold."""

from __future__ import annotations

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from edgectl.cycle.policies import Policies
from edgectl.testing import faults
from edgectl.testing.faults import Fault
from edgectl.testing.oracle import QUIET_CYCLES, problems
from edgectl.testing.story import play
from edgectl.testing.toy import ANALYSERS, ToyPlant

TAGS = (
    "FIC-2101", "TI-2102", "FIC-2103", "TI-2107", "PIC-2111", "AI-2115", "AI-2116",
    "REFLUX-SP", "REFLUX-OP", "REFLUX-MODE", "TRAY30-SP", "TRAY30-MODE", "ADVICE-ON",
)  # fmt: skip

begins = st.integers(1, 25)
lengths = st.integers(1, 14)
tag_faults = st.builds(
    Fault, st.sampled_from(faults.TAG_FAULTS), begins, lengths, st.sampled_from(TAGS)
)
edge_faults = st.builds(
    Fault,
    st.sampled_from(
        (*faults.SOLVER_FAULTS, *faults.READ_FAULTS, *faults.JOURNAL_FAULTS, *faults.SINK_FAULTS)
    ),
    begins,
    lengths,
)
plant_faults = st.builds(
    Fault,
    st.sampled_from(faults.PLANT_FAULTS),
    begins,
    lengths,
    st.sampled_from(("FIC-2103", "TIC-2107")),
)
restarts = st.builds(Fault, st.just(faults.RESTART), begins)
stories = st.lists(st.one_of(tag_faults, edge_faults, plant_faults, restarts), max_size=5)
crews = st.sampled_from(("follows", "ignores", "opposes", "part"))


@given(
    story=stories,
    crew=crews,
    reflux=st.floats(6500.0, 9500.0),
    tray=st.floats(97.0, 104.0),
    push=st.floats(-1.5, 1.5),
    seed=st.integers(0, 1000),
)
@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
@pytest.mark.timeout(300)
def test_the_invariants_hold_in_every_story(
    policies: Policies,
    story: list[Fault],
    crew: str,
    reflux: float,
    tray: float,
    push: float,
    seed: int,
) -> None:
    def prepare(plant: ToyPlant) -> None:
        plant.setpoints |= {"FIC-2103": reflux, "TIC-2107": tray}
        plant.push["BOTTOMS"] = push

    cycles = max((fault.end for fault in story), default=1) + QUIET_CYCLES + 1
    played = play(policies, cycles, story, crew=crew, seed=seed, prepare=prepare)
    assert problems(played) == []


PAIRS = (
    Fault("overrun", 12, 6),
    Fault("bad", 14, 6, "TI-2107"),
    Fault("nan", 14, 4, "FIC-2101"),
    Fault("lost", 13, 5),
    Fault("failing_journal", 14, 5),
    Fault("slow_journal", 13, 5),
    Fault("restart", 15),
    Fault("switch_off", 12, 7),
    Fault("unreachable", 13, 5),
    Fault("partial_publish", 14, 4),
)


@pytest.mark.parametrize("first", PAIRS, ids=lambda fault: fault.kind)
def test_two_faults_at_once(policies: Policies, first: Fault) -> None:
    for second in PAIRS:
        if second.kind <= first.kind:
            continue
        played = play(policies, 20 + QUIET_CYCLES, (first, second), crew="opposes")
        assert problems(played) == [], second.kind


def test_every_tag_fault_on_an_analyser_is_survived(policies: Policies) -> None:
    for kind in faults.TAG_FAULTS:
        for tag in ANALYSERS:
            played = play(policies, 10 + QUIET_CYCLES, [Fault(kind, 5, 5, tag)])
            assert problems(played) == [], (kind, tag)
            assert all(r.advice.valid for r in played.reports[4:]), (kind, tag)
