"""A disk that fails at any one of the service's durable steps: nothing is called done, and the next run mends it."""

from __future__ import annotations

import errno
import os
import sys
from typing import TYPE_CHECKING, Any

import pytest

from watcher.disk import Disk
from watcher.ledger import Ledger
from watcher.service import Service
from watcher.service_settings import ServiceSettings
from watcher.worker import Worker

if TYPE_CHECKING:
    from pathlib import Path


class _FailingDisk(Disk):
    """Fails the n-th call of one of its steps."""

    def __init__(self, step: str, place: int, code: int) -> None:
        super().__init__()
        self.step, self.left, self.code = step, place, code
        self.failed = False

    def _pass(self, step: str) -> None:
        if step == self.step:
            self.left -= 1
            if self.left == 0:
                self.failed = True
                raise OSError(self.code, os.strerror(self.code))

    def open(self, folder: Path) -> tuple[int, Path]:
        self._pass("open")
        return super().open(folder)

    def write(self, descriptor: int, piece: memoryview) -> int:
        self._pass("write")
        return super().write(descriptor, piece)

    def sync(self, descriptor: int) -> None:
        self._pass("sync")
        super().sync(descriptor)

    def replace(self, source: Path, target: Path) -> None:
        self._pass("replace")
        super().replace(source, target)


def _once(bench: Any, disk: Disk) -> Any:
    settings = ServiceSettings.from_plain(bench.settings)
    worker = Worker([sys.executable, str(bench.stub_worker)], deadline_seconds=20.0)
    with Ledger(settings.records) as ledger:
        ledger.adopt_settings("{}", "lead", "test")
        return Service(settings, ledger, worker, disk=disk).once()


@pytest.mark.proof
@pytest.mark.parametrize("code", [errno.EIO, errno.EACCES, errno.ENOSPC, errno.EXDEV], ids=lambda c: errno.errorcode[c])
@pytest.mark.parametrize(
    ("step", "place"),
    [
        *(("sync", n) for n in range(1, 10)),
        *((step, n) for step in ("open", "write", "replace") for n in (1, 2, 3)),
    ],
)
def test_a_failed_step_is_never_done_and_is_made_good(bench: Any, step: str, place: int, code: int) -> None:
    """Whatever step fails, no file is half there; once the disk is well, files and states are as they should be."""
    bench.export("FL-1.csv", "SED-12,pass")
    disk = _FailingDisk(step, place, code)

    try:
        report = _once(bench, disk)
    except OSError:
        report = None  # the records themselves could not be made ready: nothing was begun

    assert disk.failed
    assert report is None or report.troubles or report.unsettled or report.undelivered_files
    assert all(
        content in (b"SED-12,pass\n",) or name.endswith(".json") for name, content in bench.result_files().items()
    )
    with Ledger(bench.records) as ledger, ledger._database.transaction("undelivered") as txn:
        txn.execute("UPDATE files SET due_at = '2020-01-01T00:00:00.000000Z'")  # not to wait for the next try

    _once(bench, Disk())

    with Ledger(bench.records) as ledger:
        assert ledger.counts() == {"done": 1}
        assert ledger.outgoing.undelivered_files() == []
    assert len(bench.result_files()) == 2
    assert not list(bench.records.rglob("*.tmp"))
