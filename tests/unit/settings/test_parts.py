"""Rules that need more than one spoilt line, and what one mistake leaves of the others."""

from __future__ import annotations

import tomllib

import pytest

from edgectl.settings import SiteFileError, parse_site
from edgectl.settings.parts import take_apart

LIMIT_TAG = """
[tags.REFLUX-MAX]
description = "highest reflux"
node = "nsu=urn:edgectl:sim:C-2101;s=REFLUX.MAX"
role = "limit"
unit = "kg/h"
basis = "mass"
low = 0.0
high = 15000.0
stale_after_s = 60.0

[tags.ADVICE-ON]"""


def spoil(text: str, header: str, old: str, new: str) -> str:
    start = 0 if not header else text.index(f"\n[{header}]") + 1
    at = text.index(old, start)
    return text[:at] + new + text[at + len(old) :]


def test_a_limit_may_be_a_tag(whole: str) -> None:
    text = whole.replace("\n[tags.ADVICE-ON]", LIMIT_TAG)
    text = spoil(text, "mv.FIC-2103", "9500.0", '"REFLUX-MAX"')
    assert parse_site(text, "site.toml").mv["FIC-2103"].high == "REFLUX-MAX"
    for old, new, says in (
        ('unit = "kg/h"', 'unit = "t/h"', "make the units the same"),
        ('role = "limit"', 'role = "loop_setpoint"', "a tag with role limit"),
    ):
        with pytest.raises(SiteFileError, match=says) as caught:
            parse_site(spoil(text, "tags.REFLUX-MAX", old, new), "site.toml")
        assert [finding.key for finding in caught.value.findings] == ["mv.FIC-2103.high"]


def test_a_limit_held_by_a_tag_has_the_basis_of_what_it_limits(whole: str) -> None:
    text = whole.replace("\n[tags.ADVICE-ON]", LIMIT_TAG)
    text = spoil(text, "tags.REFLUX-MAX", 'unit = "kg/h"\nbasis = "mass"', 'unit = "%"')
    text = spoil(text, "tags.AI-2115", 'unit = "wt %"', 'unit = "%"')
    text = spoil(text, "cv.DISTILLATE", 'unit = "wt %"', 'unit = "%"')
    text = spoil(text, "cv.DISTILLATE", "\nhigh = 0.40", '\nhigh = "REFLUX-MAX"')
    with pytest.raises(SiteFileError, match="the same basis as tag AI-2115, mass"):
        parse_site(text, "site.toml")


def test_a_linear_quality_states_its_own_clip(whole: str) -> None:
    text = spoil(whole, "cv.BOTTOMS", "innovation_clip = 0.4", "")
    assert parse_site(text, "site.toml").cv["BOTTOMS"].innovation_clip == 0.4
    text = spoil(text, "cv.BOTTOMS", '"logarithmic"', '"linear"')
    with pytest.raises(SiteFileError, match="meant for logarithms") as caught:
        parse_site(text, "site.toml")
    assert [finding.key for finding in caught.value.findings] == ["cv.BOTTOMS.innovation_clip"]


@pytest.mark.parametrize("key", ["tags", "mv", "cv", "dv"])
def test_an_empty_or_absent_list_of_names_is_refused(whole: str, key: str) -> None:
    raw = tomllib.loads(whole)
    values: list[object] = [{}, 3, None]
    for value in values:
        _, complaints = take_apart({**raw, key: value})
        assert [complaint.path for complaint in complaints] == [(key,)]
    del raw[key]
    _, complaints = take_apart(raw)
    assert [complaint.path for complaint in complaints] == [(key,)]


def test_the_number_of_components_is_said(whole: str) -> None:
    start = whole.index("[[column.component]]")
    end = whole.index("[column.wilson]")
    two = whole[start:end]
    for components in (two[: two.rindex("[[")], two + two[: two.rindex("[[")]):
        with pytest.raises(SiteFileError, match="at least 2 and at most 2") as caught:
            parse_site(whole[:start] + components + whole[end:], "site.toml")
        assert [finding.key for finding in caught.value.findings] == ["column.component"]


def test_an_advisory_collision_is_named_whatever_else_is_wrong(whole: str) -> None:
    text = spoil(whole, "advisory", "s=ADV.valid", "s=FIC-2103.SP")
    text = spoil(text, "advisory", 'nsu=urn:edgectl:sim:C-2101;s=ADV.cycle"', '"')
    text = spoil(text, "tags.REFLUX-SP", 'unit = "kg/h"', "unit = 3")
    with pytest.raises(SiteFileError) as caught:
        parse_site(text, "site.toml")
    keys = {finding.key for finding in caught.value.findings}
    assert keys == {"advisory.valid", "advisory.cycle", "tags.REFLUX-SP.unit"}


def test_a_tag_that_is_wrong_is_not_said_to_be_missing(whole: str) -> None:
    with pytest.raises(SiteFileError) as caught:
        parse_site(spoil(whole, "tags.FIC-2101", 'role = "feed_flow"', ""), "site.toml")
    assert [finding.key for finding in caught.value.findings] == ["tags.FIC-2101.role"]


def test_stale_limits_of_analysers_follow_their_cycle(whole: str) -> None:
    site = parse_site(whole, "site.toml")
    assert site.tags["AI-2115"].stale_limit_s == 2.5 * 360.0
    assert site.tags["FIC-2101"].stale_limit_s == 60.0
