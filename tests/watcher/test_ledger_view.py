"""A view of a ledger that somebody else writes: one moment of it, whole, or none."""

from __future__ import annotations

import shutil
import threading
from typing import TYPE_CHECKING, Any

import pytest

from watcher import ledger_view
from watcher.database import LedgerUnusable
from watcher.ledger_entries import broken_at
from watcher.ledger_view import LedgerBusy, view_of

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger

ENTRIES = "SELECT number, kind, export_id, at, body, seal FROM entries ORDER BY number"


def test_a_view_shows_what_was_committed(ledger: Ledger, tmp_path: Path) -> None:
    """What lies in the file and what lies in its log are both seen, while the ledger stays open and is written on."""
    for number in range(300):
        ledger.accept(f"FL-{number}.csv", f"{number:064}", 10)

    with view_of(tmp_path / "records") as view:
        ledger.accept("FL-later.csv", "ab", 10)
        names = {row["name"] for row in view.rows("SELECT name FROM exports")}
        whole = broken_at(view.rows(ENTRIES))

    assert names == {f"FL-{number}.csv" for number in range(300)}
    assert whole is None


def test_a_write_during_copying_is_noticed(ledger: Ledger, tmp_path: Path, monkeypatch: Any) -> None:
    """A copy that a transaction ran into is thrown away and taken again."""
    copy, written = shutil.copyfile, []

    def interrupted(source: Path, target: Path) -> None:
        copy(source, target)
        if len(written) < 2:
            written.append(ledger.accept(f"FL-{len(written)}.csv", f"{len(written):064}", 10))

    monkeypatch.setattr(ledger_view.shutil, "copyfile", interrupted)

    with view_of(tmp_path / "records") as view:
        seen = len(view.rows("SELECT 1 FROM exports"))

    assert len(written) == 2
    assert seen == 2


def test_a_ledger_that_is_written_without_a_pause_is_not_viewed(ledger: Ledger, tmp_path: Path) -> None:
    """Where no moment without writing comes, the error says so and what to do; nothing half is shown."""
    stop = threading.Event()

    def write() -> None:
        number = 0
        while not stop.is_set():
            number += 1
            ledger.accept(f"FL-{number}.csv", f"{number:064}", 10)

    writer = threading.Thread(target=write)
    writer.start()
    try:
        with (
            pytest.raises(
                LedgerBusy,
                match=r"expected a moment in which the running service writes nothing, found none within 0\.5 s\. "
                r"Nothing was looked at, and the service goes on\. Ask again when it has less to do\.",
            ),
            view_of(tmp_path / "records", patience_seconds=0.5),
        ):
            pytest.fail("a view was given")
    finally:
        stop.set()
        writer.join()


@pytest.mark.parametrize(
    ("content", "fault"), [(b"SED-12,pass\n" * 100, "it is damaged"), (b"", "it has version 0, this program reads")]
)
def test_what_is_no_ledger_is_refused(tmp_path: Path, content: bytes, fault: str) -> None:
    """A file that cannot be a ledger is named with what to do."""
    (tmp_path / "ledger.sqlite").write_bytes(content)

    with pytest.raises(LedgerUnusable, match=rf"{fault}.* Stop the service and start it again"), view_of(tmp_path):
        pytest.fail("a view was given")
