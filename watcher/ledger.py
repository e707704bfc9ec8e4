"""The ledger: what was adopted, what came in, what became of it. The only memory of the service.

Each method is one transaction; either all it says is recorded, durably, or nothing is. What waits for delivery is
kept by `watcher.outgoing`, reached as `Ledger.outgoing`. Nothing here reads exports or computes.
"""

# ruff: noqa: S608 - every part of a composed query is a constant of this package; values are always bound.

from __future__ import annotations

import hashlib
import json
from datetime import timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Self

from watcher import failures
from watcher.clock import SystemClock, moment, stamp
from watcher.database import Database, LedgerUnusable
from watcher.ledger_entries import Seal, append_entry, broken_at
from watcher.ledger_rows import AdoptedSettings, ExportRow, Listed, RefusedExport, SeriesRow, WantedPage
from watcher.outgoing import Outgoing
from watcher.queueing import (
    WITHDRAWABLE,
    enter_mails,
    mail_facts,
    queue_files,
    queue_mail,
    withdraw_incomplete,
)
from watcher.requests import RequestRefused

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable

    from watcher.clock import Clock
    from watcher.ledger_rows import Fate, QueuedMail, StagedFile
    from watcher.requests import Request

#: The ledger's file in the records folder.
LEDGER_NAME = "ledger.sqlite"
#: Evaluations that may end with the worker's death before an export is refused.
ATTEMPTS_ALLOWED = 3
#: Exports that are looked through for what one lacks, and opened again for what a new one may lend: the nearest.
MOST_NEIGHBOURS = 50
#: How much later than its neighbours an export may be taken in and still lend and borrow.
ARRIVAL_SLACK = timedelta(days=3)


def missing(path: Path, shown: str) -> LedgerUnusable:
    """Return the refusal to begin a ledger anew where something shows that there was one."""
    return LedgerUnusable(
        path,
        f"it is missing, although {shown}",
        "Put the ledger back from the backup; or, to begin anew and be mailed everything again, "
        "move the whole records folder and the results away.",
    )


