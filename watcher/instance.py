"""One service to a records folder: a lock of the operating system, which frees itself when its holder is killed.

A file beside the lock names the holder, for people; only the lock decides. It holds on a local disk; two computers
that share one records folder are not protected from each other.
"""

from __future__ import annotations

import json
import os
import socket
from dataclasses import dataclass
from typing import TYPE_CHECKING, Self

from filelock import FileLock, Timeout

from watcher.clock import SystemClock, stamp
from watcher.errors import WatcherError

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.clock import Clock


@dataclass(eq=False)
class InstanceHeld(WatcherError):
    """Another process works with this records folder.

    Attributes
    ----------
    records
        The folder.
    holder
        Who holds it, in words.
    """

    records: Path
    holder: str

    def __str__(self) -> str:
        return (
            f"Records folder {self.records} is in use by {self.holder}. This program changed nothing and ends. "
            "Stop that one first, or use `status` to see what it does."
        )


class Instance:
    """The hold on a records folder; use it as a context manager.

    Parameters
    ----------
    records
        The folder; made if it is not there.
    clock
        For the time in the holder's file.
    """

    def __init__(self, records: Path, clock: Clock | None = None) -> None:
        self._records = records
        self._clock = clock or SystemClock()
        self._holder = records / "holder.json"
        records.mkdir(parents=True, exist_ok=True)
        # A soft lock (a mere file) would outlive a killed holder, so it is never fallen back to.
        # One second: somebody may be looking at this very moment whether the lock is held.
        self._lock = FileLock(records / "lock", timeout=1, fallback_to_soft=False)

    def __enter__(self) -> Self:
        self.take()
        return self

    def __exit__(self, *_: object) -> None:
        self.release()

    def take(self) -> None:
        """Take the hold.

        Raises
        ------
        InstanceHeld
            Another process has it.
        """
        try:
            self._lock.acquire()
        except Timeout as error:
            raise InstanceHeld(self._records, self._describe_holder()) from error
        facts = {"pid": os.getpid(), "host": socket.gethostname(), "since": stamp(self._clock.now())}
        self._holder.write_text(json.dumps(facts), "utf-8")

    def release(self) -> None:
        """Give the hold back."""
        if self._lock.is_locked:
            self._holder.unlink(missing_ok=True)
            self._lock.release()

    def _describe_holder(self) -> str:
        try:
            facts = json.loads(self._holder.read_text("utf-8"))
            return f"process {facts['pid']} on {facts['host']} since {facts['since']}"
        except (OSError, ValueError, KeyError, TypeError):
            return "another process (it left no name)"


def is_held(records: Path) -> bool:
    """Tell whether a process works with this records folder now."""
    if not (records / "lock").exists():
        return False
    lock = FileLock(records / "lock", timeout=0, fallback_to_soft=False)
    try:
        lock.acquire()
    except Timeout:
        return True
    lock.release()
    return False
