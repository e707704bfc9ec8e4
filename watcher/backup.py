"""A daily copy of ledger and exports in another folder, for the day the bench computer's disk fails.

The ledger is copied by SQLite's own backup, since its file may not be copied while it is used. Copies of exports
never change, so only new ones are copied. What was backed up is never deleted from there.
"""

from __future__ import annotations

from datetime import timedelta
from typing import TYPE_CHECKING

from watcher.copies import COPIES_NAME, PIECE_BYTES
from watcher.disk import TEMPORARY_PREFIX
from watcher.ledger import LEDGER_NAME

if TYPE_CHECKING:
    from datetime import datetime
    from pathlib import Path

    from watcher.clock import Clock
    from watcher.disk import Disk
    from watcher.ledger import Ledger

#: Between two backups.
EVERY = timedelta(hours=24)
#: After one that failed.
AGAIN = timedelta(minutes=30)


class Backup:
    """Keeps a backup up to date.

    Parameters
    ----------
    ledger, records, disk, clock
        What is backed up, and how files become durable.
    """

    def __init__(self, ledger: Ledger, records: Path, disk: Disk, clock: Clock) -> None:
        self._ledger = ledger
        self._records = records
        self._disk = disk
        self._clock = clock
        self._next: datetime | None = None

    def keep(self, folder: Path) -> bool:
        """Back up if it is time; returns whether it was done.

        Raises
        ------
        OSError, sqlite3.Error
            Not now; it is tried again after a while.
        """
        now = self._clock.now()
        # A next one further ahead than ever planned: the computer's date was set back.
        if self._next is not None and now < self._next <= now + EVERY:
            return False
        self._next = now + AGAIN
        local = self._records / f"{TEMPORARY_PREFIX}backup.tmp"
        local.unlink(missing_ok=True)
        try:
            self._ledger.backup(local)
            copies = folder / COPIES_NAME
            copies.mkdir(parents=True, exist_ok=True)
            known = {path.name for path in copies.iterdir()}
            for path in sorted((self._records / COPIES_NAME).iterdir()):
                if path.name not in known and not path.name.startswith("."):
                    self._disk.write_all(copies, {path.name: (path.read_bytes(),)})
            with local.open("rb") as file:
                self._disk.write_all(folder, {LEDGER_NAME: iter(lambda: file.read(PIECE_BYTES), b"")})
        finally:
            local.unlink(missing_ok=True)
        self._next = now + EVERY
        return True