class Ledger:
    """The open ledger of a records folder; use it as a context manager or close it.

    Parameters
    ----------
    records
        The records folder; made if it is not there.
    clock
        Where times come from.

    Raises
    ------
    LedgerUnusable
        It is damaged, newer than this program, held by another process, or was removed while the copies were not.
    """

    def __init__(self, records: Path, clock: Clock | None = None) -> None:
        self._clock = clock or SystemClock()
        records.mkdir(parents=True, exist_ok=True)
        path = records / LEDGER_NAME
        copies = records / "copies"
        if not path.exists() and copies.is_dir() and any(copies.iterdir()):
            raise missing(path, f"{copies} holds copies of exports taken in before")
        self._database = Database(path)
        self.outgoing = Outgoing(self._database, self._clock)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @property
    def changes(self) -> int:
        """A number that grows with every transaction; tells whether anything changed."""
        return self._database.changes

    def close(self) -> None:
        """Close the file."""
        self._database.close()

    # -- settings ----------------------------------------------------------------------------------------------

    def current_settings(self) -> AdoptedSettings | None:
        """Return the settings in force, or None where nothing was adopted yet."""
        rows = self._database.rows("SELECT number, sha256, body FROM settings ORDER BY number DESC LIMIT 1")
        return AdoptedSettings(*rows[0]) if rows else None

    def adopt_settings(self, body: str, account: str, reason: str, difference: str = "") -> int:
        """Put settings in force.

        Parameters
        ----------
        body
            The whole of them as JSON text; kept and hashed as given.
        account, reason
            Who adopted them and why.
        difference
            How they differ from those before, key by key.

        Returns
        -------
        int
            Their number; that of the current ones where the text is the same.
        """
        sha256 = hashlib.sha256(body.encode()).hexdigest()
        now = self._clock.now()
        with self._database.transaction("adopt") as txn:
            current = txn.execute("SELECT number, sha256 FROM settings ORDER BY number DESC LIMIT 1").fetchone()
            if current is not None and current["sha256"] == sha256:
                return int(current["number"])
            number = 1 if current is None else int(current["number"]) + 1
            txn.execute(
                "INSERT INTO settings VALUES (?, ?, ?, ?, ?, ?, ?)",
                (number, sha256, body, stamp(now), account, reason, difference),
            )
            facts = {
                "number": number,
                "sha256": sha256,
                "account": account,
                "reason": reason,
                "difference": difference,
            }
            append_entry(txn, "adopt", None, now, facts)
            return number

    # -- exports -----------------------------------------------------------------------------------------------

    def knows(self, name: str, sha256: str) -> bool:
        """Tell whether this content was taken in under this name before."""
        query = "SELECT 1 FROM exports WHERE name = ? AND sha256 = ?"
        return bool(self._database.rows(query, (name, sha256)))

    def accept(self, name: str, sha256: str, size: int) -> ExportRow | None:
        """Take in an export whose copy is durable.

        An older content of the same name that still waited for its last line is superseded.

        Returns
        -------
        ExportRow or None
            None where this content was taken in under this name before.
        """
        now = self._clock.now()
        with self._database.transaction("accept") as txn:
            export_id = txn.execute(
                "INSERT INTO exports (name, sha256, bytes, state, accepted_at) VALUES (?, ?, ?, 'accepted', ?) "
                "ON CONFLICT DO NOTHING RETURNING id",
                (name, sha256, size, stamp(now)),
            ).fetchone()
            if export_id is None:
                return None
            txn.execute(
                "UPDATE exports SET state = 'superseded', finished_at = ? "
                "WHERE name = ? AND state = 'waiting' AND id <> ?",
                (stamp(now), name, export_id["id"]),
            )
            append_entry(txn, "accept", export_id["id"], now, {"name": name, "sha256": sha256, "bytes": size})
            return _export(txn.execute(f"{_EXPORTS} WHERE e.id = ?", (export_id["id"],)).fetchone())

    def export(self, export_id: int) -> ExportRow:
        """Return an export as it stands."""
        return _export(self._database.rows(f"{_EXPORTS} WHERE e.id = ?", (export_id,))[0])

    def acceptance(self, export_id: int) -> Seal:
        """Return number and seal of the entry that records the acceptance of an export."""
        query = "SELECT number, seal FROM entries WHERE export_id = ? AND kind = 'accept'"
        return Seal(*self._database.rows(query, (export_id,))[0])

    def broken_at(self) -> int | None:
        """Return the number of the first entry that is not what it was when it was sealed; None where all are."""
        return broken_at(
            self._database.rows("SELECT number, kind, export_id, at, body, seal FROM entries ORDER BY number")
        )

    def backup(self, path: Path) -> None:
        """Write a whole copy of the ledger as it stands to another file."""
        self._database.backup(path)

    def series_of(self, export_id: int) -> list[SeriesRow]:
        """Return the index of an export's series."""
        query = "SELECT sample, analyte, channel, attempt, verdict, result, unit FROM series WHERE export_id = ?"
        return [SeriesRow(*row) for row in self._database.rows(query, (export_id,))]

    def pending(self, settings_number: int, *, complete_after_seconds: float, limit: int = 100) -> list[ExportRow]:
        """Exports to evaluate now, fewest attempts first, then oldest first.

        Those are: accepted; waiting for longer than `complete_after_seconds`; and refused, unclaimed or waiting
        under other settings than `settings_number`. Only the newest content of a name is taken in again, and no
        content comes before an older one of its name: revisions keep their order.
        """
        long_ago = stamp(self._clock.now() - timedelta(seconds=complete_after_seconds))
        rows = self._database.rows(
            f"{_EXPORTS} WHERE (e.state = 'accepted' "
            "AND NOT EXISTS (SELECT 1 FROM exports o WHERE o.name = e.name AND o.id < e.id "
            "AND o.state = 'accepted')) "
            "OR (e.state = 'waiting' AND (e.accepted_at <= :long_ago OR e.settings_number <> :settings)) "
            "OR (e.state IN ('refused', 'unclaimed') AND e.settings_number <> :settings "
            "AND NOT EXISTS (SELECT 1 FROM exports n WHERE n.name = e.name AND n.id > e.id)) "
            "ORDER BY e.attempts, e.id LIMIT :limit",
            {"settings": settings_number, "long_ago": long_ago, "limit": limit},
        )
        return [_export(row) for row in rows]

    def wanted_pages(self, limit: int = 20) -> list[WantedPage]:
        """Pages that are still to be drawn, oldest first."""
        rows = self._database.rows(
            "SELECT f.id, f.export_id, f.target, f.staged, f.sha256, (SELECT n.target FROM files n JOIN exports m "
            "ON m.id = n.export_id WHERE m.name = e.name AND n.id > f.id AND n.target LIKE '%.json' "
            "ORDER BY n.id LIMIT 1) FROM pages JOIN files f ON f.id = file_id "
            "JOIN exports e ON e.id = f.export_id ORDER BY f.id LIMIT ?",
            (limit,),
        )
        return [
            WantedPage(r[0], r[1], r[2], Path(r[3]), r[4], _page_of(r[2]), None if r[5] is None else _page_of(r[5]))
            for r in rows
        ]

    def page_drawn(self, wanted: WantedPage, file: StagedFile) -> None:
        """Queue a page for delivery; nothing more is to be drawn for it."""
        with self._database.transaction("page") as txn:
            queue_files(txn, wanted.export_id, [file], self._clock.now())
            txn.execute("DELETE FROM pages WHERE file_id = ?", (wanted.id,))

    def unchanged(self, export: ExportRow, *, wants: bool) -> dict[str, int]:
        """Record that an export that was opened again borrows what it borrowed before: its results stand.

        Returns
        -------
        dict
            Verdict to number of its series.
        """
        with self._database.transaction("unchanged") as txn:
            txn.execute(
                "UPDATE exports SET state = 'done', revision = last_revision, wants = ? WHERE id = ?",
                (wants, export.id),
            )
            (counts,) = txn.execute("SELECT counts FROM exports WHERE id = ?", (export.id,)).fetchone()
            return dict(json.loads(counts))

    def neighbours(self, export: ExportRow, span_seconds: float) -> list[ExportRow]:
        """Evaluated exports that were taken in near an export, the newest content of each name, oldest first.

        Days of slack are added: what was measured together may have been taken in apart, after a weekend or a lost
        share. Of many the nearest are chosen.
        """
        if not span_seconds:
            return []
        rows = self._database.rows(
            f"{_EXPORTS} WHERE e.last_revision IS NOT NULL AND e.name <> :name "
            "AND e.accepted_at BETWEEN :begin AND :end "
            "AND NOT EXISTS (SELECT 1 FROM exports n WHERE n.name = e.name AND n.id > e.id "
            "AND n.last_revision IS NOT NULL) "
            "ORDER BY abs(julianday(e.accepted_at) - julianday(:accepted)), e.id LIMIT :most",
            {"name": export.name, "most": MOST_NEIGHBOURS} | _window(export, span_seconds),
        )
        return sorted((_export(row) for row in rows), key=lambda each: each.id)

    def finish(self, export: ExportRow, fate: Fate, span_seconds: float = 0.0) -> int:
        """Record what became of an export: state, index of series, result files, mails and entry, all or nothing.

        The first evaluation of an export opens those again that were taken in within `span_seconds` of it and borrow
        from others or lack something: it may be what they waited for.

        Undelivered mails about incomplete samples in earlier content of the same name are withdrawn.

        Returns
        -------
        int
            The number of the entry.

        Raises
        ------
        TargetTaken
            A result file belongs to another export; nothing was recorded.
        """
        now = self._clock.now()
        with self._database.transaction("finish") as txn:
            txn.execute(
                "UPDATE exports SET state = ?, revision = ?, last_revision = coalesce(?, last_revision), lent = ?, "
                "wants = ?, family = ?, settings_number = ?, layout = ?, finished_at = ?, problem = ?, counts = ? "
                "WHERE id = ?",
                (
                    fate.state,
                    export.revision if fate.state == "done" else None,
                    export.revision if fate.state == "done" else None,
                    fate.lent if fate.state == "done" else export.lent,
                    fate.wants,
                    fate.family,
                    fate.settings_number,
                    fate.layout,
                    stamp(now),
                    fate.problem,
                    json.dumps(dict(fate.counts), sort_keys=True),
                    export.id,
                ),
            )
            _index_series(txn, export.id, fate)
            closed = failures.record(txn, export, fate.series, now) if fate.state == "done" else []
            queue_files(txn, export.id, fate.files, now)
            if fate.state == "done":
                _want_pages(txn, export, fate.files)
            if fate.state == "done" and export.lent is None and span_seconds:
                _reopen_borrowers(txn, export, fate.layout, span_seconds)
            withdrawn = withdraw_incomplete(txn, export.name)
            queued = [mail for mail in fate.mails if queue_mail(txn, export.id, mail, now)]
            facts = _facts(export, fate) | mail_facts(queued) | {"withdrawn": withdrawn}
            facts["closed"] = [f"{each.name}: {each.title}, attempt {each.attempt}" for each in closed]
            entry = append_entry(txn, fate.state, export.id, now, facts)
            enter_mails(txn, queued, entry)
            return entry

    def failed_attempt(
        self, export: ExportRow, settings_number: int, reason: str, last_mail: QueuedMail | None
    ) -> ExportRow:
        """Record that an evaluation ended with the worker's death; the third one refuses the export.

        Parameters
        ----------
        export
            The export; one that was taken in again under new settings starts counting anew.
        settings_number
            The settings it was evaluated under.
        reason
            What happened.
        last_mail
            What to mail if this was the last attempt.

        Returns
        -------
        ExportRow
            The export as it stands now.
        """
        now = self._clock.now()
        attempts = export.attempts + 1 if export.state == "accepted" else 1
        refused = attempts >= ATTEMPTS_ALLOWED
        with self._database.transaction("attempt") as txn:
            txn.execute(
                "UPDATE exports SET state = ?, attempts = ?, settings_number = ?, problem = ?, finished_at = ? "
                "WHERE id = ?",
                (
                    "refused" if refused else "accepted",
                    attempts,
                    settings_number,
                    reason,
                    stamp(now) if refused else None,
                    export.id,
                ),
            )
            last = [last_mail] if refused and last_mail is not None else []
            queued = [mail for mail in last if queue_mail(txn, export.id, mail, now)]
            facts = {"attempts": attempts, "reason": reason, "refused": refused} | mail_facts(queued)
            enter_mails(txn, queued, append_entry(txn, "attempt failed", export.id, now, facts))
        return self.export(export.id)

    def duplicate_of(self, export: ExportRow) -> ExportRow | None:
        """Return the export with the same content under another name that is done already, or None."""
        rows = self._database.rows(
            f"{_EXPORTS} WHERE e.sha256 = ? AND e.name <> ? AND e.id < ? AND e.state = 'done' ORDER BY e.id LIMIT 1",
            (export.sha256, export.name, export.id),
        )
        return _export(rows[0]) if rows else None

    def recognise(self, export: ExportRow, original: ExportRow) -> ExportRow:
        """Record that an export has the content of another one: no results, no mails, nothing lost."""
        now = self._clock.now()
        sentence = f"the same content as {original.name}, taken in at {original.accepted_at}; its results hold"
        with self._database.transaction("recognise") as txn:
            txn.execute(
                "UPDATE exports SET state = 'superseded', finished_at = ?, problem = ? WHERE id = ?",
                (stamp(now), sentence, export.id),
            )
            append_entry(txn, "duplicate", export.id, now, {"of": original.name, "sha256": export.sha256})
        return self.export(export.id)

    def previous(self, export: ExportRow) -> tuple[ExportRow, str] | None:
        """Return the newest content of the same name that is done and older, with its family; or None."""
        rows = self._database.rows(
            f"{_EXPORTS} WHERE e.name = ? AND e.id < ? AND e.state = 'done' ORDER BY e.id DESC LIMIT 1",
            (export.name, export.id),
        )
        if not rows:
            return None
        found = _export(rows[0])
        (family,) = self._database.rows("SELECT family FROM exports WHERE id = ?", (found.id,))[0]
        return found, family

    def open_failures(self) -> list[failures.Failure]:
        """Return the failures that are open, oldest first."""
        return failures.open_failures(self._database.rows(failures.OPEN))

    def last_accepted_at(self) -> str | None:
        """When an export was taken in last."""
        rows = self._database.rows("SELECT accepted_at FROM exports ORDER BY id DESC LIMIT 1")
        return str(rows[0][0]) if rows else None

    def accepted_since(self, moment: str) -> dict[str, int]:
        """State to number of exports that were taken in since a moment."""
        query = "SELECT state, count(*) FROM exports WHERE accepted_at >= ? GROUP BY state"
        return dict(map(tuple, self._database.rows(query, (moment,))))

    def do(self, request: Request) -> bool:
        """Do a person's request about an export, once; returns False where it was done before.

        Raises
        ------
        RequestRefused
            There is no such export, or it is not finished.
        """
        now = self._clock.now()
        with self._database.transaction("request") as txn:
            if not txn.execute(
                "INSERT INTO requests VALUES (?, ?) ON CONFLICT DO NOTHING", (request.id, stamp(now))
            ).rowcount:
                return False
            export = txn.execute(
                "SELECT id, name, state FROM exports WHERE name = :name OR id IN (SELECT export_id FROM files "
                "WHERE target = :name) ORDER BY id DESC LIMIT 1",
                {"name": request.export},
            ).fetchone()
            if export is None:
                raise RequestRefused(
                    f"Expected the name of an export, got '{request.export}', which never came in. Nothing was "
                    "recorded. Names are paths under the exports folder; `status` and result files show them."
                )
            facts: dict[str, object] = {"request": request.id, "by": request.by, "why": request.why}
            if request.kind == "note":
                facts["closed"] = failures.close_by_note(txn, export["name"], request.by, now)
            elif export["state"] in ("accepted", "superseded"):
                raise RequestRefused(
                    f"Export {request.export} is {export['state']}, not finished. Nothing was recorded. "
                    "Wait for its results, or name the export whose content it repeats."
                )
            else:
                txn.execute(
                    "UPDATE exports SET state = 'accepted', attempts = 0, revision = NULL, lent = NULL WHERE id = ?",
                    (export["id"],),
                )
            append_entry(txn, request.kind, export["id"], now, facts)
            return True

    # -- mails that belong to no export, and what was mailed ------------------------------------------------------

    def report(self, mail: QueuedMail) -> bool:
        """Queue a mail of the service itself; returns False where it was mailed before."""
        now = self._clock.now()
        with self._database.transaction("report") as txn:
            queued = queue_mail(txn, None, mail, now)
            if queued:
                facts = {"keys": list(mail.keys)} | mail_facts([mail])
                enter_mails(txn, [mail], append_entry(txn, "report", None, now, facts))
            return queued

    def mailed(self, key: str) -> bool:
        """Tell whether something was mailed before."""
        return bool(self._database.rows("SELECT 1 FROM alerts WHERE key = ?", (key,)))

    def alerted_keys(self, name: str) -> set[str]:
        """What was mailed about an export name, without what newer content would withdraw."""
        rows = self._database.rows(
            "SELECT key FROM alerts JOIN exports ON exports.id = alerts.export_id WHERE exports.name = :name "
            f"AND (mail_id IS NULL OR mail_id NOT IN ({WITHDRAWABLE}))",
            {"name": name},
        )
        return {row["key"] for row in rows}

    def unclaimed(self) -> list[ExportRow]:
        """Exports that no layout claims, newest content of each name, oldest first."""
        rows = self._database.rows(
            f"{_EXPORTS} WHERE e.state = 'unclaimed' "
            "AND NOT EXISTS (SELECT 1 FROM exports n WHERE n.name = e.name AND n.id > e.id) ORDER BY e.id"
        )
        return [_export(row) for row in rows]

    # -- how things stand ----------------------------------------------------------------------------------------

    def listed(self, limit: int) -> list[Listed]:
        """Exports with their delivered result files, newest first; contents that others stand for are left out."""
        rows = self._database.rows(
            "SELECT id, name, state, accepted_at, problem, counts, last_revision FROM exports "
            "WHERE state <> 'superseded' ORDER BY id DESC LIMIT ?",
            (limit,),
        )
        if not rows:
            return []
        files: dict[int, list[str]] = {}
        for export_id, target in self._database.rows(
            "SELECT export_id, target FROM files WHERE state = 'delivered' AND export_id BETWEEN ? AND ? ORDER BY id",
            (rows[-1]["id"], rows[0]["id"]),
        ):
            files.setdefault(export_id, []).append(target)
        return [
            Listed(
                name=row["name"],
                revision=row["last_revision"],
                state=row["state"],
                accepted_at=row["accepted_at"],
                problem=row["problem"],
                counts=json.loads(row["counts"]),
                files=[each for each in files.get(row["id"], []) if f".r{row['last_revision']}." in each],
            )
            for row in rows
        ]

    def pages_of(self, export_ids: Iterable[int]) -> dict[int, str]:
        """Return the newest delivered page of each export that has one."""
        found = {}
        for export_id in export_ids:
            query = (
                "SELECT target FROM files WHERE export_id = ? AND state = 'delivered' AND target LIKE '%.html' "
                "ORDER BY id DESC LIMIT 1"
            )
            for (target,) in self._database.rows(query, (export_id,)):
                found[export_id] = target
        return found

    def counts(self) -> dict[str, int]:
        """State to number of exports."""
        return dict(map(tuple, self._database.rows("SELECT state, count(*) FROM exports GROUP BY state")))

    def refused(self, limit: int = 50) -> list[RefusedExport]:
        """Exports that gave no results, newest first; older contents of a name that has newer ones are left out."""
        rows = self._database.rows(
            "SELECT name, state, problem, attempts FROM exports e "
            "WHERE (state IN ('refused', 'unclaimed') OR (state = 'accepted' AND attempts > 0)) "
            "AND NOT EXISTS (SELECT 1 FROM exports n WHERE n.name = e.name AND n.id > e.id) "
            "ORDER BY id DESC LIMIT ?",
            (limit,),
        )
        return [RefusedExport(*row) for row in rows]


