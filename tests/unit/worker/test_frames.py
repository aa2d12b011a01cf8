"""Frames: any split of the bytes gives the same frames, and anything else is refused."""

from __future__ import annotations

import struct
from itertools import pairwise
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from edgectl.records.encoding import EncodingError
from edgectl.worker.frames import (
    LIMIT_BYTES,
    Frame,
    FrameDecoder,
    FrameError,
    FrameKind,
    encode_frame,
)

leaves = st.none() | st.booleans() | st.floats(allow_nan=False, allow_infinity=False) | st.text()
payloads = (
    leaves
    | st.lists(leaves, max_size=3)
    | st.dictionaries(st.text(), st.integers() | st.lists(leaves, max_size=2), max_size=2)
)
frames = st.builds(Frame, st.sampled_from(FrameKind), payloads)

ONE = Frame(FrameKind.JOB, {"job": "steady"})


def feed_all(pieces: list[bytes]) -> list[Frame]:
    decoder = FrameDecoder()
    found = [frame for piece in pieces for frame in decoder.feed(piece)]
    decoder.finish()
    return found


@given(sent=st.lists(frames, max_size=4), cuts=st.lists(st.integers(0, 400), max_size=8))
def test_any_split_gives_the_same_frames(sent: list[Frame], cuts: list[int]) -> None:
    data = b"".join(encode_frame(frame) for frame in sent)
    edges = [0, *sorted(min(cut, len(data)) for cut in cuts), len(data)]
    pieces = [data[a:b] for a, b in pairwise(edges)]
    assert feed_all(pieces) == sent


@given(sent=st.lists(frames, min_size=1, max_size=3), lost=st.integers(1, 200))
def test_a_truncated_stream_is_refused(sent: list[Frame], lost: int) -> None:
    last = encode_frame(sent[-1])
    data = b"".join(map(encode_frame, sent[:-1])) + last[: -min(lost, len(last) - 1)]
    with pytest.raises(FrameError, match="ended"):
        feed_all([data])


@given(st.lists(st.binary(max_size=40), max_size=6))
def test_garbage_is_frames_or_the_one_error(pieces: list[bytes]) -> None:
    decoder = FrameDecoder()
    found: list[Any] = []
    try:
        for piece in pieces:
            found += decoder.feed(piece)
        decoder.finish()
    except FrameError:
        return
    # Whatever was taken for frames is what the same bytes say again.
    assert feed_all([b"".join(pieces)]) == found


@given(frame=frames, place=st.integers(0, 4), value=st.integers(0, 255))
def test_a_changed_header_gives_no_other_payload(frame: Frame, place: int, value: int) -> None:
    data = bytearray(encode_frame(frame))
    data[place] = value
    try:
        found = feed_all([bytes(data)])
    except FrameError:
        return
    assert [one.payload for one in found] == [frame.payload]


def test_the_bytes_of_a_frame() -> None:
    assert encode_frame(ONE) == b'\x00\x00\x00\x10j{"job":"steady"}'


def test_too_long_is_refused_on_both_sides() -> None:
    text = "x" * (LIMIT_BYTES - 2)
    (frame,) = FrameDecoder().feed(encode_frame(Frame(FrameKind.RESULT, text)))
    assert frame.payload == text
    with pytest.raises(FrameError, match="at most 8388608"):
        encode_frame(Frame(FrameKind.RESULT, text + "x"))
    with pytest.raises(FrameError, match="at most 8388608"):
        FrameDecoder().feed(struct.pack(">Ic", LIMIT_BYTES + 1, b"d"))


def test_an_unknown_kind_is_refused_before_its_payload_comes() -> None:
    with pytest.raises(FrameError, match=r"unknown kind of frame b'\?'"):
        FrameDecoder().feed(b"\x00\x10\x00\x00?")


@pytest.mark.parametrize("payload", [b"NaN", b"{", b"\xff", b'{"a":1,"a":2}', b""])
def test_a_payload_that_is_not_strict_json_is_refused(payload: bytes) -> None:
    with pytest.raises(FrameError, match="a PLAN frame: not JSON"):
        FrameDecoder().feed(struct.pack(">Ic", len(payload), b"p") + payload)


def test_after_an_error_nothing_is_believed() -> None:
    decoder = FrameDecoder()
    with pytest.raises(FrameError, match="unknown kind"):
        decoder.feed(encode_frame(ONE) + b"garbage")
    with pytest.raises(FrameError, match="unknown kind"):
        decoder.feed(encode_frame(ONE))


def test_nan_is_not_sent() -> None:
    with pytest.raises(EncodingError, match=r"^\$\.a: nan"):
        encode_frame(Frame(FrameKind.PLAN, {"a": float("nan")}))
