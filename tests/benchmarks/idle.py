"""The idle service: memory and processor time of the real `watch` process, with file events and with looking only.

Memory against a bare interpreter that waits for its input, processor time against one that waits in a loop of 100 ms,
over the same seconds; memory is in MB of 10⁶ bytes. Three services run side by side: as it is,
with its worker still there; with the worker retired (its idle time shortened from minutes to 1 s, nothing else
changed); and the same without file events. Looking through 10,000 files each second is measured against the library's
own polling observer on the same folder.
"""

from __future__ import annotations

import shutil
import socket
import subprocess
import sys
import time
from dataclasses import dataclass
from functools import partial
from threading import Event
from typing import TYPE_CHECKING

import laboratory
from process import children, cpu_seconds, memory_mb, start, wait_until
from table import Figure
from watchdog.events import FileSystemEventHandler
from watchdog.observers.polling import PollingObserver

from watcher.folder import Folder

if TYPE_CHECKING:
    from pathlib import Path

WINDOW_SECONDS = 45.0
FILES = 10_000
LOOKS = 8
START_SECONDS = 60.0
BARE = (sys.executable, "-c", "import sys; sys.stdin.read()")
LOOPING = (sys.executable, "-c", "import threading\nwake = threading.Event()\nwhile True: wake.wait(0.1)")
WATCH = (sys.executable, "-m", "watcher", "watch", "--config")
#: The same command with a worker that is retired after a second.
WATCH_RETIRING = (
    sys.executable,
    "-c",
    (
        "import functools, watcher.opening as o; o.Worker = functools.partial(o.Worker, idle_seconds=1.0); "
        "from watcher.commands import main; main()"
    ),
    "watch",
    "--config",
)


@dataclass(frozen=True, slots=True)
class Idle:
    """Memory in MB and percent of one core over the window."""

    memory_mb: float
    percent: float


def measure(folder: Path) -> list[Figure]:
    """Measure on laboratories in this folder."""
    idle, worker = _services(folder)
    bare, loop = idle["bare"], idle["looping"]
    figures = []
    for name, words in (
        ("events, retired", "idle service, events, worker retired"),
        ("events", "idle service, events, worker still there"),
        ("no events, retired", "idle service, looking each 10 s, worker retired"),
    ):
        mb, percent = idle[name].memory_mb, idle[name].percent
        judged = name != "no events, retired"
        figures += [
            Figure(f"{words}: RSS", mb, "MB", bare.memory_mb, "bare Python", "≤ 40 MB", mb <= 40),
            Figure(f"{words}: CPU", percent, "%", loop.percent, "Python waking each 100 ms",
                   "≤ 0.02 %" if judged else "", percent <= 0.02 if judged else None),
        ]  # fmt: skip
    figures.append(Figure("  its worker: RSS", worker.memory_mb, "MB", bare.memory_mb, "bare Python"))
    figures.append(Figure("  its worker: CPU", worker.percent, "%", loop.percent, "Python waking each 100 ms"))
    return figures + _looking(folder / "many")


def free_port() -> int:
    """Return a port that nobody uses now."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


def _services(folder: Path) -> tuple[dict[str, Idle], Idle]:
    """Run the baselines and the three services side by side; return them by name, and the one worker left."""
    processes = {"bare": subprocess.Popen(BARE, stdin=subprocess.PIPE), "looping": subprocess.Popen(LOOPING)}
    try:
        for name in ("events", "events, retired", "no events, retired"):
            home = folder / name.replace(", ", "-").replace(" ", "-")
            config = laboratory.set_up(home, events=not name.startswith("no"))
            (home / "exports" / "FL-0001.csv").write_bytes(laboratory.flame(1, failing=False))
            command = (*(WATCH_RETIRING if "retired" in name else WATCH), str(config))
            service = processes[name] = start(command, home / "errors")
            waiting = partial(wait_until, deadline_seconds=START_SECONDS, service=service, errors=home / "errors")
            waiting(lambda home=home: any(home.glob("results/*/*.json")), what=f"results in {home}")
            if "retired" in name:
                waiting(lambda service=service: not children(service.pid), what="the worker to retire")
        pids = {name: process.pid for name, process in processes.items()}
        pids["worker"] = children(pids["events"])[0]
        idle = _over_the_window(pids)
        return idle, idle.pop("worker")
    finally:
        for process in processes.values():
            process.terminate()
        for process in processes.values():
            if process.stdin is not None:
                process.stdin.close()
            process.wait(30)


def _over_the_window(pids: dict[str, int]) -> dict[str, Idle]:
    Event().wait(2.0)  # whatever the start left to do
    before, began = {name: cpu_seconds(pid) for name, pid in pids.items()}, time.monotonic()
    Event().wait(WINDOW_SECONDS)
    window = time.monotonic() - began
    return {name: Idle(memory_mb(pid), (cpu_seconds(pid) - before[name]) / window * 100) for name, pid in pids.items()}


def _looking(root: Path) -> list[Figure]:
    """Processor time of our look at 10,000 known files, and of the library's observer, each second."""
    root.mkdir()
    for number in range(FILES):
        (root / f"FL-{number:05d}.csv").touch()
    folder = Folder(root, settle_seconds=0.0)
    folder.look(0.0)
    for candidate in folder.look(1.0).settled:
        folder.taken(candidate)
    before = time.process_time()
    for second in range(LOOKS):
        folder.look(2.0 + second)
    ours = (time.process_time() - before) / LOOKS * 100
    observer = PollingObserver(timeout=1.0)
    observer.schedule(FileSystemEventHandler(), str(root))
    observer.start()
    Event().wait(1.5)
    before, began = time.process_time(), time.monotonic()
    Event().wait(float(LOOKS))
    theirs = (time.process_time() - before) / (time.monotonic() - began) * 100
    observer.stop()
    observer.join(10)
    shutil.rmtree(root)
    return [
        Figure(
            f"looking through {FILES:,} files each second: CPU", ours, "%", theirs, "the library's polling observer",
            "≤ 4 % and ≤ 0.4 ×", ours <= 4 and ours <= 0.4 * theirs,
        )
    ]  # fmt: skip
