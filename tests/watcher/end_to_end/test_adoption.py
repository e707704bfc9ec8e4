"""Settings that change while the real program runs, and what people ask of it by name."""

from __future__ import annotations

import json
import os
import sqlite3
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.fixture
def mailed(laboratory: Any, mail_server: Any) -> Any:
    """A laboratory that mails to the test's server."""
    laboratory.mail_to(mail_server.port)
    return laboratory


@pytest.fixture
def subjects(mail_server: Any) -> Callable[[], list[str]]:
    """The subjects of all mails so far."""

    def read() -> list[str]:
        texts = [text.replace("\r\n ", " ") for _, text in mail_server.mailbox.received]
        return [line[9:].rstrip() for text in texts for line in text.split("\n") if line.startswith("Subject: ")]

    return read


def _settings(laboratory: Any) -> list[dict[str, Any]]:
    """The adopted settings of a stopped service, oldest first."""
    with sqlite3.connect(laboratory.folder / "records" / "ledger.sqlite") as ledger:
        ledger.row_factory = sqlite3.Row
        rows = [dict(row) for row in ledger.execute("SELECT * FROM settings ORDER BY number")]
    ledger.close()
    return rows


def _stop(process: Any) -> None:
    process.terminate()
    process.communicate(timeout=20)
    assert process.returncode == 0


def test_a_valid_change_is_adopted_and_recorded_key_by_key(laboratory: Any, eventually: Any) -> None:
    """Changed limits hold for the next export, with number, account and difference; what is finished stays."""
    laboratory.export("FL-1.csv", *laboratory.additions("SED-12"))
    service = laboratory.start("watch")
    eventually(lambda: "FL-1.csv.r1.json" in laboratory.records(), "the first export is done")

    laboratory.change("config.yaml", "75 to 125 %", "120 to 125 %")
    eventually(lambda: laboratory.status().get("settings_number") == 2, "the change is adopted")
    laboratory.export("FL-2.csv", *laboratory.standards(), *laboratory.additions("SED-13"))
    eventually(lambda: "FL-2.csv.r1.json" in laboratory.records(), "the second export is done")
    _stop(service)

    first, second = _settings(laboratory)
    assert second["difference"] == "config.yaml: limits.recovery: 75 to 125 % -> 120 to 125 %"
    assert second["account"] == first["account"]
    records = laboratory.records()
    assert sorted(records) == ["FL-1.csv.r1.json", "FL-2.csv.r1.json"]
    assert records["FL-1.csv.r1.json"]["export"]["settings"] == first["sha256"]
    assert records["FL-2.csv.r1.json"]["export"]["settings"] == second["sha256"]
    assert [s["verdict"] for s in records["FL-2.csv.r1.json"]["series"]] == ["fail"]


def test_a_faulty_change_is_mailed_once_and_leaves_the_old_settings(
    mailed: Any, subjects: Any, eventually: Any
) -> None:
    """Faulty settings stop nothing: the old ones hold, one mail names the fault, a correction is adopted by itself."""
    service = mailed.start("watch")
    eventually(lambda: mailed.status().get("last_scan_at"), "the service looks")

    mailed.change("config.yaml", "75 to 125 %", "75 to 12x %")
    eventually(subjects, "the fault is mailed")
    mailed.export("FL-1.csv", *mailed.additions("SED-12"))
    eventually(mailed.records, "the export is done under the old settings")
    assert mailed.status()["settings_number"] == 1
    mailed.change("config.yaml", "75 to 12x %", "75 to 130 %")
    eventually(lambda: mailed.status()["settings_number"] == 2, "the correction is adopted")
    eventually(lambda: mailed.status()["problems"] == [], "the trouble is gone")
    _stop(service)

    assert len(subjects()) == 1
    assert subjects()[0].startswith("PROBLEM The settings were changed and have faults")


def test_a_mended_layout_takes_in_again_what_was_refused(mailed: Any, subjects: Any, eventually: Any) -> None:
    """A refused export is evaluated by itself once its layout is mended, with one mail that closes the matter."""
    mailed.change("flame.yaml", "signal: [R1, R2, R3]", "signal: [R1, R2, R4]")
    mailed.export("FL-1.csv", *mailed.additions("SED-12"))
    service = mailed.start("watch")
    eventually(lambda: len(subjects()) == 1, "the refusal is mailed")

    mailed.change("flame.yaml", "signal: [R1, R2, R4]", "signal: [R1, R2, R3]")
    eventually(mailed.records, "the export is evaluated")
    eventually(lambda: len(subjects()) == 2, "the closing mail arrives")
    _stop(service)

    assert subjects()[0].startswith("PROBLEM FL-1.csv")
    assert subjects()[1] == "CLEARED PROBLEM FL-1.csv: evaluated now"
    assert mailed.run("once").stdout.startswith("Nothing new.")
    assert len(subjects()) == 2


