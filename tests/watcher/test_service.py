"""The whole service, in a process of its own, from an export that lands to a file and a mail that arrive."""

from __future__ import annotations

import json
import os
import random
import re
import signal
import subprocess
import threading
import time
from pathlib import Path
from typing import Any

import pytest

from watcher.ledger import Ledger


@pytest.fixture(params=["events", "looking only"])
def any_bench(request: pytest.FixtureRequest, bench: Any) -> Any:
    """A bench once with file events and once without: nothing may depend on them."""
    if request.param == "looking only":
        bench.environment["SPIKEWARDEN_NO_EVENTS"] = "1"
    return bench


def test_file_events_are_on_or_off_as_asked(any_bench: Any, eventually: Any) -> None:
    """A service listens to its exports folder, and does not where events are switched off."""
    handles = Path(f"/proc/{any_bench.start().pid}/fd")
    if not handles.exists():
        pytest.skip("open handles are read from /proc")
    eventually(lambda: any_bench.status().get("last_scan_at"), "the service looks")

    listening = any("inotify" in str(handle.readlink()) for handle in handles.iterdir())

    assert listening is ("SPIKEWARDEN_NO_EVENTS" not in any_bench.environment)


def records_of(bench: Any) -> list[dict[str, Any]]:
    """The result records, in the order of their names."""
    return [json.loads(content) for name, content in sorted(bench.result_files().items()) if name.endswith(".json")]


def test_an_export_that_lands_becomes_results_and_a_mail(any_bench: Any, mail_server: Any, eventually: Any) -> None:
    """An export that lands while the service runs gives its result files and one mail about its failing sample."""
    any_bench.mail_to(mail_server)
    any_bench.start()
    eventually(lambda: any_bench.status().get("last_scan_at"), "the service looks")

    any_bench.export("FL-1.csv", "SED-12,pass", "RIV-17,fail")

    eventually(lambda: len(any_bench.delivered()) == 2, "both result files arrive")
    eventually(lambda: mail_server.mailbox.received, "the mail arrives")
    (_, text) = mail_server.mailbox.received[0]
    assert "Subject: FAIL RIV-17 Zn" in text
    assert any_bench.result_files()["2026-12/FL-1.csv.r1.csv"] == b"SED-12,pass\nRIV-17,fail\n"


def test_what_was_there_before_is_taken_in_once(any_bench: Any, mail_server: Any, eventually: Any) -> None:
    """Exports that lie there at the start are taken in, and a second start neither evaluates nor mails them again."""
    any_bench.mail_to(mail_server)
    any_bench.export("FL-1.csv", "RIV-17,fail")
    for _ in range(2):
        process = any_bench.start()
        eventually(lambda process=process: any_bench.status().get("pid") == process.pid, "the service looks")
        eventually(lambda: any_bench.counts().get("done") == 1, "the export is done")
        eventually(lambda: mail_server.mailbox.received, "the mail arrives")
        assert any_bench.stop(process) == 0

    report = any_bench.once()

    assert report["assessed"] == []
    assert len(mail_server.mailbox.received) == 1


def test_a_writer_that_pauses_gives_revisions(any_bench: Any, mail_server: Any, eventually: Any) -> None:
    """An export that grows after a pause is a new revision, and what was mailed about it is not mailed again."""
    any_bench.mail_to(mail_server)
    any_bench.start()
    pieces = ["SED-12,fail\n", "BRN-3,pass\n", "ROOF-7,fail\n"]
    for number, piece in enumerate(pieces, start=1):
        with (any_bench.exports / "FL-2.csv").open("a") as file:
            file.write(piece)
        eventually(lambda number=number: any_bench.counts().get("done") == number, f"revision {number} is done")

    eventually(lambda: len(any_bench.delivered()) == 6, "all result files arrive")
    eventually(lambda: len(mail_server.mailbox.received) == 2, "both mails arrive")
    assert [each["revision"] for each in records_of(any_bench)] == [1, 2, 3]
    assert [re.search("Subject: (.*)\r", text)[1] for _, text in mail_server.mailbox.received] == [
        "FAIL SED-12 Zn",
        "FAIL ROOF-7 Zn",
    ]


