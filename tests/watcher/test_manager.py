"""Word to the service manager: said over its socket, and only where looking and mailing both advanced."""

from __future__ import annotations

import socket
from typing import TYPE_CHECKING, Any

import pytest

from watcher.manager import Manager

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path


@pytest.fixture
def heard(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[socket.socket]:
    """The manager's end of the line, which watches with a limit of 20 s."""
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as line:
        line.bind(str(tmp_path / "notify"))
        line.settimeout(5)
        monkeypatch.setenv("NOTIFY_SOCKET", str(tmp_path / "notify"))
        monkeypatch.setenv("WATCHDOG_USEC", "20000000")
        yield line


def test_ready_and_stopping_are_said(heard: socket.socket, clock: Any) -> None:
    """The words arrive as the protocol writes them."""
    manager = Manager(clock)
    manager.ready()
    manager.stopping()
    assert [heard.recv(100), heard.recv(100)] == [b"READY=1", b"STOPPING=1"]


@pytest.mark.parametrize(("looks", "mailings", "said"), [(1, 1, True), (1, 0, False), (0, 1, False), (0, 0, False)])
def test_alive_needs_both(heard: socket.socket, clock: Any, looks: int, mailings: int, *, said: bool) -> None:
    """A service that looks and does not mail, or the other way round, is not called alive."""
    manager = Manager(clock)
    assert not manager.alive(5, 5)  # too early
    clock.advance(6)
    assert manager.alive(5, 5)
    assert heard.recv(100) == b"WATCHDOG=1"
    clock.advance(6)

    assert manager.alive(5 + looks, 5 + mailings) is said


def test_without_a_manager_nothing_is_said(clock: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """Outside a service manager every word is a silent nothing."""
    monkeypatch.delenv("NOTIFY_SOCKET", raising=False)
    manager = Manager(clock)
    manager.ready()
    assert not manager.due()
    assert manager.interval_seconds is None


def test_the_service_says_ready_and_alive(heard: socket.socket, bench: Any) -> None:
    """The real service says that it is ready, then again and again that it is alive, and that it stops."""
    bench.environment |= {"WATCHDOG_USEC": "400000"}
    process = bench.start()
    heard.settimeout(20)
    said = [heard.recv(100) for _ in range(4)]
    bench.stop(process)
    while said[-1] != b"STOPPING=1":
        said.append(heard.recv(100))

    assert said[0] == b"READY=1"
    assert set(said[1:-1]) == {b"WATCHDOG=1"}