def test_signed_settings_wait_for_a_name(mailed: Any, subjects: Any, eventually: Any) -> None:
    """Where adoption is signed, a change waits, is mailed with its difference, and is adopted with name and reason."""
    mailed.change("config.yaml", "mail: {server", "adoption: signed\nmail: {server")
    service = mailed.start("watch")
    eventually(lambda: mailed.status().get("last_scan_at"), "the service looks")
    mailed.change("config.yaml", "75 to 125 %", "75 to 130 %")
    eventually(subjects, "the waiting change is mailed")
    assert mailed.status()["settings_number"] == 1
    _stop(service)
    service = mailed.start("watch")
    eventually(lambda: mailed.status().get("pid") == service.pid, "the service looks after a restart")
    assert mailed.status()["settings_number"] == 1

    adopted = mailed.run("adopt", "--by", "M. Quay", "--why", "new limit of the method")

    assert adopted.returncode == 0, adopted.stderr
    eventually(lambda: mailed.status()["settings_number"] == 2, "the change is adopted")
    _stop(service)
    last = _settings(mailed)[-1]
    assert (last["account"], last["reason"]) == ("M. Quay", "new limit of the method")
    assert last["difference"] == "config.yaml: limits.recovery: 75 to 125 % -> 75 to 130 %"


@pytest.mark.proof
def test_a_signature_cannot_be_taken_away_by_the_change_that_needs_it(laboratory: Any) -> None:
    """What is in force decides: a file that says automatic is not adopted while signed is in force."""
    laboratory.change("config.yaml", "mail: none", "mail: none\nadoption: signed")
    assert laboratory.run("once").returncode == 0
    laboratory.change("config.yaml", "adoption: signed", "adoption: automatic")

    laboratory.run("once")

    assert [row["number"] for row in _settings(laboratory)] == [1]


def test_again_and_note_reach_a_running_service(mailed: Any, subjects: Any, eventually: Any) -> None:
    """`again` makes a further revision, `note` closes open failures; both stand in the ledger with name and words."""
    mailed.export("FL-1.csv", *mailed.standards(), *mailed.additions("RIV-17", recovery=0.5))
    service = mailed.start("watch")
    eventually(lambda: "FL-1.csv.r1.json" in mailed.records(), "the export is done")
    eventually(lambda: mailed.status()["undelivered_files"]["count"] == 0, "its files are delivered")

    assert mailed.run("again", "FL-1.csv", "--by", "M. Quay", "--why", "second look").returncode == 0
    eventually(lambda: "FL-1.csv.r2.json" in mailed.records(), "it is evaluated anew")
    assert mailed.run("note", "FL-1.csv", "vial 3 was spiked twice", "--by", "M. Quay").returncode == 0
    eventually(lambda: list((mailed.folder / "records" / "requests").iterdir()) == [], "the requests are done")
    _stop(service)

    story = mailed.run("audit", "FL-1.csv")
    assert story.returncode == 0
    assert "second look" in "".join(story.stdout.split("\n")).replace("  ", " ")
    told = " ".join(story.stdout.split())
    assert "vial 3 was spiked twice" in told
    assert '"closed":1' in told.replace(" ", "") or '"closed":1' in story.stdout.replace("\n", "")
    assert len([s for s in subjects() if s.startswith("FAIL")]) == 1
    assert mailed.run("note", "FL-9.csv", "nothing", "--by", "M. Quay").returncode == 2


def test_a_later_attempt_that_passes_clears_the_failure(mailed: Any, subjects: Any) -> None:
    """Measured again and passed in a later export, the sample's open failure is closed with one mail."""
    mailed.export("FL-1.csv", *mailed.standards(), *mailed.additions("RIV-17", recovery=0.5))
    assert mailed.run("once").returncode == 1
    mailed.export("FL-2.csv", *mailed.standards(), *mailed.additions("RIV-17"))

    mailed.run("once")

    assert [each.split()[0] for each in subjects()] == ["FAIL", "CLEARED"]
    assert subjects()[1] == "CLEARED RIV-17 Zn"


def test_audit_finds_what_was_altered_and_replay_computes_again(laboratory: Any) -> None:
    """Untouched records pass; an altered result file, copy or entry is named; a falsified number is found."""
    laboratory.export("FL-1.csv", *laboratory.additions("SED-12"))
    laboratory.run("once")
    assert laboratory.run("audit", "--all").returncode == 0
    assert laboratory.run("replay", "--last", "5").returncode == 0
    (path,) = laboratory.folder.glob("results/*/FL-1.csv.r1.json")
    record = json.loads(path.read_bytes())

    record["series"][0]["result"]["value"] *= 1.0001
    path.write_text(json.dumps(record))

    altered, replayed = laboratory.run("audit", "--all"), laboratory.run("replay", path.name[:8])
    assert (altered.returncode, replayed.returncode) == (1, 1)
    assert "FL-1.csv.r1.json: the result file is missing or not the one" in " ".join(altered.stderr.split())
    assert "series[0].result.value: recorded" in " ".join(replayed.stderr.split())

    with sqlite3.connect(laboratory.folder / "records" / "ledger.sqlite") as ledger:
        ledger.execute("UPDATE entries SET at = '2020-01-01T00:00:00.000000Z' WHERE number = 2")
    ledger.close()
    assert "entry 2: altered" in laboratory.run("audit", "--all").stderr
    assert "The ledger was altered: entry 2" in " ".join(laboratory.run("once").stderr.split())


