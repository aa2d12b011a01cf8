"""Scales, ticks and escaping."""

from __future__ import annotations

import math
from itertools import pairwise
from xml.etree import ElementTree

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.console.svg import (
    Drawing,
    Scale,
    escaped,
    log_ticks,
    number_words,
    thinned,
    ticks,
    time_ticks,
)


def test_a_scale_draws_its_ends_at_its_ends_and_nothing_beyond() -> None:
    scale = Scale(10.0, 20.0, 100.0, 0.0)
    assert [scale(v) for v in (10.0, 15.0, 20.0, 99.0, -5.0)] == [100.0, 50.0, 0.0, 0.0, 100.0]


def test_a_logarithmic_scale_halves_a_decade_at_its_root() -> None:
    assert Scale(10.0, 1000.0, 0.0, 1.0, logarithmic=True)(100.0) == pytest.approx(0.5)


def test_a_scale_without_width_stays_in_the_middle() -> None:
    assert Scale(5.0, 5.0, 0.0, 10.0)(5.0) == 5.0


@given(st.floats(-1e9, 1e9), st.floats(1e-6, 1e9), st.integers(1, 12))
def test_ticks_are_inside_few_and_evenly_spaced(low: float, span: float, most: int) -> None:
    high = low + span
    found = ticks(low, high, most)
    assert len(found) <= most + 2
    slack = 1e-6 * max(abs(low), abs(high), span)
    assert all(low - slack <= tick <= high + slack for tick in found)
    gaps = [b - a for a, b in pairwise(found)]
    assert all(gap == pytest.approx(gaps[0], rel=1e-3, abs=slack) for gap in gaps)


def test_logarithmic_ticks() -> None:
    assert log_ticks(90.0, 600.0) == [100.0, 200.0, 500.0]
    assert len(log_ticks(1e-6, 1e3)) == 10


def test_a_narrow_logarithmic_scale_has_linear_ticks() -> None:
    assert len(Scale(0.21, 0.52, 0.0, 1.0, logarithmic=True).ticks()) >= 3


@pytest.mark.parametrize("hours", [0.1, 1.0, 4.0, 24.0, 24.0 * 40])
def test_time_ticks_are_round_and_few(hours: float) -> None:
    found = time_ticks(1_767_592_817.0, 1_767_592_817.0 + 3600 * hours)
    assert 1 <= len(found) <= 10
    assert all(tick % 60 == 0 for tick in found)


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (8123.4, "8,123"),
        (101.25, "101.2"),
        (6.997, "7"),
        (0.3347, "0.335"),
        (0.0004, "0.0004"),
        (0.0, "0"),
        (-12.0, "-12"),
        (math.nan, "-"),
    ],
)
def test_numbers_as_people_read_them(value: float, words: str) -> None:
    assert number_words(value) == words


def test_hostile_text_cannot_leave_its_element() -> None:
    drawing = Drawing(10, 10, '</title><script>"')
    drawing.text(1, 1, "<b onload='x'>&\x00\x1b[31m", class_='"><script>')
    drawing.rectangle(0, 0, 1, 1, "a", hint="</title><script>alert(1)</script>")
    text = str(drawing)
    assert "<script" not in text
    assert "\x1b" not in text
    root = ElementTree.fromstring(text)
    assert [child.tag for child in root] == ["title", "text", "rect"]


def test_escaped_keeps_plain_words() -> None:
    assert escaped("22 °C, 5 % & more") == "22 °C, 5 % &amp; more"


def test_a_path_has_a_gap_where_a_value_is_missing() -> None:
    drawing = Drawing(10, 10, "t")
    drawing.path([(0, 1), (1, 1), (2, math.nan), (3, 1)], "c")
    assert str(drawing).count("M") == 2


def test_thinning_keeps_extremes_and_order() -> None:
    points = [(float(i), 0.0) for i in range(10_000)]
    points[1234] = (1234.0, 99.0)
    points[7001] = (7001.0, -99.0)
    kept = thinned(points, 1000)
    assert len(kept) <= 1000
    assert (1234.0, 99.0) in kept
    assert (7001.0, -99.0) in kept
    assert kept == sorted(kept)
