"""Messages between the service and its worker: JSON, with its length in front.

Four bytes, most significant first, give the number of bytes that follow. Nothing else ever travels between the two.
"""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any, BinaryIO

if TYPE_CHECKING:
    from collections.abc import Mapping

#: A message longer than this is a fault of the sender; results travel as files.
LONGEST = 256 * 1024 * 1024


class FrameBroken(Exception):
    """What came is no message; the other side cannot be understood any more."""


def write_frame(stream: BinaryIO, message: Mapping[str, Any]) -> None:
    """Send one message."""
    body = json.dumps(message, allow_nan=False).encode()
    stream.write(len(body).to_bytes(4, "big") + body)
    stream.flush()


def read_frame(stream: BinaryIO) -> dict[str, Any] | None:
    """Receive one message; None where the other side has closed.

    Raises
    ------
    FrameBroken
        The message is cut short, too long, or no JSON map.
    """
    head = stream.read(4)
    if not head:
        return None
    length = int.from_bytes(head, "big")
    if length > LONGEST:
        raise FrameBroken(f"a message of {length} bytes was announced, at most {LONGEST} are read")
    body = stream.read(length)
    if len(head) < 4 or len(body) < length:
        raise FrameBroken(f"a message of {length} bytes ended after {len(body)}")
    try:
        message = json.loads(body)
    except ValueError as error:
        raise FrameBroken(f"a message is no JSON: {error}") from error
    if not isinstance(message, dict):
        raise FrameBroken(f"a message is no map: {type(message).__name__}")
    return message
