"""`audit` and `replay`: the whole story of a result, whether anything was altered, whether it can be computed again.

Both may be asked while the service runs, of whose ledger they then take a view, or of a backup of its records. Nothing
is changed.
"""

from __future__ import annotations

import hashlib
import json
import math
import tempfile
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol

from watcher.copies import COPIES_NAME
from watcher.database import Database
from watcher.disk import Disk
from watcher.evaluation import Job, evaluate_job, stage
from watcher.instance import Instance, InstanceHeld
from watcher.ledger import LEDGER_NAME
from watcher.ledger_entries import broken_at
from watcher.ledger_view import view_of
from watcher.settings import Snapshot, compile_snapshot

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterator

#: How far a number may be off when it is computed again.
TOLERANCE = 1e-9


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that is not as it was recorded: where, and what."""

    where: str
    what: str

    def __str__(self) -> str:
        return f"{self.where}: {self.what}."


class Rows(Protocol):
    """What answers queries: the ledger, or a view of one."""

    def rows(self, query: str, values: dict[str, Any] | tuple[Any, ...] = ()) -> list[sqlite3.Row]:
        """Read all rows of a query."""
        ...


class Audit:
    """A look through one laboratory's records.

    Parameters
    ----------
    records, results
        Its folders.
    database
        The open ledger, or a view of it.
    running
        A service works on meanwhile: what is found missing may have come since, or be on its way.
    """

    def __init__(self, records: Path, results: Path, database: Rows, *, running: bool = False) -> None:
        self.running = running
        self._records = records
        self._results = results
        self._database = database

    def all(self) -> list[Finding]:
        """Check the chain of entries, every copy, every result file, and what the ledger says of each."""
        found = []
        entries = self._database.rows("SELECT number, kind, export_id, at, body, seal FROM entries ORDER BY number")
        if (number := broken_at(entries)) is not None:
            found.append(Finding(f"entry {number}", "altered or removed since it was sealed"))
        accepted = {e["export_id"]: json.loads(e["body"]) for e in entries if e["kind"] == "accept"}
        delivered: dict[str, str] = {}
        for entry in entries:
            if entry["kind"] == "file delivered":
                body = json.loads(entry["body"])
                delivered[body["target"]] = body["sha256"]
        for export in self._database.rows("SELECT id, name, sha256 FROM exports ORDER BY id"):
            facts = accepted.get(export["id"], {})
            if (facts.get("name"), facts.get("sha256")) != (export["name"], export["sha256"]):
                found.append(Finding(export["name"], "the ledger's row differs from the entry of its acceptance"))
            copy = self._records / COPIES_NAME / export["sha256"]
            if _sha256(copy) != export["sha256"]:
                found.append(Finding(export["name"], f"its copy {copy} is missing or altered"))
        for target, sha256 in delivered.items():
            if _sha256(self._results / target) != sha256:
                found.append(Finding(target, "the result file is missing or not the one that was delivered"))
        return found

    def find(self, result: str) -> sqlite3.Row | None:
        """Return the export that a result file, or an export's name, stands for."""
        name = result.replace("\\", "/")
        rows = self._database.rows(
            "SELECT exports.* FROM exports LEFT JOIN files ON files.export_id = exports.id "
            "WHERE exports.name = :name OR files.target = :name OR :name LIKE '%/' || files.target "
            "ORDER BY exports.id DESC LIMIT 1",
            {"name": name},
        )
        return rows[0] if rows else None

    def story(self, export: sqlite3.Row) -> Iterator[str]:
        """Tell everything the ledger holds of an export, entry by entry."""
        yield f"{export['name']}: {export['state']}, revision {export['revision']}, sha256 {export['sha256']}"
        settings = self._database.rows("SELECT * FROM settings WHERE number = ?", (export["settings_number"],))
        for row in settings:
            yield (
                f"settings {row['number']}, {row['sha256'][:12]}, adopted {row['adopted_at']} by {row['account']}: "
                f"{row['reason']}"
            )
        query = "SELECT number, kind, at, body, seal FROM entries WHERE export_id = ? ORDER BY number"
        for row in self._database.rows(query, (export["id"],)):
            yield f"{row['number']}  {row['at']}  {row['kind']}  {row['body']}  seal {row['seal'][:16]}"

    def done(self, last: int) -> list[sqlite3.Row]:
        """Return the exports that were done last, newest first."""
        query = "SELECT * FROM exports WHERE state = 'done' ORDER BY id DESC LIMIT ?"
        return self._database.rows(query, (last,))

    def replay(self, export: sqlite3.Row) -> list[Finding]:
        """Compute the record of an export again from its copy and the settings of then, and compare."""
        name = export["name"]
        (settings_row,) = self._database.rows(
            "SELECT body FROM settings WHERE number = ?", (export["settings_number"],)
        )
        (entry,) = self._database.rows(
            "SELECT number, seal FROM entries WHERE export_id = ? AND kind = 'accept'", (export["id"],)
        )
        targets = self._database.rows(
            "SELECT target FROM files WHERE export_id = ? AND target LIKE '%.json' ORDER BY id DESC LIMIT 1",
            (export["id"],),
        )
        copy = self._records / COPIES_NAME / export["sha256"]
        if _sha256(copy) != export["sha256"]:
            return [Finding(name, f"its copy {copy} is missing or altered, so nothing can be computed again")]
        if not targets:
            return [Finding(name, "no JSON record was made of it")]
        path = self._results / targets[0]["target"]
        try:
            recorded = json.loads(path.read_text("utf-8"))
        except (OSError, ValueError) as error:
            return [Finding(name, f"its record {path} cannot be read ({error})")]
        settings = compile_snapshot(Snapshot.of_plain(json.loads(settings_row["body"])))
        job = Job(
            name,
            copy.read_bytes(),
            export["revision"],
            export["accepted_at"],
            {"number": entry["number"], "seal": entry["seal"]},
        )
        with tempfile.TemporaryDirectory() as folder:
            files = stage(evaluate_job(settings, job, final=True), settings, Path(folder), Disk())
            record = next(each["staged"] for each in files if each["target"].endswith(".json"))
            again = json.loads(Path(record).read_text("utf-8"))
        return [
            Finding(name, f"{where}: recorded {old!r}, computed again {new!r}")
            for where, old, new in differences(recorded["series"], again["series"], "series")
        ]


