"""The daily backup: a ledger that opens, every copy, and no more often than daily."""

from __future__ import annotations

import sqlite3
from typing import TYPE_CHECKING, Any

from watcher.backup import Backup
from watcher.disk import Disk
from watcher.ledger import Ledger

if TYPE_CHECKING:
    from pathlib import Path


def test_a_backup_opens_as_a_ledger_and_holds_the_copies(tmp_path: Path, clock: Any) -> None:
    """What was backed up can take the place of the records; a day later new exports are added and old ones kept."""
    with Ledger(tmp_path / "records", clock) as ledger:
        (tmp_path / "records" / "copies").mkdir()
        (tmp_path / "records" / "copies" / "ab").write_bytes(b"SED-12")
        ledger.accept("FL-1.csv", "ab", 6)
        backup = Backup(ledger, tmp_path / "records", Disk(), clock)
        assert backup.keep(tmp_path / "backup")
        ledger.accept("FL-2.csv", "cd", 6)
        (tmp_path / "records" / "copies" / "cd").write_bytes(b"SED-13")
        clock.advance(3600)
        assert not backup.keep(tmp_path / "backup")
        with Ledger(tmp_path / "backup", clock) as copy:
            assert (copy.knows("FL-1.csv", "ab"), copy.knows("FL-2.csv", "cd")) == (True, False)
            assert copy.broken_at() is None
        clock.advance(24 * 3600)
        assert backup.keep(tmp_path / "backup")
        assert sorted(path.name for path in (tmp_path / "backup" / "copies").iterdir()) == ["ab", "cd"]
    with sqlite3.connect(tmp_path / "backup" / "ledger.sqlite") as found:
        assert found.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    found.close()
    assert list((tmp_path / "records").glob("*.tmp")) == []


def test_a_date_set_back_does_not_stop_backups(tmp_path: Path, clock: Any) -> None:
    """After the computer's date was set back by years the next backup is made at once."""
    with Ledger(tmp_path / "records", clock) as ledger:
        (tmp_path / "records" / "copies").mkdir()
        backup = Backup(ledger, tmp_path / "records", Disk(), clock)
        assert backup.keep(tmp_path / "backup")
        clock.wall = clock.wall.replace(year=2020)
        assert backup.keep(tmp_path / "backup")
