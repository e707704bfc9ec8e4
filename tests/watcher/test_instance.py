"""One service to a records folder."""

from __future__ import annotations

import os
import socket
from typing import TYPE_CHECKING, Any

import pytest

from watcher.instance import Instance, InstanceHeld, is_held

if TYPE_CHECKING:
    from pathlib import Path


def test_a_second_hold_is_refused_and_names_the_first(tmp_path: Path, clock: Any) -> None:
    """The error names process, computer and time; the first one keeps its hold."""
    with Instance(tmp_path, clock):
        with pytest.raises(
            InstanceHeld,
            match=f"in use by process {os.getpid()} on {socket.gethostname()} since 2026-12-01T07:30:00.000000Z",
        ):
            Instance(tmp_path).take()
        assert is_held(tmp_path)

    assert not is_held(tmp_path)
    with Instance(tmp_path):
        assert is_held(tmp_path)


def test_a_holder_without_a_name_still_holds(tmp_path: Path) -> None:
    """The lock decides, not the file beside it."""
    with Instance(tmp_path):
        (tmp_path / "holder.json").write_text("{")
        with pytest.raises(InstanceHeld, match="another process"):
            Instance(tmp_path).take()


def test_a_file_left_by_a_killed_holder_does_not_hold(tmp_path: Path) -> None:
    """A name without a lock behind it is no hold."""
    (tmp_path / "holder.json").write_text('{"pid": 1, "host": "x", "since": "y"}')

    assert not is_held(tmp_path)
    with Instance(tmp_path):
        assert is_held(tmp_path)