def test_an_unfinished_export_waits_for_its_last_line(any_bench: Any, eventually: Any) -> None:
    """Nothing is evaluated before the last line is there; the content without it is superseded, not refused."""
    any_bench.start()
    any_bench.export("FL-3.csv", "measuring", "SED-12,pass")
    eventually(lambda: any_bench.counts() == {"waiting": 1}, "the export waits")
    assert any_bench.result_files() == {}

    any_bench.export("FL-3.csv", "measuring", "SED-12,pass", "BRN-3,pass", "End of log")

    eventually(lambda: any_bench.counts() == {"done": 1, "superseded": 1}, "it is done")
    eventually(lambda: len(any_bench.delivered()) == 2, "its result files arrive")
    assert [each["revision"] for each in records_of(any_bench)] == [1]


def test_an_unfinished_export_is_evaluated_when_it_stays_as_it_is(bench: Any, eventually: Any) -> None:
    """After the time for completing has passed without change, an export is evaluated without its last line."""
    bench.settings["complete_after_seconds"] = 0.3
    bench.start()
    bench.export("FL-3.csv", "measuring", "SED-12,pass")

    eventually(lambda: len(bench.delivered()) == 2, "its result files arrive")
    assert records_of(bench)[0]["final"] is True


def test_poison_is_refused_after_three_deaths_and_harms_no_other(bench: Any, mail_server: Any, eventually: Any) -> None:
    """An export that ends the worker three times is refused and mailed, and the others are evaluated."""
    bench.mail_to(mail_server)
    bench.export("A-bad.csv", "die,now")
    bench.export("B-good.csv", "SED-12,pass")
    bench.start()

    eventually(lambda: bench.counts() == {"done": 1, "refused": 1}, "one is done, one refused")
    (refused,) = bench.status()["refused"]
    assert (refused["name"], refused["attempts"]) == ("A-bad.csv", 3)
    assert "exit code 7" in refused["problem"]
    eventually(lambda: mail_server.mailbox.received, "the mail arrives")
    assert "Subject: PROBLEM A-bad.csv: not evaluated" in mail_server.mailbox.received[0][1]
    assert "out of flasks" in (bench.records / "log" / "spikewarden.log").read_text()


def test_a_hanging_evaluation_is_ended_at_its_deadline(bench: Any, eventually: Any) -> None:
    """A pattern that never returns costs its export three attempts and the service nothing."""
    bench.settings["deadline_seconds"] = 0.4
    bench.export("A-bad.csv", "hang,now")
    bench.start()

    eventually(lambda: bench.counts() == {"refused": 1}, "it is refused")
    assert "did not end within 0.4 s" in bench.status()["refused"][0]["problem"]


@pytest.mark.parametrize("mode", ["run", "once"])
def test_a_stop_during_an_evaluation_is_quick_and_costs_nothing(bench: Any, eventually: Any, mode: str) -> None:
    """SIGTERM while the worker hangs ends the service within two seconds; the export stays accepted, unattempted."""
    bench.export("FL-1.csv", "hang,now")
    process = bench.start(mode)
    eventually((bench.records / "evaluating").exists, "the evaluation begins")

    begun = time.monotonic()
    bench.stop(process)

    assert time.monotonic() - begun < 2.0
    assert process.returncode == 0
    assert bench.counts() == {"accepted": 1}
    assert bench.status()["refused"] == []


def test_a_stop_during_a_hung_mail_is_quick(bench: Any, mail_server: Any, eventually: Any) -> None:
    """SIGTERM while the mail server does not answer ends the service within two seconds; the outcome is unknown."""
    bench.mail_to(mail_server)
    asked, answer = threading.Event(), threading.Event()

    def hold() -> None:
        asked.set()
        answer.wait(5.0)

    mail_server.mailbox.before_answer = hold
    bench.export("FL-1.csv", "RIV-17,fail")
    process = bench.start()
    eventually(asked.is_set, "the mail is at the server")

    begun = time.monotonic()
    bench.stop(process)
    seconds = time.monotonic() - begun
    answer.set()

    assert seconds < 2.5
    assert process.returncode == 0
    mail_server.mailbox.before_answer = None
    bench.once()
    first, second = (text for _, text in mail_server.mailbox.received)
    assert "possible repeat" not in first
    assert "possible repeat: " in second


