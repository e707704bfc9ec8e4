"""The SQLite file under the ledger: opened strictly, written in whole transactions, by one connection.

Every setting that durability rests on is read back and refused if it did not take. Knows nothing of exports, mails
or settings: the tables are those of `watcher.ledger_schema`.
"""

from __future__ import annotations

import contextlib
import sqlite3
import threading
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from watcher.errors import WatcherError
from watcher.kill_points import at
from watcher.ledger_entries import seal_all
from watcher.ledger_schema import STEPS, TABLES, VERSION

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

#: How long to wait for a ledger that somebody else holds, at the start.
OPEN_SECONDS = 0.5
#: The first version whose entries are chained.
SEALED_SINCE = 3
#: Pragma, value to set, value that must be read back. The lock comes first: it decides how WAL works.
PRAGMAS = (
    ("locking_mode", "EXCLUSIVE", "exclusive"),
    ("journal_mode", "WAL", "wal"),
    ("synchronous", "FULL", 2),
    ("foreign_keys", "ON", 1),
    ("busy_timeout", "2000", 2000),
)


@dataclass(eq=False)
class LedgerUnusable(WatcherError):
    """The ledger cannot be trusted, so nothing starts.

    Attributes
    ----------
    path
        The ledger file.
    fault
        What is wrong, without a full stop.
    remedy
        What to do, a whole sentence.
    """

    path: Path
    fault: str
    remedy: str

    def __str__(self) -> str:
        return f"Ledger {self.path}: {self.fault}. Nothing was read, evaluated or mailed. {self.remedy}"


class Database:
    """One connection, guarded by one lock; any thread may use it.

    Parameters
    ----------
    path
        The file, on a local disk; made when it is not there.

    Raises
    ------
    LedgerUnusable
        Damaged, written by a newer version, held by another process, or not as durable as asked.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._lock = threading.Lock()
        #: Transactions committed by this object; tells whether anything changed.
        self.changes = 0
        self._connection = sqlite3.connect(path, timeout=OPEN_SECONDS, isolation_level=None, check_same_thread=False)
        self._connection.row_factory = sqlite3.Row
        try:
            self._open()
        except sqlite3.OperationalError as error:
            self.close()
            raise LedgerUnusable(
                path,
                f"it cannot be opened ({error})",
                "See that no other program holds it and that its disk is writable and not full.",
            ) from error
        except sqlite3.DatabaseError as error:
            self.close()
            raise self._damaged(str(error)) from error
        except LedgerUnusable:
            self.close()
            raise

    def _open(self) -> None:
        for name, value, wanted in PRAGMAS:
            self._connection.execute(f"PRAGMA {name} = {value}")
            (got,) = self._connection.execute(f"PRAGMA {name}").fetchone()
            if got != wanted:
                raise LedgerUnusable(
                    self._path,
                    f"expected {name} to be {wanted}, got {got}",
                    "Keep the records folder on a local disk, not on a share.",
                )
        (version,) = self._connection.execute("PRAGMA user_version").fetchone()
        (tables,) = self._connection.execute("SELECT count(*) FROM sqlite_schema").fetchone()
        if version == 0 and tables == 0:
            self._connection.executescript(f"BEGIN IMMEDIATE;{TABLES}PRAGMA user_version = {VERSION};COMMIT;")
        elif version in STEPS and version < VERSION:
            self._migrate(version)
        elif version != VERSION:
            raise LedgerUnusable(
                self._path,
                f"it has version {version}, this program reads version {VERSION}",
                "Start the version of spikewarden that wrote it, or a newer one.",
            )
        (verdict,) = self._connection.execute("PRAGMA quick_check(1)").fetchone()
        if verdict != "ok":
            raise self._damaged(verdict)

    def _migrate(self, version: int) -> None:
        """Bring an older ledger up to this version, all steps or none."""
        steps = "".join(STEPS[each] for each in range(version, VERSION))
        try:
            self._connection.executescript(f"BEGIN IMMEDIATE;{steps}")
            if version < SEALED_SINCE:
                seal_all(self._connection)
            self._connection.execute(f"PRAGMA user_version = {VERSION}")
            self._connection.execute("COMMIT")
        except sqlite3.DatabaseError:
            if self._connection.in_transaction:
                self._connection.execute("ROLLBACK")
            raise

    def _damaged(self, detail: str) -> LedgerUnusable:
        return LedgerUnusable(
            self._path,
            f"it is damaged ({' '.join(detail.split())})",
            "Put the last backup of the records folder in its place; keep the damaged file for examination.",
        )

    @contextmanager
    def transaction(self, name: str) -> Iterator[sqlite3.Connection]:
        """Hold the ledger for one transaction: all of it is recorded, durably, or nothing.

        Parameters
        ----------
        name
            Its name among the kill points.
        """
        with self._lock:
            at(f"{name}-begins")
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                yield self._connection
                at(f"{name}-commits")
                self._connection.execute("COMMIT")
            except BaseException:
                # A failed COMMIT (disk full) may have rolled back by itself.
                if self._connection.in_transaction:
                    self._connection.execute("ROLLBACK")
                raise
            self.changes += 1
            at(f"{name}-committed")

    def rows(self, query: str, values: dict[str, Any] | tuple[Any, ...] = ()) -> list[sqlite3.Row]:
        """Read all rows of a query, outside any transaction."""
        with self._lock:
            return self._connection.execute(query, values).fetchall()

    def backup(self, path: Path) -> None:
        """Write a whole copy of the ledger as it stands to another file, by the library's own backup."""
        with self._lock, contextlib.closing(sqlite3.connect(path)) as copy:
            self._connection.backup(copy)

    def close(self) -> None:
        """Close the file; what was committed stays."""
        with self._lock:
            self._connection.close()
