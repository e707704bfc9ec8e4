"""The ledger's running record: one entry for each thing that happened, in the transaction in which it happened.

Entries are only ever appended, and each is chained to the one before it by a hash, its seal: whoever alters or
removes an entry breaks the chain from there on. Numbers and seals stand in mails and result files, so that mailboxes
bear witness from outside. This shows an alteration; it does not prevent one.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.clock import stamp

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable, Mapping
    from datetime import datetime

#: What the first entry is chained to.
NO_SEAL = "0" * 64


@dataclass(frozen=True, slots=True)
class Seal:
    """The number of an entry and its seal, SHA-256 in hexadecimal."""

    number: int
    seal: str

    def plain(self) -> dict[str, object]:
        """Return it as JSON values."""
        return {"number": self.number, "seal": self.seal}


def append_entry(
    txn: sqlite3.Connection, kind: str, export_id: int | None, at: datetime, body: Mapping[str, object]
) -> int:
    """Append an entry, chained to the last one, inside an open transaction.

    Returns
    -------
    int
        Its number.
    """
    text = json.dumps(body, sort_keys=True, ensure_ascii=False, separators=(",", ":"))
    last = txn.execute("SELECT number, seal FROM entries ORDER BY number DESC LIMIT 1").fetchone()
    number, before = (1, NO_SEAL) if last is None else (last[0] + 1, last[1])
    row = (number, kind, export_id, stamp(at), text)
    txn.execute(
        "INSERT INTO entries (number, kind, export_id, at, body, seal) VALUES (?, ?, ?, ?, ?, ?)",
        (*row, seal_of(before, row)),
    )
    return number


def seal_of(before: str, row: Iterable[object]) -> str:
    """Return the seal of an entry (number, kind, export, time, body) that follows one with the seal `before`."""
    text = json.dumps([before, *row], ensure_ascii=False, separators=(",", ":"))
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def seal_all(txn: sqlite3.Connection) -> None:
    """Chain the entries of a ledger that was written before entries were chained; only for its migration."""
    before = NO_SEAL
    for row in txn.execute("SELECT number, kind, export_id, at, body FROM entries ORDER BY number").fetchall():
        before = seal_of(before, tuple(row))
        txn.execute("UPDATE entries SET seal = ? WHERE number = ?", (before, row[0]))


def broken_at(rows: Iterable[Iterable[object]]) -> int | None:
    """Return the number of the first entry that does not fit the one before it; None where all do.

    Parameters
    ----------
    rows
        Number, kind, export, time, body and seal of all entries, by number.
    """
    before = NO_SEAL
    for expected, (number, *facts, seal) in enumerate(rows, 1):
        if number != expected or seal != seal_of(before, (number, *facts)):
            return expected
        before = str(seal)
    return None
