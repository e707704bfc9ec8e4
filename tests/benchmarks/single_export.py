"""A flame export of 60 rows, from settled to results and mail: warm worker, cold worker, and the fsyncs it costs.

Against the same number of fsynced 4 kB writes in the same folder, in turn with the exports; the cold worker against a
bare interpreter that imports pandas and scipy.special.
"""

from __future__ import annotations

import subprocess
import sys
from statistics import median
from typing import TYPE_CHECKING

import laboratory
from one_export import Journey, accept, counted_fsyncs, deliver, evaluate, fsynced_writes, land, travel
from table import Figure
from timing import percentile, seconds

from watcher.evaluation import Worker
from watcher.opening import open_laboratory

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.opening import Laboratory

EXPORTS = 60
COLD_STARTS = 5
#: Port at which nobody listens: no thread delivers mails here, they stay queued.
NO_MAIL_SERVER = 9


def measure(folder: Path) -> list[Figure]:
    """Measure on a laboratory in this folder."""
    config = laboratory.set_up(folder, mail_port=NO_MAIL_SERVER)
    with open_laboratory(config, "benchmark") as opened, opened.service._open():
        before_queue, whole = _fsyncs(opened, folder)
        journeys, baselines = [], []
        for number in range(1, EXPORTS + 1):
            journeys.append(_travel(opened, folder, number))
            baselines.append(seconds(lambda: fsynced_writes(folder, before_queue)))
        mails = len(opened.ledger.outgoing.undelivered_mails())
        if mails < EXPORTS:
            raise RuntimeError(f"expected a mail queued for each of {EXPORTS} exports, got {mails}")
        cold, bare = _cold(opened, folder)
    warm = [journey.queued * 1e3 for journey in journeys]
    writes = median(baselines) * 1e3
    against = f"{before_queue} fsynced 4 kB writes"
    p50, p95 = percentile(warm, 50), percentile(warm, 95)
    extra = cold * 1e3 - p50
    delivering = median(journey.delivered - journey.queued for journey in journeys) * 1e3
    more = whole - before_queue
    accepting = median(journey.accepted for journey in journeys) * 1e3
    working = median(journey.queued - journey.accepted for journey in journeys) * 1e3
    return [
        Figure("60 rows, warm: settled → staged, mail queued, p50", p50, "ms", writes, against, "≤ 50 ms", p50 <= 50),
        Figure("  the same, p95", p95, "ms", percentile(baselines, 95) * 1e3, against),
        Figure("  of it copy and accept", accepting, "ms", writes, against),
        Figure("  of it worker and finish", working, "ms", writes, against),
        Figure(
            "  then delivery of both files", delivering, "ms", writes / before_queue * more, f"{more} of these writes"
        ),
        Figure("  fsyncs before the mail is queued", before_queue, "", target="≤ 8", met=before_queue <= 8),
        Figure("  fsyncs with delivery", whole, ""),
        Figure(
            "first export, cold worker: extra time", extra, "ms", bare * 1e3, "python importing pandas, scipy.special",
            "≤ 800 ms", extra <= 800,
        ),
    ]  # fmt: skip


def _travel(opened: Laboratory, folder: Path, number: int) -> Journey:
    return travel(opened, folder / "exports" / f"FL-{number:04d}.csv", laboratory.flame(number, failing=True))


def _fsyncs(opened: Laboratory, folder: Path) -> tuple[int, int]:
    """Count fsyncs until the mail is queued, and with delivery.

    Those of the service are its calls and one for each commit (write-ahead log, synchronous FULL); those of the worker
    are counted by letting its code run once in this process. Checkpoints of the log come on top, one in many exports.
    """
    _travel(opened, folder, 0)  # makes the month's folder, which costs once
    path = folder / "exports" / "FL-9000.csv"
    candidate = land(path, laboratory.flame(9000, failing=True))
    ledger = opened.ledger
    with counted_fsyncs() as calls:
        before = ledger.changes
        evaluate(opened, accept(opened, candidate))
        until_queued = calls[0] + ledger.changes - before
        deliver(opened)
        with_delivery = calls[0] + ledger.changes - before
        calls[0] = 0
        _evaluate_here(opened, path, folder / "evaluated-here")
        return until_queued + calls[0], with_delivery + calls[0]


def _evaluate_here(opened: Laboratory, path: Path, staging: Path) -> None:
    """Let the worker's code evaluate an export in this process."""
    inside = Worker()
    inside.handle(opened.service._worker.on_start[0])
    request = {
        "do": "evaluate", "copy": str(path), "name": path.name, "revision": 1, "alerted": [], "final": False,
        "others": [], "lent": None, "seal": None, "previous": None,
        "accepted_at": "2026-12-01T09:00:00.000000Z", "staging": str(staging),
    }  # fmt: skip
    fate = inside.handle(request)["fate"]
    if fate != "done":
        raise RuntimeError(f"the export that counts the worker's fsyncs gave no results: {fate}")


def _cold(opened: Laboratory, folder: Path) -> tuple[float, float]:
    """Median seconds of an export that has to start the worker, and of a bare start of its heaviest libraries."""
    cold, bare = [], []
    for number in range(2000, 2000 + COLD_STARTS):
        opened.service._worker.close()
        cold.append(_travel(opened, folder, number).queued)
        command = [sys.executable, "-c", "import pandas, scipy.special"]
        bare.append(seconds(lambda command=command: subprocess.run(command, check=True)))
    return median(cold), median(bare)
