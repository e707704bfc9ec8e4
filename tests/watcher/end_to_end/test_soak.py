"""Thousands of exports through the real program: its memory and its pace at the end are those of the beginning.

``SPIKEWARDEN_SOAK=20000`` sets how many; the default keeps the proof short.
"""

from __future__ import annotations

import os
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

EXPORTS = int(os.environ.get("SPIKEWARDEN_SOAK", "600"))
BATCHES = 20 if EXPORTS >= 20_000 else 6
#: For one batch; only a failing proof waits so long.
BATCH_DEADLINE_SECONDS = 1800.0


def _resident_kib(pid: int) -> int:
    status = Path(f"/proc/{pid}/status").read_text("ascii")
    return int(status.partition("VmRSS:")[2].split()[0])


def _handles(pid: int) -> int:
    return len(list(Path(f"/proc/{pid}/fd").iterdir()))


@pytest.mark.proof
@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="memory is read from /proc")
def test_memory_and_pace_stay_as_they_were(laboratory: Any, pause: Callable[[float], None]) -> None:
    """After many exports the service has the memory, the open files and the pace that it had after the first ones."""
    size = EXPORTS // BATCHES
    service = laboratory.start("watch")
    table: list[tuple[float, int, int]] = []
    for batch in range(BATCHES):
        begin = time.monotonic()
        for number in range(batch * size, (batch + 1) * size):
            laboratory.export(f"FL-{number:05d}.csv", *laboratory.additions(f"SED-{number}"))
        wanted = (batch + 1) * size
        while laboratory.status().get("counts", {}).get("done", 0) < wanted:
            assert service.poll() is None, "the service ended"
            assert time.monotonic() - begin < BATCH_DEADLINE_SECONDS
            pause(0.05)
        table.append((time.monotonic() - begin, _resident_kib(service.pid), _handles(service.pid)))
        print(
            f"{wanted:6d} exports: {table[-1][0]:7.1f} s for {size}, {table[-1][1]} KiB, {table[-1][2]} open",
            flush=True,
        )
    service.terminate()
    service.communicate(timeout=60)

    (first_seconds, first_memory, first_handles), (last_seconds, last_memory, last_handles) = table[0], table[-1]
    assert last_memory < 1.10 * first_memory
    assert last_handles <= first_handles + 2
    # the first batch starts the program and its worker, which a short proof would count
    assert last_seconds < 1.20 * max(first_seconds, 5.0)
