"""Where the moves stand, and what may be done with them."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from edgectl.cycle.policies import Policies
from edgectl.cycle.positions import SATURATED_CYCLES, Seen, Validated, validate
from edgectl.records.measurements import MovePosition, Service
from edgectl.records.readings import Reading, TagSnapshot
from edgectl.testing.toy import ToyPlant

REFLUX = "FIC-2103"
NOW = 1_000_000.0


class Board:
    """The toy plant, validated again and again, with some tags overwritten."""

    def __init__(self, policies: Policies) -> None:
        self.policies = policies
        self.plant = ToyPlant(policies, NOW, seed=1)
        self.seen = Seen()
        self.cycle = 0

    def look(self, **values: float | None) -> Validated:
        """Tag names with `_` for `-`; None: bad quality."""
        self.cycle += 1
        now = NOW + 30.0 * self.cycle
        self.plant.advance(now)
        readings = []
        for tag in self.policies.tags:
            name = tag.replace("-", "_")
            if name in values:
                given = values[name]
                status = 0x808C0000 if given is None else 0
                readings.append(Reading(tag, given, status, now, now))
            else:
                readings.append(self.plant.reading(tag))
        found = validate(TagSnapshot(self.cycle, now, tuple(readings)), self.seen, self.policies)
        self.seen = found.seen
        return found

    def reflux(self, **values: float | None) -> MovePosition:
        return self.look(**values).measurements.positions[REFLUX]


def test_in_automatic_an_mv_stands_at_its_setpoint(policies: Policies) -> None:
    found = Board(policies).reflux(REFLUX_SP=8000.0, FIC_2103=8040.0)
    expected = MovePosition(REFLUX, 8000.0, Service.FREE, 6500.0, 9500.0, "in_service")
    assert replace(found, feed=None, drift=0.0) == expected


def test_in_manual_it_is_fixed_where_the_plant_is(policies: Policies) -> None:
    found = Board(policies).reflux(REFLUX_SP=8000.0, FIC_2103=7700.0, REFLUX_MODE=0.0)
    assert (found.position, found.service, found.reason) == (
        7700.0, Service.FIXED, "loop_in_manual",
    )  # fmt: skip


@pytest.mark.parametrize(
    ("values", "reason"),
    [
        ({"REFLUX_MODE": None}, "mode_unknown"),
        ({"REFLUX_MODE": 1.5}, "loop_in_manual"),
        ({"REFLUX_SP": None}, "setpoint_unknown"),
    ],
)
def test_what_cannot_be_read_is_not_moved(
    policies: Policies, values: dict[str, float | None], reason: str
) -> None:
    found = Board(policies).reflux(**values)
    assert (found.service, found.reason) == (Service.FIXED, reason)


@pytest.mark.parametrize(
    ("output", "service"), [(100.0, Service.LOWER_ONLY), (0.0, Service.RAISE_ONLY)]
)
def test_a_valve_at_its_end_takes_one_direction_away(
    policies: Policies, output: float, service: Service
) -> None:
    board = Board(policies)
    for _ in range(SATURATED_CYCLES - 1):
        assert board.reflux(REFLUX_OP=output).service is Service.FREE
    found = board.reflux(REFLUX_OP=output)
    assert (found.service, found.reason) == (service, "output_saturated")
    assert board.reflux(REFLUX_OP=50.0).service is Service.FREE


def test_a_setpoint_that_is_not_followed_fixes_the_move(policies: Policies) -> None:
    board, cycles = Board(policies), policies.moves[REFLUX].follow_cycles
    for _ in range(cycles - 1):
        assert board.reflux(REFLUX_SP=8000.0, FIC_2103=7000.0).service is Service.FREE
    found = board.reflux(REFLUX_SP=8000.0, FIC_2103=7000.0)
    assert (found.service, found.reason, found.position) == (
        Service.FIXED, "not_followed", 7000.0,
    )  # fmt: skip
    assert board.reflux(REFLUX_SP=8000.0, FIC_2103=7900.0).service is Service.FREE


def test_limits_may_be_tags(policies: Policies) -> None:
    limit = replace(policies.tags["REFLUX-SP"], tag="REFLUX-HIGH", required=False)
    move = replace(policies.moves[REFLUX], high="REFLUX-HIGH")
    board = Board(
        replace(
            policies,
            tags={**policies.tags, "REFLUX-HIGH": limit},
            moves={**policies.moves, REFLUX: move},
        )
    )
    assert board.reflux(REFLUX_HIGH=9000.0).high == 9000.0
    unknown = board.reflux(REFLUX_HIGH=None)
    assert (unknown.service, unknown.reason) == (Service.FIXED, "limit_unknown")
    crossed = board.reflux(REFLUX_HIGH=6000.0)
    assert (crossed.service, crossed.reason) == (Service.FIXED, "limits_crossed")


def test_a_cvs_limit_that_cannot_be_read_stops_the_plan(policies: Policies) -> None:
    limit = replace(policies.tags["AI-2116"], tag="BOTTOMS-HIGH", analyser=None, stale_after_s=60.0)
    cv = replace(policies.cvs["BOTTOMS"], high="BOTTOMS-HIGH")
    changed = replace(
        policies,
        tags={**policies.tags, "BOTTOMS-HIGH": limit},
        cvs={**policies.cvs, "BOTTOMS": cv},
    )
    board = Board(changed)
    good = board.look(BOTTOMS_HIGH=300.0)
    assert next(found for found in good.limits if found.cv == "BOTTOMS").high == 300.0
    assert good.measurements.complete
    assert board.look(BOTTOMS_HIGH=None).measurements.missing_required == ("BOTTOMS-HIGH",)


def test_missing_required_names_only_required_tags(policies: Policies) -> None:
    found = Board(policies).look(TI_2107=None, TI_2109=None, FIC_2101=None)
    assert found.measurements.missing_required == ("FIC-2101", "TI-2107")


def test_the_switch_stays_where_it_was_while_it_cannot_be_read(policies: Policies) -> None:
    board = Board(policies)
    assert not board.look(ADVICE_ON=None).measurements.advice_wanted, "never read: off"
    assert board.look(ADVICE_ON=1.0).measurements.advice_wanted
    assert board.look(ADVICE_ON=None).measurements.advice_wanted
    assert not board.look(ADVICE_ON=0.0).measurements.advice_wanted
    assert not board.look(ADVICE_ON=None).measurements.advice_wanted


def test_without_a_switch_advice_is_wanted(policies: Policies) -> None:
    assert Board(replace(policies, switch=None)).look(ADVICE_ON=0.0).measurements.advice_wanted


def test_an_mv_in_ratio_tells_how_far_the_feed_will_still_carry_it(policies: Policies) -> None:
    board = Board(policies)
    steady = board.reflux(FIC_2101=18_000.0)
    assert (steady.feed, steady.drift) == (18_000.0, 0.0)
    for _ in range(4):
        moving = board.reflux(FIC_2101=19_440.0)
    # The station filters the feed by 5 min: after 2 min two thirds of 8 % are still to come.
    assert moving.feed == pytest.approx(18_000.0 * (1.0 + 0.08 * (1.0 - math.exp(-0.4))))
    assert moving.position is not None
    assert 0.03 * moving.position < moving.drift < 0.06 * moving.position
    for _ in range(120):
        settled = board.reflux(FIC_2101=19_440.0)
    assert settled.drift == pytest.approx(0.0, abs=1.0)
    # Not read: what was known stays.
    assert board.reflux(FIC_2101=None).feed == settled.feed
    assert board.look(FIC_2101=18_000.0).measurements.positions["TIC-2107"].feed is None