def test_altered_old_rows_are_a_problem(mailed: Any, subjects: Any) -> None:
    """A row of the first content that reads differently in the second is quoted, mailed, and stands in the record."""
    rows = mailed.additions("SED-12")
    mailed.export("FL-1.csv", *rows)
    mailed.run("once")
    changed = rows[1].replace(";Zn;", ";Zn;9")

    mailed.export("FL-1.csv", rows[0], changed, *rows[2:], *mailed.additions("SED-13"))
    code = mailed.run("once").returncode

    assert code == 2
    (problem,) = [each for each in subjects() if each.startswith("PROBLEM")]
    assert "FL-1.csv" in problem
    (sentence,) = mailed.records()["FL-1.csv.r2.json"]["problems"]
    assert f"1 of them are altered or gone (line 3 '{rows[1]}')" in sentence


@pytest.mark.proof
def test_an_export_that_grows_is_no_problem(laboratory: Any) -> None:
    """Rows that stay, wherever new ones come in between, make a revision and nothing else."""
    rows = laboratory.additions("SED-12")
    laboratory.export("FL-1.csv", *rows)
    laboratory.run("once")

    laboratory.export("FL-1.csv", *laboratory.additions("SED-13"), *rows)

    assert laboratory.run("once").returncode == 0
    assert laboratory.records()["FL-1.csv.r2.json"]["problems"] == []


@pytest.mark.proof
def test_unrelated_content_under_an_old_name_is_alerted_anew(mailed: Any, subjects: Any) -> None:
    """A name that is used again for another run silences no alert, although the same sample fails the same way."""
    rows = [*mailed.standards(), *mailed.additions("RIV-17", recovery=0.5)]
    mailed.export("FL-1.csv", *rows)
    mailed.run("once")
    mailed.export("FL-1.csv", *(row[:-1] + ("2" if row[-1] == "1" else "1") for row in rows))
    mailed.run("once")

    assert [each.split()[0] for each in subjects()] == ["FAIL", "FAIL"]
    assert mailed.records()["FL-1.csv.r2.json"]["problems"] == []


@pytest.mark.proof
def test_the_same_content_under_another_name_is_recognised(mailed: Any, subjects: Any) -> None:
    """A copied export gives no second result and no second alert, and the ledger says whose content it is."""
    path = mailed.export("FL-1.csv", *mailed.standards(), *mailed.additions("RIV-17", recovery=0.5))
    mailed.run("once")
    (path.parent / "FL-1 copy.csv").write_bytes(path.read_bytes())

    found = mailed.run("once")

    assert "superseded" in found.stdout
    assert sorted(mailed.records()) == ["FL-1.csv.r1.json"]
    assert len(subjects()) == 1
    assert found.returncode == 0
    assert '{"of":"FL-1.csv"' in "".join(mailed.run("audit", "FL-1 copy.csv").stdout.split())


@pytest.mark.proof
def test_a_replacement_of_the_same_size_and_time_is_noticed(mailed: Any, eventually: Any) -> None:
    """Content changed in place, with size and modification time put back, is a new revision while the service runs."""
    path = mailed.export("FL-1.csv", *mailed.additions("SED-12"))
    before = path.stat()
    service = mailed.start("watch")
    eventually(lambda: "FL-1.csv.r1.json" in mailed.records(), "the first content is done")

    path.write_bytes(path.read_bytes().replace(b"SED-12", b"SED-13"))
    os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))
    eventually(lambda: "FL-1.csv.r2.json" in mailed.records(), "the new content is done")
    _stop(service)

    assert path.stat().st_size == before.st_size


@pytest.mark.proof
def test_a_restart_over_faulty_files_goes_on_with_what_was_adopted(mailed: Any, subjects: Any, eventually: Any) -> None:
    """Switched off and on while somebody's change is faulty, the service works on, and mails the fault once."""
    assert mailed.run("once").returncode == 0
    mailed.change("config.yaml", "75 to 125 %", "75 to 12x %")
    mailed.export("FL-1.csv", *mailed.additions("SED-12"))

    service = mailed.start("watch")

    eventually(mailed.records, "the export is evaluated under the adopted settings")
    eventually(subjects, "the fault is mailed")
    _stop(service)
    assert subjects()[0].startswith("PROBLEM The settings were changed and have faults")
    assert mailed.run("once").returncode == 2
