"""Frames on a stream: two lengths, a JSON object, raw bytes.  The bytes spare a document its second encoding."""

from __future__ import annotations

import json
import struct
from collections.abc import Iterator, Mapping
from typing import Any

_LENGTHS = struct.Struct("!II")
_MOST = 2**29  # a longer part means that the stream is broken

Frame = tuple[dict[str, Any], bytes]


class FrameError(Exception):
    """What arrives is no frame."""


def pack(head: Mapping[str, Any], body: bytes = b"") -> bytes:
    """One frame as bytes.  ValueError for NaN and infinities, which JSON does not have."""
    text = json.dumps(head, allow_nan=False, separators=(",", ":")).encode()
    return _LENGTHS.pack(len(text), len(body)) + text + body


class Unpacker:
    """Cuts a stream into frames, however the pieces arrive."""

    def __init__(self) -> None:
        self._waiting = bytearray()

    def feed(self, piece: bytes) -> Iterator[Frame]:
        """Take the next bytes; yield the frames that they complete."""
        self._waiting += piece
        while len(self._waiting) >= _LENGTHS.size:
            head, body = _LENGTHS.unpack_from(self._waiting)
            if head > _MOST or body > _MOST:
                raise FrameError(f"a frame of {head} + {body} bytes")
            middle = _LENGTHS.size + head
            end = middle + body
            if len(self._waiting) < end:
                return
            frame = json.loads(self._waiting[_LENGTHS.size : middle]), bytes(self._waiting[middle:end])
            del self._waiting[:end]
            yield frame