_EXPORTS = (
    "SELECT e.id, e.name, e.sha256, e.bytes, e.state, coalesce(e.revision, 1 + coalesce((SELECT max(d.last_revision) "
    "FROM exports d WHERE d.name = e.name), 0)), e.settings_number, e.attempts, e.accepted_at, e.problem, e.lent "
    "FROM exports e"
)


def _page_of(record: str) -> str:
    """Return the path of the page that shows a record."""
    return f"{record.removesuffix('.json')}.html"


def _export(row: sqlite3.Row) -> ExportRow:
    return ExportRow(*row)


def _window(export: ExportRow, span_seconds: float) -> dict[str, str]:
    span = timedelta(seconds=span_seconds) + ARRIVAL_SLACK
    accepted = moment(export.accepted_at)
    return {"accepted": export.accepted_at, "begin": stamp(accepted - span), "end": stamp(accepted + span)}


def _reopen_borrowers(txn: sqlite3.Connection, export: ExportRow, layout: str | None, span_seconds: float) -> None:
    txn.execute(
        "UPDATE exports SET state = 'accepted', attempts = 0, revision = NULL WHERE id IN (SELECT e.id FROM exports e "
        "WHERE e.state = 'done' AND e.id <> :id AND e.name <> :name AND e.layout = :layout "
        "AND (e.wants = 1 OR e.lent <> '[]') AND e.accepted_at BETWEEN :begin AND :end "
        "AND NOT EXISTS (SELECT 1 FROM exports n WHERE n.name = e.name AND n.id > e.id) "
        "ORDER BY abs(julianday(e.accepted_at) - julianday(:accepted)), e.id LIMIT :most)",
        {"id": export.id, "name": export.name, "layout": layout, "most": MOST_NEIGHBOURS}
        | _window(export, span_seconds),
    )


