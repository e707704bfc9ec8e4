"""What the service may cost: imports, syncs to disk, looks."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from watcher.disk import Disk
from watcher.service import Service
from watcher.service_settings import ServiceSettings
from watcher.worker import Worker

if TYPE_CHECKING:
    from watcher.ledger import Ledger

STUB_WORKER = Path(__file__).parent / "stub_worker.py"


def test_the_service_imports_only_light_things() -> None:
    """Nothing heavy comes into the process that idles for months."""
    heavy = {"numpy", "pandas", "scipy", "pydantic", "yaml", "click", "pint", "parsers", "rules", "multiprocessing"}
    script = (
        "import sys, watcher.service, watcher.health, watcher.log, watcher.instance, watcher.ledger\n"
        f"print(sorted({heavy!r} & {{name.partition('.')[0] for name in sys.modules}}))"
    )

    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True, cwd=Path(__file__).parents[2]
    )

    assert done.stdout == "[]\n"


class _CountingDisk(Disk):
    """Counts what this process forces to disk."""

    def __init__(self) -> None:
        super().__init__()
        self.syncs = 0

    def sync(self, descriptor: int) -> None:
        self.syncs += 1
        super().sync(descriptor)


def test_an_export_costs_seven_syncs_before_its_mail_is_queued(
    tmp_path: Path, ledger: Ledger, monkeypatch: Any
) -> None:
    """Copy and its folder, acceptance, two result files and their folder, the end: seven, in two transactions."""
    monkeypatch.setenv("PYTHONPATH", str(Path(__file__).parents[2]))
    (tmp_path / "exports").mkdir()
    (tmp_path / "exports" / "FL-1.csv").write_text("SED-12,fail\n")
    settings = ServiceSettings(
        laboratory="Skerry Point Water Laboratory",
        exports=(tmp_path / "exports",),
        results=tmp_path / "results",
        records=tmp_path / "records",
        settle_seconds=0.01,
        reserve_bytes=0,
    )
    disk = _CountingDisk()
    service = Service(settings, ledger, Worker([sys.executable, str(STUB_WORKER)]), disk=disk)
    monkeypatch.setattr(service._files, "deliver_due", lambda: 0)
    with service._open():
        syncs, transactions = disk.syncs, ledger.changes
        service._take_in()
        service._halt.wait(0.02)
        service._take_in()
        service._evaluate_everything()
        by_service = disk.syncs - syncs + ledger.changes - transactions

    staging = tmp_path / "staging"
    staging.mkdir()
    by_worker = _CountingDisk()
    by_worker.write_all(staging, {"a.csv": [b""], "a.json": [b""]})

    assert ledger.counts() == {"done": 1}
    assert (by_service, by_worker.syncs) == (4, 3)
