"""Messages between service and worker."""

from __future__ import annotations

import io
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from watcher.frames import LONGEST, FrameBroken, read_frame, write_frame

json_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False) | st.text(),
    lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
    max_leaves=5,
)
messages = st.dictionaries(st.text(), json_values, max_size=4)


@settings(max_examples=50)
@given(st.lists(messages, max_size=3))
def test_messages_arrive_as_they_were_sent(sent: list[dict[str, Any]]) -> None:
    """Any sequence of messages comes out whole and in order, then the end."""
    stream = io.BytesIO()
    for message in sent:
        write_frame(stream, message)
    stream.seek(0)

    assert [read_frame(stream) for _ in sent] == sent
    assert read_frame(stream) is None


@settings(max_examples=50)
@given(messages, st.data())
def test_a_message_that_is_cut_short_is_broken(message: dict[str, Any], data: st.DataObject) -> None:
    """A stream that ends inside a message is no end."""
    stream = io.BytesIO()
    write_frame(stream, message)
    whole = stream.getvalue()
    cut = data.draw(st.integers(1, len(whole) - 1))

    with pytest.raises(FrameBroken, match="ended after"):
        read_frame(io.BytesIO(whole[:cut]))


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ((LONGEST + 1).to_bytes(4, "big"), "was announced"),
        (b"\0\0\0\1x", "is no JSON"),
        (b"\0\0\0\2[]", "is no map: list"),
    ],
)
def test_what_is_no_message_is_broken(content: bytes, said: str) -> None:
    """Too long, no JSON, no map: each is named."""
    with pytest.raises(FrameBroken, match=said):
        read_frame(io.BytesIO(content))
