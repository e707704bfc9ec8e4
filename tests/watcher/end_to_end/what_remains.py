"""What a laboratory holds after its service ended, without what differs from run to run: times, numbers, seals.

Reads the ledger's file by itself, with nothing of the program, so that a defect of the program cannot hide here.
"""

from __future__ import annotations

import email
import email.policy
import hashlib
import html
import re
import shutil
import sqlite3
import tempfile
from collections import Counter
from contextlib import closing
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable

#: What is different in every run, and what stands for it. The exports themselves hold no times.
_MASKS = (
    (re.compile(r"\d{4}-\d\d-\d\d[T ]\d\d:\d\d(:\d\d(\.\d+)?)?Z?"), "TIME"),
    (re.compile(r"\d\d \w{3} \d{4} \d\d:\d\d(:\d\d( [+-]\d{4})?)?"), "TIME"),
    (re.compile(r"Seal [0-9a-f]{64}, entry \d+"), "ENTRY AND SEAL"),
    (re.compile(r"(number|entry)\W+\d+\W+seal\W+[0-9a-f]+", re.IGNORECASE), "ENTRY AND SEAL"),
    (re.compile(r"<[\w.]+@[\w.]+>"), "IDENTITY"),
    (re.compile(r"laboratory\d+/"), "laboratory/"),
)
_HASH = re.compile(r"\b[0-9a-f]{64}\b")
#: What the ledger says of each thing, by the name of its export: numbers of rows depend on the order of arrival.
_QUERIES = {
    "settings": "SELECT number, sha256, account, reason, difference FROM settings",
    "exports": "SELECT name, sha256, bytes, revision, state, settings_number, layout, problem, counts, last_revision, "
    "lent, wants, family FROM exports",
    "series": "SELECT e.name, e.sha256, sample, analyte, channel, attempt, verdict, result, unit FROM series "
    "JOIN exports e ON e.id = export_id",
    "files": "SELECT e.name, target, f.state FROM files f JOIN exports e ON e.id = f.export_id",
    "mails": "SELECT e.name, kind, subject, body, r.address, r.state FROM mails m LEFT JOIN exports e "
    "ON e.id = export_id JOIN recipients r ON r.mail_id = m.id",
    "alerts": "SELECT key, e.name FROM alerts LEFT JOIN exports e ON e.id = export_id",
    "entries": "SELECT kind, e.name, body FROM entries LEFT JOIN exports e ON e.id = export_id "
    "WHERE kind <> 'attempt failed'",
    "failures": "SELECT e.name, f.name, sample, analyte, channel, attempt, verdict, closed_at IS NULL, closed_by "
    "FROM failures f JOIN exports e ON e.id = export_id",
    "requests": "SELECT id FROM requests",
    "pages": "SELECT file_id FROM pages",
}


def masked(text: str) -> str:
    """Return a text without what is different in every run."""
    for pattern, word in _MASKS:
        text = pattern.sub(word, text)
    return text


def results(folder: Path) -> dict[str, str]:
    """Every file under the results folder but the list of exports, which tells the time, as masked text."""
    found = (path for path in (folder / "results").rglob("*") if path.is_file() and path.name != "index.html")
    # pages write quotation marks in their own way; unescaped they hold the same words as records
    return {str(path.relative_to(folder)): masked(html.unescape(path.read_bytes().decode())) for path in found}


def ledger(folder: Path) -> dict[str, Counter[tuple[Any, ...]]]:
    """Rows of every table, masked, with how often each is there."""
    with closing(sqlite3.connect(folder / "records" / "ledger.sqlite")) as database:
        assert database.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        return {
            table: Counter(
                tuple(
                    (_HASH.sub("HASH", masked(cell)) if table == "entries" else masked(cell))
                    if isinstance(cell, str)
                    else cell
                    for cell in row
                )
                for row in database.execute(query)
            )
            for table, query in _QUERIES.items()
        }


def delivered_as_recorded(folder: Path) -> bool:
    """Tell whether each result file in the results folder has the bytes whose hash the ledger holds."""
    with closing(sqlite3.connect(folder / "records" / "ledger.sqlite")) as database:
        recorded = dict(database.execute("SELECT target, sha256 FROM files"))
    found = {name: hashlib.sha256((folder / "results" / name).read_bytes()).hexdigest() for name in recorded}
    return found == recorded


def mail_states(folder: Path) -> dict[str, str]:
    """Message-ID to the state of its only recipient; read from a copy, so that the files stay as a kill left them."""
    records = folder / "records"
    with tempfile.TemporaryDirectory() as elsewhere:
        for path in records.glob("ledger.sqlite*"):
            shutil.copy(path, elsewhere)
        with closing(sqlite3.connect(Path(elsewhere) / "ledger.sqlite")) as database:
            if not database.execute("SELECT 1 FROM sqlite_schema WHERE name = 'recipients'").fetchone():
                return {}
            return dict(database.execute("SELECT message_id, state FROM mails JOIN recipients ON mail_id = mails.id"))


def by_identity(received: Iterable[tuple[tuple[str, ...], str]]) -> dict[str, list[Any]]:
    """Message-ID to the messages that came with it, in the order of arrival."""
    found: dict[str, list[Any]] = {}
    for _, text in received:
        message = email.message_from_string(text.replace("\r\n", "\n"), policy=email.policy.default)
        found.setdefault(str(message["Message-ID"]), []).append(message)
    return found


def says_repeat(message: Any) -> bool:
    """Tell whether a mail says that it may be a repeat."""
    return message.get_body(("plain",)).get_content().startswith("possible repeat: ")


def letter(message: Any) -> tuple[str, str, str]:
    """Return what a mail tells: addressee, subject, text without a remark about a repeat."""
    text = re.sub(r"\Apossible repeat: .*?\n\n", "", message.get_body(("plain",)).get_content(), flags=re.DOTALL)
    return str(message["To"]), masked(str(message["Subject"])), masked(text)


def plots(message: Any) -> set[str]:
    """Return the hashes of a mail's plots."""
    pictures = (part for part in message.walk() if part.get_content_maintype() == "image")
    return {hashlib.sha256(part.get_content()).hexdigest() for part in pictures}