def differences(old: Any, new: Any, where: str) -> Iterator[tuple[str, Any, Any]]:
    """Yield where two JSON values differ by more than the tolerance, with both values.

    >>> list(differences({"a": [1.0]}, {"a": [1.0 + 1e-12]}, "x")), list(differences([1], [2], "x"))
    ([], [('x[0]', 1, 2)])
    """
    if isinstance(old, dict) and isinstance(new, dict):
        for key in old.keys() | new.keys():
            yield from differences(old.get(key), new.get(key), f"{where}.{key}")
    elif isinstance(old, list) and isinstance(new, list) and len(old) == len(new):
        for place, (a, b) in enumerate(zip(old, new, strict=True)):
            yield from differences(a, b, f"{where}[{place}]")
    elif isinstance(old, float) and isinstance(new, (int, float)):
        if not math.isclose(old, new, rel_tol=TOLERANCE, abs_tol=1e-300):
            yield where, old, new
    elif old != new:
        yield where, old, new


@contextmanager
def open_audit(records: Path, results: Path) -> Iterator[Audit]:
    """Open the records of a laboratory for an audit; those of a running service are viewed.

    Raises
    ------
    LedgerBusy, LedgerUnusable
        The ledger cannot be read, or not now.
    """
    with ExitStack() as stack:
        try:
            stack.enter_context(Instance(records))
        except InstanceHeld:
            yield Audit(records, results, stack.enter_context(view_of(records)), running=True)
            return
        database = Database(records / LEDGER_NAME)
        stack.callback(database.close)
        yield Audit(records, results, database)


def _sha256(path: Path) -> str | None:
    try:
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError:
        return None
