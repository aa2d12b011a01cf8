"""The wire between the loop and the worker: frames with a length, a kind and JSON.

    4 bytes   length of the payload, big-endian, at most LIMIT_BYTES
    1 byte    kind, a letter
    n bytes   payload: strict JSON in UTF-8 (no NaN, no pickle)

Sans I/O: bytes in, frames out. Whoever sends anything else is not believed any
more: after a FrameError a decoder takes no further bytes.
"""

from __future__ import annotations

import struct
from dataclasses import dataclass
from enum import Enum
from typing import Final

from edgectl.records.encoding import EncodingError, canonical, parse
from edgectl.records.entries import Json

LIMIT_BYTES: Final = 8 * 2**20

_HEADER: Final = struct.Struct(">Ic")


class FrameError(ValueError):
    """These bytes are not a frame, or not all of one."""


class FrameKind(Enum):
    """What a frame is about; the value is its letter on the wire."""

    SETUP = b"s"
    """To the worker, first: which brain, which site."""
    READY = b"r"
    """From the worker: built, and solved once."""
    REQUEST = b"q"
    PLAN = b"p"
    NO_PLAN = b"n"
    JOB = b"j"
    RESULT = b"d"
    REFUSED = b"x"
    """The job cannot be done; the payload says why."""


_KINDS: Final = {kind.value: kind for kind in FrameKind}


@dataclass(frozen=True, slots=True)
class Frame:
    kind: FrameKind
    payload: Json


def encode_frame(frame: Frame, limit: int = LIMIT_BYTES) -> bytes:
    """The bytes of one frame. Raises FrameError (too long) or EncodingError (not JSON)."""
    payload = canonical(frame.payload)
    if len(payload) > limit:
        raise FrameError(f"a payload of {len(payload)} bytes; at most {limit} are allowed")
    return _HEADER.pack(len(payload), frame.kind.value) + payload


class FrameDecoder:
    """Bytes in, in pieces of any size; whole frames out."""

    def __init__(self, limit: int = LIMIT_BYTES) -> None:
        self._limit = limit
        self._buffer = bytearray()
        self._fault: str | None = None

    def feed(self, data: bytes) -> list[Frame]:
        """The frames that these bytes complete.

        Raises
        ------
        FrameError
            A length above the limit, an unknown kind or a payload that is not
            JSON, now or in an earlier call. Frames before it are lost too: they
            come from somebody who lost the thread.
        """
        if self._fault is not None:
            raise FrameError(self._fault)
        self._buffer += data
        frames = []
        try:
            while (frame := self._next()) is not None:
                frames.append(frame)
        except FrameError as error:
            self._fault = str(error)
            self._buffer.clear()
            raise
        return frames

    def finish(self) -> None:
        """No more bytes will come. Raises FrameError in the middle of a frame."""
        if self._buffer:
            raise FrameError(f"the stream ended {len(self._buffer)} bytes into a frame")

    def _next(self) -> Frame | None:
        if len(self._buffer) < _HEADER.size:
            return None
        length, letter = _HEADER.unpack_from(self._buffer)
        # Before the payload is there: nobody waits for, or stores, what will be refused.
        if letter not in _KINDS:
            raise FrameError(f"unknown kind of frame {letter!r}")
        if length > self._limit:
            raise FrameError(f"a frame of {length} bytes; at most {self._limit} are allowed")
        end = _HEADER.size + length
        if len(self._buffer) < end:
            return None
        payload = bytes(self._buffer[_HEADER.size : end])
        del self._buffer[:end]
        try:
            return Frame(_KINDS[letter], parse(payload))
        except EncodingError as error:
            raise FrameError(f"a {_KINDS[letter].name} frame: {error}") from error
