"""Open failures: samples that failed and of which nothing better is known yet.

A failure is closed by a newer revision in which its series does not fail, by a later attempt that passes, or by a
person's note. The table lives in the ledger; each function works inside a transaction of its caller.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.clock import stamp

if TYPE_CHECKING:
    import sqlite3
    from collections.abc import Iterable, Sequence
    from datetime import datetime

    from watcher.ledger_rows import ExportRow, SeriesRow

FAILING = ("fail", "incomplete")
PASSING = ("pass", "warn")

_COLUMNS = "id, export_id, name, sample, analyte, channel, attempt, verdict, opened_at"


@dataclass(frozen=True, slots=True)
class Failure:
    """A failure that is open: the export's name, the series, its verdict and since when."""

    id: int
    export_id: int
    name: str
    sample: str
    analyte: str
    channel: str
    attempt: int
    verdict: str
    opened_at: str

    @property
    def title(self) -> str:
        """Sample, analyte, channel."""
        return " ".join(part for part in (self.sample, self.analyte, self.channel) if part)


def open_failures(rows: Iterable[sqlite3.Row]) -> list[Failure]:
    """Make records of rows of `OPEN`."""
    return [Failure(*row) for row in rows]


#: All that are open, oldest first.
OPEN = f"SELECT {_COLUMNS} FROM failures WHERE closed_at IS NULL ORDER BY id"  # noqa: S608 - constants only


def closed_by(found: Iterable[Failure], export: ExportRow, series: Sequence[SeriesRow]) -> list[Failure]:
    """Return those of the open failures that an export's series close."""
    verdicts: dict[tuple[str, str, str], dict[int, str]] = defaultdict(dict)
    for each in series:
        verdicts[each.sample, each.analyte, each.channel][each.attempt] = each.verdict
    closed = []
    for failure in found:
        here = verdicts.get((failure.sample, failure.analyte, failure.channel), {})
        same = failure.name == export.name
        now_well = same and here.get(failure.attempt, "fail") not in FAILING
        passes = any(
            verdict in PASSING and (not same or attempt > failure.attempt) for attempt, verdict in here.items()
        )
        if now_well or passes:
            closed.append(failure)
    return closed


def record(txn: sqlite3.Connection, export: ExportRow, series: Sequence[SeriesRow], now: datetime) -> list[Failure]:
    """Close what an export closes and open what fails in it; returns what was closed."""
    found = open_failures(txn.execute(OPEN))
    closed = closed_by(found, export, series)
    txn.executemany(
        "UPDATE failures SET closed_at = ?, closed_by = ? WHERE id = ?",
        [(stamp(now), f"{export.name} revision {export.revision}", each.id) for each in closed],
    )
    gone = {each.id for each in closed}
    known = {
        (each.sample, each.analyte, each.channel, each.attempt)
        for each in found
        if each.name == export.name and each.id not in gone
    }
    best = {(s.sample, s.analyte, s.channel): 0 for s in series}
    for s in series:
        if s.verdict in PASSING:
            best[s.sample, s.analyte, s.channel] = max(best[s.sample, s.analyte, s.channel], s.attempt)
    txn.executemany(
        "INSERT INTO failures (export_id, name, sample, analyte, channel, attempt, verdict, opened_at) "
        "VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        [
            (export.id, export.name, s.sample, s.analyte, s.channel, s.attempt, s.verdict, stamp(now))
            for s in series
            if s.verdict in FAILING
            and (s.sample, s.analyte, s.channel, s.attempt) not in known
            and s.attempt > best[s.sample, s.analyte, s.channel]
        ],
    )
    return closed


def close_by_note(txn: sqlite3.Connection, name: str, by: str, now: datetime) -> int:
    """Close all open failures of an export by a person's note; returns how many."""
    return txn.execute(
        "UPDATE failures SET closed_at = ?, closed_by = ? WHERE name = ? AND closed_at IS NULL",
        (stamp(now), f"note by {by}", name),
    ).rowcount
