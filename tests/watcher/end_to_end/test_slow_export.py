"""An export that is written slowly, while the real service watches, is killed, and mails to a real server."""

from __future__ import annotations

import email
import email.policy
import itertools
import os
import re
import signal
import threading
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from email.message import EmailMessage
    from pathlib import Path

SECTIONS = ["DO", "HOLD", "WHERE", "WHY", "NUMBERS", "RECORD"]


def messages(server: Any) -> list[EmailMessage]:
    """Return what the server received."""
    return [email.message_from_string(text, policy=email.policy.default) for _, text in server.mailbox.received]


def append(path: Path, text: str) -> None:
    """Write the way an instrument does: open, append, flush, close."""
    with path.open("a", encoding="utf-8") as out:
        out.write(text)


def pieces(laboratory: Any, end: str = "") -> list[str]:
    """A failing export in three pieces that end in the middle of a row."""
    text = laboratory.text(*laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.61)) + end
    cuts = [0, text.index("STD 2") + 3, text.index("+A2") + 1, len(text)]
    return [text[begin:stop] for begin, stop in itertools.pairwise(cuts)]


def begin(laboratory: Any, eventually: Any) -> Any:
    """Start the service and wait until it has looked through the folder."""
    process = laboratory.start("watch")

    def alive() -> bool:
        status = laboratory.status()
        return status.get("pid") == process.pid and status.get("last_scan_at") is not None

    eventually(alive, "the service shows that it has looked")
    return process


def several_looks(laboratory: Any, eventually: Any, name: str) -> None:
    """Let the service take in another export from beginning to end: it looked, waited, and looked again meanwhile."""
    before = laboratory.status()["counts"].get("done", 0)
    # the same content under another name would be a duplicate
    other = laboratory.additions("SED-12", native=3.0 + int(name[5:7]) / 100)
    laboratory.export(name, *laboratory.standards(), *other, "End of log")
    eventually(lambda: laboratory.status()["counts"].get("done", 0) > before, f"{name} is done")


def mailed(laboratory: Any, server: Any, done: int) -> bool:
    """Whether so many exports are done, their mails included, and the server's answer is on record."""
    status = laboratory.status()
    counts = status["counts"]
    settled = counts.get("done", 0) == done and counts.get("accepted", 0) == 0
    return settled and status["undelivered_mails"]["count"] == 0 and bool(server.mailbox.received)


#: Without events as a proof: the whole suite is run that way there as well.
BOTH_WAYS = pytest.mark.parametrize(
    "events", ["yes", pytest.param("no", marks=pytest.mark.proof)], ids=["with file events", "by scans alone"]
)


@BOTH_WAYS
def test_any_pause_and_kill_where_the_last_line_is_declared(
    laboratory: Any, mail_server: Any, eventually: Any, events: str
) -> None:
    """Where a layout declares its last line, an export written with any pauses and through kill -9 is evaluated once.

    The mail arrives with subject and sections, and comes neither a second time nor not at all.
    """
    laboratory.mail_to(mail_server.port)
    laboratory.change("config.yaml", "scan: 100 ms", f"scan: 100 ms, events: {events}")
    laboratory.change("flame.yaml", "columns:", "finished: '^End of log'\nuntil: '^End of log'\ncolumns:")
    first, second, third = pieces(laboratory, "End of log\n")
    slow = laboratory.folder / "exports" / "FL-0801.csv"

    service = begin(laboratory, eventually)
    append(slow, first)
    several_looks(laboratory, eventually, "FL-0802.csv")
    append(slow, second)
    several_looks(laboratory, eventually, "FL-0803.csv")
    assert "FL-0801.csv.r1.json" not in laboratory.records()
    os.kill(service.pid, signal.SIGKILL)
    service.wait(timeout=20)

    service = begin(laboratory, eventually)
    append(slow, third)
    eventually(lambda: mailed(laboratory, mail_server, done=3), "the slow export is done and its mail on record")
    os.kill(service.pid, signal.SIGKILL)
    service.wait(timeout=20)

    begin(laboratory, eventually)
    several_looks(laboratory, eventually, "FL-0804.csv")

    (message,) = messages(mail_server)
    (final,) = [record for record in laboratory.records().values() if record["export"]["name"] == "FL-0801.csv"]
    assert message["Subject"] == "FAIL RIV-17 Zn: recovery 61 % (limits 75 to 125)"
    assert message["To"] == "lead@example"
    text = message.get_body(("plain",)).get_content()
    assert [line for line in text.splitlines() if line in SECTIONS] == SECTIONS
    assert "Do not release RIV-17 Zn." in text
    assert "possible repeat" not in text
    assert final["export"]["bytes"] == slow.stat().st_size
    assert [one["sample"] for one in final["series"]] == ["RIV-17"]
    assert len(final["series"][0]["solutions"]) == 4
    assert final["problems"] == []


@BOTH_WAYS
def test_pauses_shorter_than_settle(laboratory: Any, mail_server: Any, eventually: Any, events: str) -> None:
    """Without a declared last line, an export whose pauses are shorter than `settle` is taken in once and whole."""
    laboratory.mail_to(mail_server.port)
    laboratory.change("config.yaml", "settle: 100 ms, scan: 100 ms", f"settle: 2 s, scan: 100 ms, events: {events}")
    slow = laboratory.folder / "exports" / "FL-0811.csv"
    begin(laboratory, eventually)

    for piece in pieces(laboratory):
        append(slow, piece)
        threading.Event().wait(0.3)  # the pause is the instrument's: several scans, far less than settle
    eventually(lambda: mailed(laboratory, mail_server, done=1), "the export is done and its mail on record")

    ((name, record),) = laboratory.records().items()
    assert re.fullmatch(r"FL-0811\.csv\.r1\.json", name)
    assert record["export"]["bytes"] == slow.stat().st_size
    assert len(record["series"][0]["solutions"]) == 4
    assert [message["Subject"] for message in messages(mail_server)] == [
        "FAIL RIV-17 Zn: recovery 61 % (limits 75 to 125)"
    ]