def _index_series(txn: sqlite3.Connection, export_id: int, fate: Fate) -> None:
    txn.execute("DELETE FROM series WHERE export_id = ?", (export_id,))
    txn.executemany(
        "INSERT INTO series VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        [(export_id, s.sample, s.analyte, s.channel, s.attempt, s.verdict, s.result, s.unit) for s in fate.series],
    )


def _want_pages(txn: sqlite3.Connection, export: ExportRow, files: Iterable[StagedFile]) -> None:
    """Have the page of each record drawn, and that of the revision before it, which must name the newer one."""
    for record in (each.target for each in files if each.target.endswith(".json")):
        (record_id,) = txn.execute("SELECT id FROM files WHERE target = ?", (record,)).fetchone()
        txn.execute(
            "INSERT OR IGNORE INTO pages SELECT :id UNION SELECT max(f.id) FROM files f JOIN exports e "
            "ON e.id = f.export_id WHERE e.name = :name AND f.id < :id AND f.target LIKE '%.json' "
            "HAVING max(f.id) IS NOT NULL",
            {"id": record_id, "name": export.name},
        )


def _facts(export: ExportRow, fate: Fate) -> dict[str, object]:
    return {
        "revision": export.revision,
        "settings": fate.settings_number,
        "layout": fate.layout,
        "counts": dict(fate.counts),
        "files": {each.target: each.sha256 for each in fate.files},
        "problem": fate.problem,
    }
