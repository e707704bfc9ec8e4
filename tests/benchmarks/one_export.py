"""One export through the service's own parts, without waiting for it to settle; and the disk writes it costs.

Used by several measurements. The parts are those that `watcher.service.Service` puts together, called one after the
other in this process; only the worker is a process of its own, as always.
"""

from __future__ import annotations

import os
import time
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.folder import Candidate, signature_of

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from pathlib import Path

    from watcher.ledger_rows import ExportRow
    from watcher.opening import Laboratory


@dataclass(frozen=True, slots=True)
class Journey:
    """Seconds of one export's way: until accepted, until done and its mail queued, until its files are delivered."""

    accepted: float
    queued: float
    delivered: float


def travel(laboratory: Laboratory, path: Path, content: bytes) -> Journey:
    """Bring one export from its folder to delivered result files."""
    candidate = land(path, content)
    start = time.perf_counter()
    export = accept(laboratory, candidate)
    accepted = time.perf_counter()
    evaluate(laboratory, export)
    queued = time.perf_counter()
    deliver(laboratory)
    return Journey(accepted - start, queued - start, time.perf_counter() - start)


def land(path: Path, content: bytes) -> Candidate:
    """Write an export into its folder, as the instrument's program does."""
    path.write_bytes(content)
    return Candidate(path, path.name, signature_of(path.stat()))


def accept(laboratory: Laboratory, candidate: Candidate) -> ExportRow:
    """Hash, copy durably and accept."""
    export = laboratory.service._intake._accept(candidate)
    if export is None:
        raise RuntimeError(f"{candidate.name} was taken in before; it cannot be measured again")
    return export


def evaluate(laboratory: Laboratory, export: ExportRow) -> Mapping[str, int]:
    """Evaluate in the worker and record the outcome; return the number of series for each verdict."""
    assessed = laboratory.service._evaluate(export, at_once=False)
    if assessed is None or assessed.export.state != "done":
        raise RuntimeError(f"{export.name} gave no results, nothing worth measuring happened: {assessed}")
    return assessed.counts


def deliver(laboratory: Laboratory) -> None:
    """Deliver the result files that are due."""
    laboratory.service._files.deliver_due()
    if left := laboratory.ledger.outgoing.undelivered_files():
        raise RuntimeError(f"result files were not delivered: {left}")


@contextmanager
def counted_fsyncs() -> Iterator[list[int]]:
    """Count the calls of os.fsync in this process; the list holds the number."""
    count, real = [0], os.fsync

    def counting(descriptor: int) -> None:
        count[0] += 1
        real(descriptor)

    os.fsync = counting
    try:
        yield count
    finally:
        os.fsync = real


def fsynced_writes(folder: Path, count: int, size: int = 4096) -> None:
    """Write so many new files and force each to disk: the least that durability costs here."""
    content = b"0" * size
    for place in range(count):
        descriptor = os.open(folder / f"baseline-{place}", os.O_WRONLY | os.O_CREAT | os.O_TRUNC)
        try:
            os.write(descriptor, content)
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