def test_a_defect_is_mailed_once_and_everything_else_goes_on(bench: Any, mail_server: Any, eventually: Any) -> None:
    """A defect met by two exports refuses both, is mailed once with its traceback, and stops nothing."""
    bench.mail_to(mail_server)
    for name in ("A-1.csv", "A-2.csv"):
        bench.export(name, "defect", name)
    bench.export("B-good.csv", "SED-12,pass")
    bench.start()

    eventually(lambda: bench.counts() == {"done": 1, "refused": 2}, "two refused, one done")
    eventually(lambda: mail_server.mailbox.received, "the mail arrives")
    ((_, text),) = mail_server.mailbox.received
    assert "Subject: PROBLEM defect of the program: ZeroDivisionError in _misbehave" in text.replace("\r\n ", " ")
    assert "Traceback" in text


def test_an_answer_without_sense_is_an_attempt(bench: Any) -> None:
    """A malformed answer of the worker is not recorded; the third one refuses the export."""
    bench.export("FL-1.csv", "nonsense")

    report = bench.once()

    assert report["assessed"][0]["export"]["state"] == "refused"
    assert "malformed: fate: expected one of done" in report["assessed"][0]["export"]["problem"]


def test_settings_no_worker_takes_blame_no_export(bench: Any) -> None:
    """Where the worker cannot take in the settings, exports stay accepted with no attempt counted."""
    bench.export("FL-1.csv", "SED-12,pass")

    report = bench.once('{"broken": true}')

    assert report["assessed"] == []
    assert any("No worker process can be made ready" in each for each in report["troubles"])
    assert bench.counts() == {"accepted": 1}
    assert bench.once('{"broken": false}')["assessed"][0]["export"]["attempts"] == 0


def test_a_refused_export_is_taken_in_again_under_new_settings(bench: Any) -> None:
    """A refused export is bound to content and settings: the same ones leave it, others evaluate it again."""
    bench.export("FL-1.csv", "refuse")
    assert [each["export"]["state"] for each in bench.once()["assessed"]] == ["refused"]
    assert bench.once()["assessed"] == []

    report = bench.once('{"other": 1}')

    assert [each["export"]["settings_number"] for each in report["assessed"]] == [2]


def test_unclaimed_exports_come_in_one_mail_a_day(bench: Any, mail_server: Any) -> None:
    """All exports that no layout claims are named in one mail; a later one waits for the next day's."""
    bench.mail_to(mail_server)
    for name in ("X-1.csv", "X-2.csv"):
        bench.export(name, "foreign", name)
    bench.once()
    bench.export("X-3.csv", "foreign", "third")
    report = bench.once()

    assert [each["export"]["state"] for each in report["assessed"]] == ["unclaimed"]
    ((_, text),) = mail_server.mailbox.received
    assert "Subject: PROBLEM 2 exports that no layout claims" in text
    assert "X-1.csv" in text
    assert "X-2.csv" in text


