"""What the system says of a process: memory and processor time, from /proc and the process's own clock. Linux only."""

from __future__ import annotations

import contextlib
import subprocess
import time
from pathlib import Path
from threading import Event
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence


def memory_mb(pid: int, what: str = "VmRSS") -> float:
    """Return resident memory now (``VmRSS``) or at its highest (``VmHWM``), in MB of 10⁶ bytes."""
    for line in Path(f"/proc/{pid}/status").read_text().splitlines():
        if line.startswith(what + ":"):
            return int(line.split()[1]) * 1024 / 1e6
    raise ProcessLookupError(f"process {pid} has no {what}: it has ended, and nothing can be measured")


def cpu_seconds(pid: int) -> float:
    """Return the processor time of a process and its threads.

    The ticks of /proc/PID/stat (10 ms) are too coarse for an idle process; the system's clock of the process is in ns.
    """
    # clock_getcpuclockid(3) of Linux: the complement of the id, shifted past the kind of clock; 2 is the exact one.
    return time.clock_gettime((~pid << 3) | 2)


def children(pid: int) -> list[int]:
    """Return the direct children of a process."""
    found = []
    for task in Path(f"/proc/{pid}/task").iterdir():
        with contextlib.suppress(OSError):  # the thread ended since it was listed
            found += [int(child) for child in (task / "children").read_text().split()]
    return found


def start(command: Sequence[str], errors: Path) -> subprocess.Popen[bytes]:
    """Start a process whose standard error goes into a file, so that its end can be explained."""
    with errors.open("wb") as stream:
        return subprocess.Popen(command, stderr=stream)


def wait_until(
    condition: Callable[[], bool], deadline_seconds: float, what: str, service: subprocess.Popen[bytes], errors: Path
) -> None:
    """Wait for something that a process does.

    Raises
    ------
    ChildProcessError
        The process ended before.
    TimeoutError
        It did not come true.
    """
    until = time.monotonic() + deadline_seconds
    pause = Event()
    while not condition():
        if (code := service.poll()) is not None:
            said = errors.read_text(errors="replace")[-2000:]
            raise ChildProcessError(f"waiting for {what}, but the service ended with {code} and said: {said}")
        if time.monotonic() > until:
            raise TimeoutError(f"waited {deadline_seconds:g} s for {what}, in vain; the figure cannot be measured")
        pause.wait(0.05)
