"""What keeps the real program from starting, or changes all it works with: said whole, and nothing is mailed again."""

from __future__ import annotations

import json
import shutil
import signal
import socket
import sqlite3
from contextlib import closing
from typing import TYPE_CHECKING, Any

import pytest

from watcher.ledger_schema import VERSION

if TYPE_CHECKING:
    from pathlib import Path

#: Each begins the real program several times.
pytestmark = pytest.mark.proof


@pytest.fixture
def told(laboratory: Any, mail_server: Any) -> Any:
    """A laboratory whose failing export has its results, and whose one mail has arrived."""
    laboratory.mail_to(mail_server.port)
    laboratory.export("FL-1.csv", *laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.6))
    assert laboratory.run("once").returncode == 1
    assert len(mail_server.mailbox.received) == 1
    return laboratory


def ledger_of(laboratory: Any) -> Path:
    """Return the ledger's file."""
    return laboratory.folder / "records" / "ledger.sqlite"


def files(laboratory: Any) -> dict[str, bytes]:
    """What a program that refuses must not touch: exports, results, copies and whatever stands for the ledger."""
    found = laboratory.contents()
    passing = ("status.json", "lock", ".log", "index.html")
    return {name: content for name, content in found.items() if not name.endswith(passing)}


def assert_nothing_is_repeated(laboratory: Any, mail_server: Any) -> None:
    """Started again, the program finds nothing new and mails nothing; what comes later is mailed."""
    results = {name: content for name, content in files(laboratory).items() if "/results/" in name}
    done = laboratory.run("once")
    assert (done.stdout, done.stderr, done.returncode) == ("Nothing new.\n", "", 0)
    assert len(mail_server.mailbox.received) == 1
    assert {name: content for name, content in files(laboratory).items() if "/results/" in name} == results
    laboratory.export("FL-2.csv", *laboratory.standards(), *laboratory.additions("SED-12", recovery=0.6))
    laboratory.run("once")
    assert ["SED-12" in text for _, text in mail_server.mailbox.received] == [False, True]


@pytest.mark.parametrize("command", ["watch", "once"])
def test_a_second_instance_names_the_first_and_ends(
    told: Any, mail_server: Any, eventually: Any, squeezed: Any, command: str
) -> None:
    """Under the same or another configuration of the same records, a second one ends; a killed one frees them."""
    first = told.start("watch")
    eventually(lambda: told.status().get("pid") == first.pid and told.status()["running"], "the service runs")
    since = json.loads((told.folder / "records" / "holder.json").read_text())["since"]
    told.write("other.yaml", (told.folder / "config.yaml").read_text().replace("Skerry Point Water", "Another"))

    for told.config in ("other.yaml", "config.yaml"):
        second = told.run(command)
        assert second.returncode == 2
        assert squeezed(second.stderr) == squeezed(
            f"Records folder {told.folder / 'records'} is in use by process {first.pid} on {socket.gethostname()} "
            f"since {since}. This program changed nothing and ends. Stop that one first, or use `status` to see what "
            "it does."
        )
    assert told.status()["running"]
    assert first.poll() is None

    first.kill()
    assert first.wait(20) == -signal.SIGKILL
    assert_nothing_is_repeated(told, mail_server)


def spoil_pages(ledger: Path) -> None:
    """Overwrite pages in the middle."""
    content = bytearray(ledger.read_bytes())
    content[4096 : 4096 * 12] = b"\xa5" * (4096 * 11)
    ledger.write_bytes(content)


def spoil_head(ledger: Path) -> None:
    """Put another file in its place."""
    ledger.write_bytes(b"SED-12;Zn;0.2\n" * 400)


def make_newer(ledger: Path) -> None:
    """Let it look as if a later program had written it."""
    with closing(sqlite3.connect(ledger)) as database:
        database.execute(f"PRAGMA user_version = {VERSION + 1}")


PUT_BACK = "Put the last backup of the records folder in its place; keep the damaged file for examination."
SPOILED = {
    "pages overwritten": (spoil_pages, "it is damaged (", PUT_BACK),
    "another file": (spoil_head, "it is damaged (file is not a database)", PUT_BACK),
    "newer schema": (
        make_newer,
        f"it has version {VERSION + 1}, this program reads version {VERSION}",
        "Start the version of spikewarden that wrote it, or a newer one.",
    ),
}


@pytest.mark.parametrize("how", SPOILED)
@pytest.mark.parametrize("command", ["watch", "once"])
def test_a_ledger_that_cannot_be_trusted_is_refused(
    told: Any, mail_server: Any, squeezed: Any, how: str, command: str
) -> None:
    """A damaged or newer ledger is named with what to do, stays as it is, and put back repeats nothing."""
    spoil, fault, remedy = SPOILED[how]
    kept = ledger_of(told).read_bytes()
    spoil(ledger_of(told))
    before = files(told)

    refused = told.run(command)

    assert refused.returncode == 2
    said = squeezed(refused.stderr)
    assert said.startswith(squeezed(f"Ledger {ledger_of(told)}: {fault}"))
    assert said.endswith(f". Nothing was read, evaluated or mailed. {remedy}")
    assert "Traceback" not in said
    assert files(told) == before
    ledger_of(told).write_bytes(kept)
    assert_nothing_is_repeated(told, mail_server)