def test_once_mails_an_incomplete_sample_at_once_and_run_waits(bench: Any, mail_server: Any, eventually: Any) -> None:
    """The unattended service holds a mail about an incomplete sample back; newer content withdraws it."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "RIV-17,incomplete")
    process = bench.start()
    eventually(lambda: bench.counts() == {"done": 1}, "the first content is done")
    bench.export("FL-1.csv", "RIV-17,pass")
    eventually(lambda: bench.counts() == {"done": 2}, "the second content is done")
    bench.stop(process)
    assert mail_server.mailbox.received == []

    bench.export("FL-2.csv", "BRN-3,incomplete")
    bench.once()

    ((_, text),) = mail_server.mailbox.received
    assert "INCOMPLETE BRN-3" in text


def test_a_folder_that_vanishes_is_told_once_and_taken_up_again(
    any_bench: Any, mail_server: Any, eventually: Any
) -> None:
    """A folder that is renamed away is mailed once; made anew, its exports are taken in again."""
    any_bench.mail_to(mail_server)
    any_bench.start()
    eventually(lambda: any_bench.status().get("last_scan_at"), "the service looks")
    any_bench.exports.rename(any_bench.exports.with_name("away"))
    eventually(lambda: any_bench.status().get("problems"), "the trouble shows")

    any_bench.exports.mkdir()
    any_bench.export("FL-1.csv", "SED-12,pass")

    eventually(lambda: any_bench.counts() == {"done": 1}, "the export is done")
    eventually(lambda: any_bench.status()["problems"] == [], "the trouble is gone")
    ((_, text),) = mail_server.mailbox.received
    assert "cannot be looked through" in text.replace("=\r\n", "")


def test_a_dead_results_share_delays_no_mail(bench: Any, mail_server: Any, eventually: Any) -> None:
    """While the results folder cannot be written, mails go out; what waits shows in the status."""
    bench.mail_to(mail_server)
    bench.results.write_text("a file where the folder should be")
    bench.export("FL-1.csv", "RIV-17,fail")
    assert len(bench.once()["undelivered_files"]) == 3  # CSV, JSON and the page
    assert len(mail_server.mailbox.received) == 1

    bench.results.unlink()
    bench.export("FL-0.csv", "SED-12,pass")
    bench.once()  # nothing was ever delivered: the folder is made
    bench.results.rename(bench.results.with_name("away"))
    bench.export("FL-2.csv", "SED-12,fail")
    report = bench.once()

    assert len(mail_server.mailbox.received) == 2
    assert {"2026-12/FL-2.csv.r1.csv", "2026-12/FL-2.csv.r1.json"} <= {
        each["target"] for each in report["undelivered_files"]
    }
    assert not bench.results.exists()


def test_a_second_service_is_refused_and_names_the_first(bench: Any, eventually: Any) -> None:
    """The records folder has one service; a second one says who it is, and a killed one frees it."""
    first = bench.start()
    eventually(lambda: bench.status().get("last_scan_at"), "the service looks")

    second = bench.start()
    _, err = second.communicate(timeout=20)
    assert second.returncode == 1
    assert f"in use by process {first.pid} on {os.uname().nodename}" in err

    first.kill()
    first.wait(20)
    assert bench.once()["stopped"] is False


def test_odd_things_are_refused_and_stop_nothing(bench: Any) -> None:
    """A pipe, a link and a directory among the exports are named, and the export beside them is evaluated."""
    os.mkfifo(bench.exports / "A.csv")
    (bench.exports / "B.csv").symlink_to(SERVICE_SECRET)
    (bench.exports / "C.csv").mkdir()
    bench.export("D.csv", "SED-12,pass")

    report = bench.once()

    assert [each["export"]["name"] for each in report["assessed"]] == ["D.csv"]
    assert sorted(re.match(r"\w", each)[0] for each in report["troubles"]) == ["A", "B", "C"]


SERVICE_SECRET = "/etc/hostname"


#: Each of these lies on the way of one export with a failing sample.
ON_THE_WAY = [
    *(f"copy-{moment}" for moment in ("begins", "written", "replaced", "durable")),
    *(f"deliver-{moment}" for moment in ("begins", "written", "replaced", "durable")),
    *(
        f"{name}-{moment}"
        for name in ("recover", "accept", "finish", "delivered", "sending", "outcome")
        for moment in ("begins", "commits", "committed")
    ),
    "mail-answered",
    "staged-removed",
    "deliver-replaced:2",
    "finish-committed:2",
]
#: The server may have the mail and the ledger does not know it.
OUTCOME_UNKNOWN = {"sending-committed", "mail-answered", "outcome-begins", "outcome-commits"}
TELLING = {
    "copy-replaced",
    "accept-committed",
    "finish-commits",
    "finish-committed",
    "deliver-replaced",
    "mail-answered",
}


@pytest.mark.parametrize(
    "point",
    [pytest.param(each, marks=[] if each in TELLING else [pytest.mark.proof]) for each in ON_THE_WAY],
)
def test_a_kill_anywhere_loses_nothing(bench: Any, mail_server: Any, point: str) -> None:
    """Killed at any step and started again, every export is done, its files are there, its mail was sent."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "SED-12,pass", "RIV-17,fail")
    bench.export("FL-2.csv", "BRN-3,fail")

    killed = bench.start("once", SPIKEWARDEN_KILL_AT=point)
    killed.communicate(timeout=20)
    assert killed.returncode == -signal.SIGKILL
    report = bench.once()

    assert report["undelivered_mails"] == report["undelivered_files"] == []
    assert bench.counts() == {"done": 2}
    files = bench.result_files()
    assert {name: files[name] for name in files if name.endswith(".csv")} == {
        "2026-12/FL-1.csv.r1.csv": b"SED-12,pass\nRIV-17,fail\n",
        "2026-12/FL-2.csv.r1.csv": b"BRN-3,fail\n",
    }
    assert len(files) == 4
    assert [each.name for each in bench.records.rglob("*.tmp")] == []
    assert list((bench.records / "outgoing").iterdir()) == []
    check_mails(mail_server.mailbox.received, unknown=point in OUTCOME_UNKNOWN)


