"""A backlog of 500 exports through the real service, a process of its own, with a mail server in this one.

One export in ten has a failing sample. Exports a second against the fsynced writes that they cost alone, measured
before and after, since beside them they would disturb what is measured; the last hundred against the first hundred, in
time and in memory. Times are those that the ledger recorded.
"""

from __future__ import annotations

import sqlite3
import sys
from datetime import datetime
from typing import TYPE_CHECKING

import laboratory
from aiosmtpd.controller import Controller
from idle import free_port
from one_export import fsynced_writes
from process import children, memory_mb, start, wait_until
from table import Figure
from timing import in_turn

if TYPE_CHECKING:
    from pathlib import Path

EXPORTS = 500
PART = 100
#: Until the mail is queued and with delivery of both files; `single_export` counts them.
FSYNCS = 13
DEADLINE_SECONDS = 300.0


class _Letterbox:
    """Takes every mail and keeps their number."""

    def __init__(self) -> None:
        self.mails = 0

    async def handle_DATA(self, *_: object) -> str:  # noqa: N802
        """Take a mail; the name is the library's."""
        self.mails += 1
        return "250 kept"


def measure(folder: Path) -> list[Figure]:
    """Measure on a laboratory in this folder."""
    port, letterbox = free_port(), _Letterbox()
    config = laboratory.set_up(folder, mail_port=port, settle="1 s", scan="2 s")
    for number in range(EXPORTS):
        content = laboratory.flame(number, failing=number % 10 == 0)
        (folder / "exports" / f"FL-{number:04d}.csv").write_bytes(content)
    before = _writes(folder)
    mail_server = Controller(letterbox, hostname="127.0.0.1", port=port)
    mail_server.start()
    try:
        memory = _work(config, folder / "results", letterbox)
    finally:
        mail_server.stop()
    after = _writes(folder)
    return _figures(_times(folder / "records" / "ledger.sqlite"), (before + after) / 2, memory)


def _writes(folder: Path) -> float:
    """Return the median seconds of the fsynced writes that one export costs."""
    return in_turn(20, lambda: fsynced_writes(folder, FSYNCS))[0]


def _work(config: Path, results: Path, letterbox: _Letterbox) -> dict[str, float]:
    """Let the service work the backlog off; return its memory and the worker's after the first part and at the end."""
    command = [sys.executable, "-m", "watcher", "watch", "--config", str(config)]
    errors = config.with_name("errors")
    service = start(command, errors)
    try:
        wait_until(lambda: _delivered(results) >= PART, DEADLINE_SECONDS, f"results of {PART} exports", service, errors)
        early = memory_mb(service.pid), memory_mb(children(service.pid)[0])
        wait_until(
            lambda: _delivered(results) >= EXPORTS and letterbox.mails >= EXPORTS // 10,
            DEADLINE_SECONDS,
            f"results of {EXPORTS} exports and {EXPORTS // 10} mails",
            service,
            errors,
        )
        late = memory_mb(service.pid), memory_mb(children(service.pid)[0])
    finally:
        service.terminate()
        service.wait(30)
    return {"service early": early[0], "worker early": early[1], "service late": late[0], "worker late": late[1]}


def _delivered(results: Path) -> int:
    return sum(1 for _ in results.glob("*/*.json"))


def _times(ledger: Path) -> dict[str, list[float]]:
    """Return the seconds at which exports were accepted and finished, and files and mails delivered, each in order."""
    connection = sqlite3.connect(ledger)
    kinds = {"accepted": "accept", "finished": "done", "delivered": "file delivered", "mailed": "mail"}
    try:
        return {
            name: [
                datetime.fromisoformat(at).timestamp()
                for (at,) in connection.execute("SELECT at FROM entries WHERE kind = ? ORDER BY number", (kind,))
            ]
            for name, kind in kinds.items()
        }
    finally:
        connection.close()


def _figures(times: dict[str, list[float]], writes: float, memory: dict[str, float]) -> list[Figure]:
    accepted, finished = times["accepted"], times["finished"]
    if len(finished) != EXPORTS:
        raise RuntimeError(f"expected {EXPORTS} exports with results in the ledger, got {len(finished)}")
    each = (max(times["delivered"][-1], finished[-1]) - accepted[0]) / EXPORTS
    first, last = finished[PART - 1] - finished[0], finished[-1] - finished[-PART]
    accepting = [part[-1] - part[0] for part in (accepted[:PART], accepted[-PART:])]
    scale = 1e3 / (PART - 1)
    return [
        Figure(
            f"backlog of {EXPORTS}: exports", 1 / each, "1/s", 1 / writes, f"{FSYNCS} fsynced writes each", "≥ 60 /s",
            1 / each >= 60,
        ),
        Figure(
            f"  last {PART} evaluated, each", last * scale, "ms", first * scale, f"first {PART}", "constant (± 20 %)",
            0.8 <= last / first <= 1.2,
        ),
        Figure(f"  last {PART} accepted, each", accepting[1] * scale, "ms", accepting[0] * scale, f"first {PART}"),
        Figure("  first result after the first acceptance", finished[0] - accepted[0], "s"),
        Figure("  first mail after the first acceptance", times["mailed"][0] - accepted[0], "s"),
        Figure("  memory of the service at the end", memory["service late"], "MB", memory["service early"],
               f"after {PART}", "flat (≤ 1.1 ×)", memory["service late"] <= 1.1 * memory["service early"]),
        Figure("  memory of the worker at the end", memory["worker late"], "MB", memory["worker early"],
               f"after {PART}", "flat (≤ 1.1 ×)", memory["worker late"] <= 1.1 * memory["worker early"]),
    ]  # fmt: skip
