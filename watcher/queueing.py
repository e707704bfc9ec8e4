"""Putting files and mails into the ledger's queue, inside a transaction that belongs to someone else.

Here is decided what is not queued: a file whose place is another export's, a mail that brings no news. What happens
to the queue afterwards is told by `watcher.outgoing`.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.clock import stamp
from watcher.errors import WatcherError

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable
    from datetime import datetime

    from watcher.ledger_rows import QueuedMail, StagedFile


@dataclass(eq=False)
class TargetTaken(WatcherError):
    """Two exports claim the same result file.

    Attributes
    ----------
    target
        The path under the results folder.
    owner
        The export whose result file it is.
    """

    target: str
    owner: str

    def __str__(self) -> str:
        return (
            f"Result file {self.target} belongs to export {self.owner}. "
            "This export gave no results, so that the others are not overwritten. Rename one of the two exports."
        )


def queue_files(txn: sqlite3.Connection, export_id: int, staged: Iterable[StagedFile], now: datetime) -> None:
    """Queue result files.

    Raises
    ------
    TargetTaken
        A target is a result file of another export.
    """
    for each in staged:
        owner = txn.execute(
            "SELECT exports.name FROM files JOIN exports ON exports.id = export_id WHERE target = ? AND export_id <> ?",
            (each.target, export_id),
        ).fetchone()
        if owner is not None:
            raise TargetTaken(each.target, owner[0])
        txn.execute(
            "INSERT INTO files (export_id, target, staged, sha256, state, due_at) "
            "VALUES (?, ?, ?, ?, 'waiting', ?) "
            "ON CONFLICT (target) DO UPDATE SET staged = excluded.staged, sha256 = excluded.sha256, "
            "state = 'waiting', attempts = 0, due_at = excluded.due_at, last_error = NULL",
            (export_id, each.target, str(each.staged), each.sha256, stamp(now)),
        )


def queue_mail(txn: sqlite3.Connection, export_id: int | None, mail: QueuedMail, now: datetime) -> bool:
    """Queue a mail unless everything it is about was mailed before; returns whether it was queued."""
    known = {key for key in mail.keys if txn.execute("SELECT 1 FROM alerts WHERE key = ?", (key,)).fetchone()}
    if mail.keys and known.issuperset(mail.keys):
        return False
    mail_id = txn.execute(
        "INSERT INTO mails (export_id, kind, message_id, subject, body, created_at, due_at, pictures) "
        "VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        (
            export_id,
            mail.kind,
            mail.message_id,
            mail.subject,
            mail.body,
            stamp(now),
            mail.due_at,
            json.dumps([[str(each.staged), each.alt] for each in mail.pictures], ensure_ascii=False),
        ),
    ).lastrowid
    txn.executemany(
        "INSERT INTO recipients (mail_id, address, state, due_at) VALUES (?, ?, 'waiting', ?)",
        [(mail_id, address, mail.due_at) for address in dict.fromkeys(mail.recipients)],
    )
    txn.executemany(
        "INSERT INTO alerts (key, export_id, mail_id, created_at) VALUES (?, ?, ?, ?)",
        [(key, export_id, mail_id, stamp(now)) for key in dict.fromkeys(mail.keys) if key not in known],
    )
    return True


def mail_facts(mails: Iterable[QueuedMail]) -> dict[str, object]:
    """Return what an entry says of the mails that it queues: their identities, and hashes of what they say."""
    listed = list(mails)
    texts = [f"{mail.subject}\n{mail.body}".encode("utf-8", "surrogatepass") for mail in listed]
    return {
        "mails": [mail.message_id for mail in listed],
        "mail_sha256": [hashlib.sha256(text).hexdigest() for text in texts],
    }


def enter_mails(txn: sqlite3.Connection, mails: Iterable[QueuedMail], entry: int) -> None:
    """Note for each mail the entry that queued it, whose number and seal the mail will bear."""
    txn.executemany("UPDATE mails SET entry = ? WHERE message_id = ?", [(entry, mail.message_id) for mail in mails])


#: Mails about incomplete samples of an export name of which nobody has had an attempt under way or behind it.
WITHDRAWABLE = (
    "SELECT mails.id FROM mails JOIN exports ON exports.id = mails.export_id "
    "WHERE exports.name = :name AND mails.kind = 'incomplete' AND NOT EXISTS ("
    "SELECT 1 FROM recipients WHERE mail_id = mails.id AND state <> 'waiting')"
)


def withdraw_incomplete(txn: sqlite3.Connection, name: str) -> int:
    """Withdraw mails about incomplete samples that newer content has overtaken, and free their keys."""
    mail_ids = txn.execute(WITHDRAWABLE, {"name": name}).fetchall()
    txn.executemany("UPDATE recipients SET state = 'withdrawn' WHERE mail_id = ?", mail_ids)
    txn.executemany("DELETE FROM alerts WHERE mail_id = ?", mail_ids)
    return len(mail_ids)