def check_mails(received: list[tuple[tuple[str, ...], str]], *, unknown: bool) -> None:
    """Every failing sample was mailed; a repeat bears the same identity and says so."""
    by_identity: dict[str, list[str]] = {}
    for _, text in received:
        by_identity.setdefault(re.search("Message-ID: (.*)\r", text)[1], []).append(text)
    assert len(by_identity) == 2
    for texts in by_identity.values():
        assert all("possible repeat: " in text for text in texts[1:])
    assert unknown or len(received) == 2


def test_a_kill_from_inside_the_servers_answer_repeats_with_the_same_identity(bench: Any, mail_server: Any) -> None:
    """The server has stored the mail when the service dies: the repeat bears the same identity and says so."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "RIV-17,fail")
    service = bench.start("once")
    mail_server.mailbox.before_answer = service.kill
    service.communicate(timeout=20)
    mail_server.mailbox.before_answer = None

    bench.once()

    texts = [text for _, text in mail_server.mailbox.received]
    assert len({re.search("Message-ID: (.*)\r", text)[1] for text in texts}) == 1
    assert ["possible repeat: " in text for text in texts] == [False, True]


#: How often the service is killed; scale it down where a machine is slow.
RANDOM_KILLS = 300
KILLED_EXPORTS = 40


@pytest.mark.proof
def test_kills_at_random_moments_end_in_the_same_state(bench: Any, mail_server: Any, tmp_path: Path) -> None:
    """Killed three hundred times at random moments while exports land, the service ends as if it never had been.

    Result files have the bytes of an uninterrupted run over the same exports; every failing sample was mailed, and
    what was mailed twice bears the same identity and says that it may be a repeat.
    """
    draw = random.Random(17)
    bench.mail_to(mail_server)
    names = [f"FL-{number}.csv" for number in range(KILLED_EXPORTS)]
    for kill in range(RANDOM_KILLS):
        process = bench.start(SPIKEWARDEN_NO_EVENTS=str(kill % 2 or ""))
        number, rest = divmod(kill * KILLED_EXPORTS, RANDOM_KILLS)
        if rest < KILLED_EXPORTS:
            bench.export(names[number], f"SED-{number},fail", "BRN-3,pass")
        try:
            process.communicate(timeout=draw.uniform(0.15, 0.7))
        except subprocess.TimeoutExpired:  # the timeout is the moment of the kill
            process.kill()
            process.communicate(timeout=20)
    bench.once()
    report = bench.once()

    assert report["undelivered_mails"] == report["undelivered_files"] == []
    assert bench.counts() == {"done": KILLED_EXPORTS}
    with Ledger(bench.records) as ledger:
        assert ledger.broken_at() is None
    (tmp_path / "quiet").mkdir()
    quiet = type(bench)(tmp_path / "quiet")
    for number, name in enumerate(names):
        quiet.export(name, f"SED-{number},fail", "BRN-3,pass")
    quiet.once()
    assert bench.result_files() == quiet.result_files()
    assert bench.pages() == quiet.pages()
    by_subject: dict[str, list[str]] = {}
    for _, text in mail_server.mailbox.received:
        by_subject.setdefault(re.search("Subject: (.*)\r", text)[1], []).append(text)
    assert sorted(by_subject) == sorted(f"FAIL SED-{number} Zn" for number in range(KILLED_EXPORTS))
    for texts in by_subject.values():
        assert len({re.search("Message-ID: (.*)\r", text)[1] for text in texts}) == 1
        assert all("possible repeat: " in text for text in texts[1:])


def test_looking_goes_on_during_an_evaluation(bench: Any, mail_server: Any, eventually: Any) -> None:
    """While one evaluation hangs, exports are taken in, the heartbeat is written and mails go out."""
    bench.mail_to(mail_server)
    bench.export("FL-0.csv", "RIV-17,fail")
    bench.once()
    bench.settings["deadline_seconds"] = 60.0
    bench.export("FL-1.csv", "hang")
    bench.start()
    eventually(lambda: bench.status().get("evaluating") == "FL-1.csv", "the evaluation is under way")
    before = bench.status()["last_scan_at"]

    bench.export("FL-2.csv", "SED-12,pass")
    os.mkfifo(bench.exports / "A.csv")

    eventually(lambda: bench.counts().get("accepted") == 2, "the second export is taken in meanwhile")
    eventually(lambda: bench.status()["last_scan_at"] > before, "the heartbeat goes on")
    eventually(lambda: "PROBLEM A.csv" in mail_server.mailbox.received[-1][1], "the trouble is mailed meanwhile")
    assert bench.status()["evaluating"] == "FL-1.csv"


def test_other_settings_resend_nothing(bench: Any, mail_server: Any) -> None:
    """After every setting was changed, what was mailed and finished stays mailed and finished."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "RIV-17,fail")
    bench.once()
    bench.settings |= {"laboratory": "Another", "settle_seconds": 0.06, "scan_seconds": 0.3, "adoption": "signed"}
    bench.settings["mail"] |= {"sender": "other@example", "to": ["other@example"]}

    report = bench.once('{"laboratory": "Another"}')

    assert report["assessed"] == []
    assert len(mail_server.mailbox.received) == 1


