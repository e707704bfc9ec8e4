"""The ledger's running record: one entry for each thing that happened, in the transaction in which it happened.

Entries are only ever appended. `seal` stays empty until entries are chained by hash.
"""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from watcher.clock import stamp

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Mapping
    from datetime import datetime


def append_entry(
    txn: sqlite3.Connection, kind: str, export_id: int | None, at: datetime, body: Mapping[str, object]
) -> int:
    """Append an entry inside an open transaction.

    Returns
    -------
    int
        Its number.
    """
    text = json.dumps(body, sort_keys=True, ensure_ascii=False, separators=(",", ":"))
    number = txn.execute(
        "INSERT INTO entries (kind, export_id, at, body) VALUES (?, ?, ?, ?)",
        (kind, export_id, stamp(at), text),
    ).lastrowid
    if number is None:  # the sqlite3 module's type says so; an INSERT always has a row
        raise AssertionError("an inserted entry has no number")
    return number
