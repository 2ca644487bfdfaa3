"""Frames arrive whole, in order and unchanged, however the stream is cut."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.engine.frames import FrameError, Unpacker, pack

VALUES = st.none() | st.integers() | st.text() | st.floats(allow_nan=False, allow_infinity=False)
HEADS = st.dictionaries(st.text(max_size=5), VALUES)


@settings(max_examples=50, deadline=None)
@given(st.lists(st.tuples(HEADS, st.binary(max_size=40)), max_size=5), st.integers(1, 50))
def test_any_cut_of_the_stream_gives_the_same_frames(frames, size):
    stream = b"".join(pack(head, body) for head, body in frames)
    unpacker = Unpacker()
    found = [frame for at in range(0, len(stream), size) for frame in unpacker.feed(stream[at : at + size])]
    assert found == frames


def test_what_json_does_not_have_is_refused_by_the_sender():
    with pytest.raises(ValueError, match="not JSON compliant"):
        pack({"value": float("nan")})


def test_a_stream_of_something_else_is_noticed():
    with pytest.raises(FrameError, match="a frame of 2021161080"):
        list(Unpacker().feed(b"xxxxxxxxxxxx"))