@pytest.mark.parametrize("what", ["ledger", "records"])
@pytest.mark.parametrize("command", ["watch", "once"])
def test_a_deleted_ledger_is_not_begun_anew(
    told: Any, mail_server: Any, squeezed: Any, what: str, command: str
) -> None:
    """Where copies or results show that there was a ledger, none is begun, since everything would be mailed again."""
    records = told.folder / "records"
    shown = {
        "ledger": f"{records / 'copies'} holds copies of exports taken in before",
        "records": f"{told.folder / 'results'} holds results of earlier exports",
    }[what]
    shutil.copytree(records, told.folder / "kept")
    if what == "ledger":
        ledger_of(told).unlink()
    else:
        shutil.rmtree(records)

    refused = told.run(command)

    assert refused.returncode == 2
    assert squeezed(refused.stderr) == squeezed(
        f"Ledger {ledger_of(told)}: it is missing, although {shown}. Nothing was read, evaluated or "
        "mailed. Put the ledger back from the backup; or, to begin anew and be mailed everything again, move the whole "
        "records folder and the results away."
    )
    assert not ledger_of(told).exists()
    shutil.rmtree(records, ignore_errors=True)
    (told.folder / "kept").rename(records)
    assert_nothing_is_repeated(told, mail_server)


def test_who_moves_records_and_results_away_begins_anew(told: Any, mail_server: Any) -> None:
    """The way that the refusal names leads to a new beginning: everything is evaluated and mailed again."""
    for name in ("records", "results"):
        (told.folder / name).rename(told.folder / f"old {name}")

    assert told.run("once").returncode == 1

    assert ["RIV-17" in text for _, text in mail_server.mailbox.received] == [True, True]


CHANGES = {
    "laboratory: Skerry Point Water Laboratory": "laboratory: Skerry Point Harbour Laboratory",
    "results: ./results": "results: ./outcomes",
    "ZN-5, contains: {Zn: 5 mg/L}": "ZN-6, contains: {Zn: 6 mg/L}",
    "aliquot: 10 mL": "aliquot: 20 mL",
    "made_up_to: 50 mL": "made_up_to: 100 mL",
    "{A1: 5 mL, A2: 10 mL, A3: 15 mL}": "{A1: 6 mL, A2: 12 mL, A3: 18 mL}",
    "report: additions": "report: automatic",
    "blank: none": "blank: subtract",
    "recovery: 75 to 125 %": "recovery: 80 to 120 %, residual: at most 5 %",
    "from: bench@example, to: lead@example": "from: harbour@example, to: [night@example, lead@example]",
    "settle: 100 ms, scan: 100 ms": "settle: 150 ms, scan: 200 ms",
}


def change_everything(laboratory: Any) -> None:
    """Change every setting, and the layout."""
    text = (laboratory.folder / "config.yaml").read_text("utf-8")
    for old, new in CHANGES.items():
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    laboratory.write("config.yaml", text)
    laboratory.change("flame.yaml", "layout: flame bench", "layout: flame bench two")
    laboratory.change("flame.yaml", "'BLK *'", "'BLANK *'")


def adopted(laboratory: Any) -> list[tuple[int, str, str]]:
    """Number, reason and difference of all settings that were in force."""
    with closing(sqlite3.connect(ledger_of(laboratory))) as database:
        return database.execute("SELECT number, reason, difference FROM settings ORDER BY number").fetchall()


@pytest.mark.parametrize("running", [False, True])
def test_a_full_change_of_all_settings_repeats_no_mail(
    told: Any, mail_server: Any, eventually: Any, running: bool
) -> None:
    """Changed while it runs or while it does not, all settings are adopted with their difference; nothing is mailed."""
    results = {name: content for name, content in files(told).items() if "/results/" in name}
    if not running:
        change_everything(told)
    service = told.start("watch")
    eventually(lambda: told.status().get("pid") == service.pid and told.status()["running"], "the service runs")
    if running:
        change_everything(told)
    eventually(lambda: told.status().get("settings_number") == 2, "the settings are adopted", 60.0)
    told.export("FL-2.csv", *told.standards(), *told.additions("SED-12"))
    eventually(lambda: (told.status().get("counts") or {}).get("done") == 2, "a further export is done", 60.0)
    service.terminate()
    service.communicate(timeout=20)

    (_, (number, reason, difference)) = adopted(told)
    assert (number, reason) == (2, "changed files, adopted by themselves" if running else "watch")
    for key in ("laboratory", "folders.results", "stocks", "bench.aliquot", "bench.levels.A1", "report", "blank"):
        assert key in difference
    assert ["RIV-17" in text for _, text in mail_server.mailbox.received if "RIV-17" in text] == [True]
    assert results.items() <= files(told).items()


def test_changes_that_wait_for_a_signature_are_told_once(
    told: Any, mail_server: Any, eventually: Any, squeezed: Any
) -> None:
    """Where the laboratory signs, a change is mailed once with what to do, over two starts; the old ones hold."""
    told.write("config.yaml", (told.folder / "config.yaml").read_text() + "adoption: signed\n")
    told.run("once")
    change_everything(told)
    for _ in range(2):
        service = told.start("watch")
        eventually(lambda service=service: told.status().get("pid") == service.pid, "the service runs")
        eventually(lambda: told.status()["problems"], "the change is shown", 60.0)
        eventually(lambda: len(mail_server.mailbox.received) == 2, "and mailed")
        service.terminate()
        service.communicate(timeout=20)

    (sentence,) = told.status()["problems"]
    assert sentence.startswith("The settings were changed and wait for a signature; the old ones stay in force. ")
    assert sentence.endswith('Adopt them with: spikewarden adopt --by NAME --why "REASON", or change the files back.')
    assert "laboratory" in sentence
    assert "The settings were changed and wait for a signature" in squeezed(mail_server.mailbox.received[1][1])
    assert [number for number, _, _ in adopted(told)] == [1, 2]