def test_a_silence_is_told_once(bench: Any, mail_server: Any, eventually: Any) -> None:
    """Where nothing arrives for longer than the laboratory expects, one mail says so and what to look at."""
    bench.mail_to(mail_server)
    bench.settings |= {"silence_seconds": 0.3}
    bench.start()

    eventually(lambda: mail_server.mailbox.received, "the silence is mailed")
    eventually(lambda: bench.status()["problems"], "and shown")
    assert "No export arrived for" in mail_server.mailbox.received[0][1]
    assert bench.status()["problems"][0].startswith("No export arrived for 0.0 h of Mon-Sun 00:00-24:00: none came yet")


def test_the_daily_mail_lists_open_failures(bench: Any, mail_server: Any) -> None:
    """The service says once a day that it runs, what came in and which failures are open."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "RIV-17,fail")
    bench.once()
    bench.settings["mail"]["daily"] = "00:00"
    bench.once()
    bench.once()

    texts = [text for _, text in mail_server.mailbox.received]
    assert len(texts) == 2
    assert "Subject: ALIVE 20" in texts[1]
    assert "Open failures: 1" in texts[1]
    assert "- RIV-17 Zn: fail in FL-1.csv, since 20" in texts[1]


def test_a_defect_is_mailed_although_the_service_is_killed(bench: Any, mail_server: Any) -> None:
    """Killed right after an export was refused for a defect, the service tells of it at its next start."""
    bench.mail_to(mail_server)
    bench.export("A-1.csv", "defect")
    killed = bench.start("once", SPIKEWARDEN_KILL_AT="finish-committed")
    killed.communicate(timeout=20)
    assert killed.returncode == -signal.SIGKILL
    assert mail_server.mailbox.received == []

    bench.once()

    ((_, text),) = mail_server.mailbox.received
    assert "Subject: PROBLEM defect of the program: ZeroDivisionError in _misbehave" in text.replace("\r\n ", " ")


@pytest.mark.proof
def test_a_worker_killed_between_its_steps_costs_attempts(bench: Any) -> None:
    """A worker that dies after each staged file is an attempt like any other; the third refuses the export."""
    bench.export("FL-1.csv", "SED-12,pass")

    report = bench.once(SPIKEWARDEN_KILL_AT="stage-replaced")

    assert report["assessed"][0]["export"]["state"] == "refused"
    assert "signal 9" in report["assessed"][0]["export"]["problem"]
    assert bench.result_files() == {}
