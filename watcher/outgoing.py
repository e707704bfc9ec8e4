"""The ledger's queue of what must leave: result files and mails, with the state of each delivery.

What is queued stays until it is delivered, refused for good (and then stays visible) or, for a mail about an
incomplete sample, withdrawn because newer content of the export came before anyone had it. Delivering itself is
the work of `watcher.delivery` and `watcher.post`.
"""

# ruff: noqa: S608 - every part of a composed query is a constant of this package; values are always bound.

from __future__ import annotations

import json
from collections import defaultdict
from datetime import timedelta
from pathlib import Path
from typing import TYPE_CHECKING

from watcher.clock import moment, stamp
from watcher.ledger_entries import Seal, append_entry
from watcher.ledger_rows import DueFile, DueMail, Picture, UndeliveredFile, UndeliveredMail

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable
    from datetime import datetime

    from watcher.clock import Clock
    from watcher.database import Database
    from watcher.ledger_rows import RecipientOutcome

#: No retry is ever planned further ahead; a later one means that the computer's date was set back.
FARTHEST_RETRY = timedelta(hours=2)


class Outgoing:
    """Files and mails that wait for delivery; each method is one transaction.

    Parameters
    ----------
    database
        The open ledger file.
    clock
        For the times of entries.
    """

    def __init__(self, database: Database, clock: Clock) -> None:
        self._database = database
        self._clock = clock

    def recover(self) -> int:
        """At start: an attempt that was under way has an unknown outcome and is due now; returns how many."""
        now = stamp(self._clock.now())
        with self._database.transaction("recover") as txn:
            cut_short = txn.execute(
                "UPDATE recipients SET state = 'unknown', due_at = ?, "
                "last_error = 'the service ended during the attempt' WHERE state = 'sending'",
                (now,),
            ).rowcount
            txn.execute("UPDATE recipients SET due_at = ? WHERE state = 'unknown'", (now,))
            return cut_short

    # -- result files ------------------------------------------------------------------------------------------

    def due_files(self, now: datetime) -> list[DueFile]:
        """Result files whose delivery is due, oldest first."""
        rows = self._database.rows(
            "SELECT files.id, exports.name, target, staged, files.sha256, files.attempts FROM files "
            "JOIN exports ON exports.id = export_id "
            f"WHERE files.state = 'waiting' AND {_DUE.format('files')} ORDER BY files.id",
            _due_values(now),
        )
        return [DueFile(r[0], r[1], r[2], Path(r[3]), r[4], r[5]) for r in rows]

    def file_delivered(self, due: DueFile) -> None:
        """Record that the file is durable in the results folder."""
        with self._database.transaction("delivered") as txn:
            txn.execute(
                "UPDATE files SET state = 'delivered', attempts = attempts + 1, last_error = NULL WHERE id = ?",
                (due.id,),
            )
            (export_id,) = txn.execute("SELECT export_id FROM files WHERE id = ?", (due.id,)).fetchone()
            append_entry(
                txn,
                "file delivered",
                export_id,
                self._clock.now(),
                {"target": due.target, "sha256": due.sha256},
            )

    def file_failed(self, due: DueFile, error: str, due_at: datetime) -> None:
        """Record a failed attempt; the file stays in the queue."""
        with self._database.transaction("undelivered") as txn:
            txn.execute(
                "UPDATE files SET attempts = attempts + 1, last_error = ?, due_at = ? WHERE id = ?",
                (error, stamp(due_at), due.id),
            )

    def undelivered_files(self) -> list[UndeliveredFile]:
        """Result files that are not in the results folder yet, oldest first."""
        rows = self._database.rows(
            "SELECT target, due_at, attempts, last_error FROM files WHERE state = 'waiting' ORDER BY id"
        )
        return [UndeliveredFile(*row) for row in rows]

    def any_file_delivered(self) -> bool:
        """Tell whether the results folder was ever written to."""
        return bool(self._database.rows("SELECT 1 FROM files WHERE state = 'delivered' LIMIT 1"))

    def staged_files(self) -> set[Path]:
        """Files in the records that still wait to be delivered, and pictures of mails that do."""
        files = {Path(r[0]) for r in self._database.rows("SELECT staged FROM files WHERE state = 'waiting'")}
        mails = self._database.rows(
            "SELECT pictures FROM mails WHERE pictures <> '[]' AND EXISTS (SELECT 1 FROM recipients "
            "WHERE mail_id = mails.id AND state IN ('waiting', 'sending', 'unknown'))"
        )
        return files | {picture.staged for row in mails for picture in _pictures(row["pictures"])}

    def is_settled(self, due: DueMail) -> bool:
        """Tell whether no recipient of a mail is tried any more."""
        open_one = "SELECT 1 FROM recipients WHERE mail_id = ? AND state IN ('waiting', 'sending', 'unknown') LIMIT 1"
        return not self._database.rows(open_one, (due.id,))

    # -- mails -------------------------------------------------------------------------------------------------

    def due_mails(self, now: datetime) -> list[DueMail]:
        """Mails for which an attempt is due, oldest first; one with recipients of both sorts comes twice."""
        rows = self._database.rows(
            "SELECT mail_id, message_id, subject, mails.body, created_at, mails.due_at AS first_due_at, pictures, "
            "address, state, recipients.attempts AS attempts, entry, seal FROM recipients "
            "JOIN mails ON mails.id = mail_id "
            "LEFT JOIN entries ON entries.number = mails.entry "
            f"WHERE state IN ('waiting', 'unknown') AND {_DUE.format('recipients')} ORDER BY mail_id, address",
            _due_values(now),
        )
        together: dict[tuple[int, bool], list[sqlite3.Row]] = defaultdict(list)
        for row in rows:
            together[row["mail_id"], row["state"] == "unknown"].append(row)
        return [
            DueMail(
                id=mail_id,
                message_id=found[0]["message_id"],
                subject=found[0]["subject"],
                body=found[0]["body"],
                created_at=found[0]["created_at"],
                first_due_at=found[0]["first_due_at"],
                recipients=tuple(row["address"] for row in found),
                possible_repeat=repeat,
                attempts=max(row["attempts"] for row in found),
                seal=None if found[0]["seal"] is None else Seal(found[0]["entry"], found[0]["seal"]),
                pictures=tuple(_pictures(found[0]["pictures"])),
            )
            for (mail_id, repeat), found in together.items()
        ]

    def sending(self, due: DueMail) -> bool:
        """Record that an attempt begins; False where the mail was withdrawn in the meantime."""
        with self._database.transaction("sending") as txn:
            txn.executemany(
                "UPDATE recipients SET state = 'sending', attempts = attempts + 1 "
                "WHERE mail_id = ? AND address = ? AND state IN ('waiting', 'unknown')",
                [(due.id, address) for address in due.recipients],
            )
            (taken,) = txn.execute("SELECT changes()").fetchone()
            return bool(taken)

    def outcome(self, due: DueMail, outcomes: Iterable[RecipientOutcome]) -> None:
        """Record how an attempt ended for each recipient."""
        outcomes = list(outcomes)
        with self._database.transaction("outcome") as txn:
            for each in outcomes:
                # Once an outcome was unknown, a later "not now" does not make it known.
                state = "unknown" if due.possible_repeat and each.state == "waiting" else each.state
                txn.execute(
                    "UPDATE recipients SET state = ?, last_error = ?, due_at = coalesce(?, due_at) "
                    "WHERE mail_id = ? AND address = ?",
                    (state, each.error, each.due_at, due.id, each.address),
                )
            body = {"message_id": due.message_id, "outcomes": {o.address: o.state for o in outcomes}}
            (export_id,) = txn.execute("SELECT export_id FROM mails WHERE id = ?", (due.id,)).fetchone()
            append_entry(txn, "mail", export_id, self._clock.now(), body)

    def undelivered_mails(self) -> list[UndeliveredMail]:
        """Mails that are due and undelivered, and those refused for good, oldest first."""
        rows = self._database.rows(
            "SELECT subject, address, state, mails.due_at, recipients.attempts, last_error FROM recipients "
            "JOIN mails ON mails.id = mail_id WHERE state NOT IN ('delivered', 'withdrawn') "
            "AND mails.due_at <= ? ORDER BY mail_id, address",
            (stamp(self._clock.now()),),
        )
        return [UndeliveredMail(*row) for row in rows]

    def next_due(self, what: str) -> datetime | None:
        """When the next attempt is due; `what` is ``files`` or ``mails``."""
        query = (
            "SELECT min(due_at) FROM files WHERE state = 'waiting'"
            if what == "files"
            else "SELECT min(due_at) FROM recipients WHERE state IN ('waiting', 'unknown')"
        )
        (first,) = self._database.rows(query)[0]
        return None if first is None else moment(first)


#: An attempt is due when its time has come, or when a retry lies further ahead than any is ever planned.
_DUE = "({0}.due_at <= :now OR ({0}.attempts > 0 AND {0}.due_at > :horizon))"


def _pictures(text: str) -> list[Picture]:
    return [Picture(Path(staged), alt) for staged, alt in json.loads(text)]


def _due_values(now: datetime) -> dict[str, str]:
    return {"now": stamp(now), "horizon": stamp(now + FARTHEST_RETRY)}
