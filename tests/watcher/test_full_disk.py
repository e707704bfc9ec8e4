"""Disks that fill up for real: small temporary file systems under results, records and log, one after the other."""

from __future__ import annotations

import os
import subprocess
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

pytestmark = [
    pytest.mark.proof,
    pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() != 0, reason="mounting needs the right to"),
]


@pytest.fixture
def small_disk() -> Iterator[Callable[[Path, str], None]]:
    """Mount a small file system, or give a mounted one another size."""
    mounted: list[Path] = []

    def mount(folder: Path, size: str) -> None:
        folder.mkdir(parents=True, exist_ok=True)
        again = folder in mounted
        options = f"{'remount,' if again else ''}size={size}"
        done = subprocess.run(
            ["mount", "-t", "tmpfs", "-o", options, "tmpfs", str(folder)], capture_output=True, text=True, check=False
        )
        if done.returncode and not again:
            pytest.skip(f"a file system cannot be mounted here: {done.stderr.strip()}")
        assert done.returncode == 0, done.stderr
        if not again:
            mounted.append(folder)

    yield mount
    for folder in mounted:
        subprocess.run(["umount", "-l", str(folder)], check=True)


def alerts(mail_server: Any) -> set[str]:
    """Samples whose failure was mailed."""
    lines = [line for _, text in mail_server.mailbox.received for line in text.split("\r\n")]
    return {line.split()[2] for line in lines if line.startswith("Subject: FAIL ")}


@pytest.mark.parametrize("part", ["results", "records", "log"])
def test_a_full_disk_loses_nothing_and_passes_by_itself(
    bench: Any, mail_server: Any, small_disk: Any, eventually: Any, part: str
) -> None:
    """A full disk leaves nothing half written under a final name; with space again everything is done and mailed."""
    bench.mail_to(mail_server)
    place = {"results": bench.results, "records": bench.records, "log": bench.records / "log"}[part]
    small_disk(place, "256k" if part == "records" else "16k")
    process = bench.start()
    eventually(lambda: process.poll() is not None or bench.status().get("last_scan_at"), "the service looks")
    rows = [f"BRN-{number},pass" for number in range(400)]
    for number in range(40):
        bench.export(f"FL-{number}.csv", f"SED-{number},fail", *rows)

    if part == "results":
        eventually(lambda: len(mail_server.mailbox.received) == 40, "every alert goes out all the same")
        eventually(lambda: "No space left" in (bench.status()["undelivered_files"]["last_error"] or ""), "it is told")
    elif part == "records":
        eventually(lambda: os.statvfs(place).f_bavail < 8, "the disk is full")
    else:
        eventually(lambda: len(bench.delivered()) == 80, "a full log stops nothing")
    for name, content in bench.result_files().items():
        assert "/." in name or not name.endswith(".csv") or content.count(b"\n") == 401
    small_disk(place, "64m")
    # what could not be written or sent is tried again after a while, longer each time
    eventually(lambda: len(bench.delivered()) == 80, "everything is delivered", 120.0)
    # the full disk is mailed too, so that counting mails would not tell
    eventually(lambda: alerts(mail_server) == {f"SED-{number}" for number in range(40)}, "everything is mailed", 120.0)
    eventually(lambda: bench.counts().get("done") == 40, "and shown")
    assert bench.stop(process) == 0

    bench.once()
    assert bench.counts() == {"done": 40}
    assert len([name for name in bench.result_files() if name.endswith(".csv")]) == 40
    assert alerts(mail_server) == {f"SED-{number}" for number in range(40)}
