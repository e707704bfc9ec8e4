"""A look at a ledger that a running service holds: its files are copied while they are still, and the copy is read.

The service holds its ledger alone, so nobody else opens it; reading the files disturbs it as little as a backup of the
disk would. A copy that was taken while something was written is never used. Nothing is changed.
"""

from __future__ import annotations

import shutil
import sqlite3
import tempfile
import threading
import time
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from watcher.database import LedgerUnusable
from watcher.errors import WatcherError
from watcher.ledger import LEDGER_NAME
from watcher.ledger_schema import VERSION

if TYPE_CHECKING:
    from collections.abc import Iterator

#: Seconds for which the files must not have changed before they are copied; file systems tell times to some 10 ms.
STILL_SECONDS = 0.1
#: How long to wait for that; a service that evaluates a pile of exports writes all the time.
PATIENCE_SECONDS = 20.0
#: Added to the ledger's name: its log of transactions, which belongs to it.
LOG_SUFFIX = "-wal"


@dataclass(eq=False)
class LedgerBusy(WatcherError):
    """A running service writes into its ledger without a pause."""

    path: Path
    seconds: float

    def __str__(self) -> str:
        return (
            f"Ledger {self.path}: expected a moment in which the running service writes nothing, found none within "
            f"{self.seconds:g} s. Nothing was looked at, and the service goes on. Ask again when it has less to do."
        )


class LedgerView:
    """A ledger as it stood at one moment; answers queries."""

    def __init__(self, connection: sqlite3.Connection) -> None:
        self._connection = connection

    def rows(self, query: str, values: dict[str, Any] | tuple[Any, ...] = ()) -> list[sqlite3.Row]:
        """Read all rows of a query."""
        return self._connection.execute(query, values).fetchall()


@contextmanager
def view_of(records: Path, patience_seconds: float = PATIENCE_SECONDS) -> Iterator[LedgerView]:
    """Look at the ledger in a records folder whose service runs.

    Raises
    ------
    LedgerBusy
        It is written without a pause.
    LedgerUnusable
        It is damaged, or of another version.
    """
    path = records / LEDGER_NAME
    with tempfile.TemporaryDirectory() as folder:
        _copy(path, Path(folder), patience_seconds)
        connection = sqlite3.connect(Path(folder) / LEDGER_NAME, isolation_level=None)
        connection.row_factory = sqlite3.Row
        try:
            _check(path, connection)
            yield LedgerView(connection)
        finally:
            connection.close()


def _copy(path: Path, folder: Path, patience_seconds: float) -> None:
    """Copy ledger and log as they stand between two writes.

    A write that begins after the files were seen for the second time leaves another time or size than they had at the
    first look, a moment before; so what is equal at both looks and after copying was copied whole.
    """
    files = (path, path.with_name(path.name + LOG_SUFFIX))
    pause = threading.Event()
    until = time.monotonic() + patience_seconds
    while True:
        before = [_signature(each) for each in files]
        pause.wait(STILL_SECONDS)
        if before == [_signature(each) for each in files]:
            for each, signature in zip(files, before, strict=True):
                (folder / each.name).unlink(missing_ok=True)
                if signature is not None:
                    shutil.copyfile(each, folder / each.name)
            if before == [_signature(each) for each in files]:
                return
        if time.monotonic() >= until:
            raise LedgerBusy(path, patience_seconds)


def _signature(path: Path) -> tuple[int, int, int] | None:
    try:
        found = path.stat()
    except FileNotFoundError:
        return None
    return found.st_ino, found.st_size, found.st_mtime_ns


def _check(path: Path, connection: sqlite3.Connection) -> None:
    remedy = "Stop the service and start it again: it says what is wrong and what to do."
    try:
        (version,) = connection.execute("PRAGMA user_version").fetchone()
        (verdict,) = connection.execute("PRAGMA quick_check(1)").fetchone()
    except sqlite3.DatabaseError as error:
        raise LedgerUnusable(path, f"it is damaged ({error})", remedy) from error
    if version != VERSION:
        raise LedgerUnusable(path, f"it has version {version}, this program reads version {VERSION}", remedy)
    if verdict != "ok":
        raise LedgerUnusable(path, f"it is damaged ({verdict})", remedy)
