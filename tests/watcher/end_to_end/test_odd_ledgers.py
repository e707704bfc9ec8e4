"""What a service says whose records are held, damaged, newer, gone, or under other settings; no mail is repeated."""

from __future__ import annotations

import shutil
import sqlite3
from typing import TYPE_CHECKING, Any

import pytest

from watcher.ledger_schema import VERSION

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.fixture
def mailed(laboratory: Any, mail_server: Any) -> Any:
    """A laboratory in which a sample failed and was mailed, its service at rest."""
    laboratory.mail_to(mail_server.port)
    laboratory.export("FL-1.csv", *laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.6))
    assert laboratory.run("once").returncode == 1
    assert len(mail_server.mailbox.received) == 1
    return laboratory


def _damage(laboratory: Any) -> None:
    path = laboratory.folder / "records" / "ledger.sqlite"
    content = bytearray(path.read_bytes())
    content[100:2000] = b"\xff" * 1900
    path.write_bytes(content)


def _make_newer(laboratory: Any) -> None:
    with sqlite3.connect(laboratory.folder / "records" / "ledger.sqlite") as ledger:
        ledger.execute(f"PRAGMA user_version = {VERSION + 1}")
    ledger.close()


def _delete(laboratory: Any) -> None:
    for path in (laboratory.folder / "records").glob("ledger.sqlite*"):
        path.unlink()


@pytest.mark.parametrize(
    ("spoil", "what", "remedy"),
    [
        (_damage, "it is damaged", "Put the last backup"),
        (
            _make_newer,
            f"it has version {VERSION + 1}, this program reads version {VERSION}",
            "Start the version of spikewarden that wrote it, or a newer one.",
        ),
        (_delete, "it is missing, although", "Put the ledger back from the backup; or, to begin anew and be mailed"),
    ],
    ids=["damaged", "newer", "deleted"],
)
@pytest.mark.parametrize("command", ["once", pytest.param("watch", marks=pytest.mark.proof)])
def test_a_ledger_that_cannot_be_used_stops_the_program(
    mailed: Any,
    mail_server: Any,
    squeezed: Callable[[str], str],
    spoil: Callable[[Any], None],
    what: str,
    remedy: str,
    command: str,
) -> None:
    """It is named with what is wrong and what to do; the program ends with 2, touches nothing and mails nothing."""
    spoil(mailed)
    before = {name: content for name, content in mailed.contents().items() if "/records/log/" not in name}

    done = mailed.run(command)

    told = squeezed(done.stderr)
    assert done.returncode == 2
    assert "ledger.sqlite" in told
    assert what in told
    assert remedy in told
    assert len(mail_server.mailbox.received) == 1
    after = {name: content for name, content in mailed.contents().items() if "/records/log/" not in name}
    assert {name for name in before if "results" in name} <= after.keys()
    assert all(after[name] == content for name, content in before.items() if name in after)


def test_a_second_service_names_the_first(mailed: Any, mail_server: Any, eventually: Any, squeezed: Any) -> None:
    """While one service runs, a second one ends with 2 and says who holds the records; the first goes on."""
    first = mailed.start("watch")
    eventually(lambda: mailed.status().get("running"), "the first service runs")

    second = mailed.run("watch")

    assert second.returncode == 2
    assert f"in use by process {first.pid}" in squeezed(second.stderr)
    mailed.export("FL-2.csv", *mailed.standards(), *mailed.additions("RIV-18", recovery=0.6))
    eventually(lambda: len(mail_server.mailbox.received) == 2, "the first service mails what is new")
    assert first.poll() is None


def test_a_full_change_of_settings_repeats_no_mail(mailed: Any, mail_server: Any) -> None:
    """Other limits, another bench, other stocks, another layout file: what was mailed is not mailed again.

    Finished exports keep their results, and only what comes from then on is judged by the new settings.
    """
    shutil.move(mailed.folder / "flame.yaml", mailed.folder / "bench.yaml")
    text = (mailed.folder / "config.yaml").read_text("utf-8").replace("flame.yaml", "bench.yaml")
    mailed.write("config.yaml", text.replace("laboratory: ", "laboratory: New ") + "complete_after: 1 h\n")
    layout = (mailed.folder / "bench.yaml").read_text("utf-8").replace("layout: ", "layout: new ")
    mailed.write("bench.yaml", layout)
    before = {name: content for name, content in mailed.contents().items() if ".r1." in name}

    assert mailed.run("once").returncode == 0
    mailed.export("FL-2.csv", *mailed.standards(), *mailed.additions("SED-12"))
    assert mailed.run("once").returncode == 0

    assert len(mail_server.mailbox.received) == 1
    assert {name: content for name, content in mailed.contents().items() if name in before} == before
    records = mailed.records()
    assert records["FL-1.csv.r1.json"]["export"]["layout"] != records["FL-2.csv.r1.json"]["export"]["layout"]
    assert records["FL-1.csv.r1.json"]["export"]["settings"] != records["FL-2.csv.r1.json"]["export"]["settings"]


def test_a_records_folder_begun_anew_is_the_persons_decision(mailed: Any, mail_server: Any) -> None:
    """With the whole records folder moved away, as the message says, everything is taken in and mailed again."""
    shutil.move(mailed.folder / "records", mailed.folder / "records before")

    assert mailed.run("once").returncode == 1
    assert len(mail_server.mailbox.received) == 2
