"""Word to the service manager of the operating system: ready, alive, stopping.

The protocol is a datagram to the socket named by ``NOTIFY_SOCKET`` (sd_notify(3)). Where there is none, nothing is
said. That the service is alive is only said when it has looked and mailed since it last said so: a thread that said
it by itself would hide that the others hang.
"""

from __future__ import annotations

import contextlib
import os
import socket
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from watcher.clock import Clock


class Manager:
    """The way to the service manager.

    Parameters
    ----------
    clock
        For intervals.
    """

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._address = os.environ.get("NOTIFY_SOCKET", "")
        microseconds = os.environ.get("WATCHDOG_USEC", "")
        #: Half of what the manager allows, as its documentation advises; None where it does not watch.
        self.interval_seconds = int(microseconds) / 2e6 if microseconds.isdigit() and self._address else None
        self._said_at = clock.monotonic()
        self._said_for = (0, 0)

    def ready(self) -> None:
        """Settings, ledger and the first look are done."""
        self._say("READY=1")

    def stopping(self) -> None:
        """The service ends."""
        self._say("STOPPING=1")

    def due(self) -> bool:
        """Tell whether it is time to say that the service is alive."""
        return (
            self.interval_seconds is not None and self._clock.monotonic() - self._said_at >= self.interval_seconds / 2
        )

    def alive(self, looks: int, mailings: int) -> bool:
        """Say that the service is alive, if it has looked and mailed since it last said so; returns whether it did."""
        if not self.due() or looks <= self._said_for[0] or mailings <= self._said_for[1]:
            return False
        self._said_at, self._said_for = self._clock.monotonic(), (looks, mailings)
        self._say("WATCHDOG=1")
        return True

    def _say(self, word: str) -> None:
        if not self._address:
            return
        address = "\0" + self._address[1:] if self._address.startswith("@") else self._address
        with contextlib.suppress(OSError), socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as line:
            line.sendto(word.encode(), address)
