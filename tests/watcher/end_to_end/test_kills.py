"""The real program, service and worker, killed at every named moment and at random ones, against a run that was not."""

from __future__ import annotations

import random
import signal
import subprocess
import time
from collections import Counter
from itertools import count
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
import what_remains

from watcher.kill_points import KILL_POINTS
from watcher.requests import Request, submit

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    #: What happens in a laboratory before a kill, or in the same order in the run that is not killed.
    Happening = Callable[[Any], None]

#: Marks the processes of a laboratory, so that a worker whose service was killed can be found.
MARK = "SPIKEWARDEN_TESTS_LABORATORY"
#: Kills at random moments, between those at named ones.
RANDOM_KILLS = 40
#: Far above what reaching a named moment takes.
REACHED_SECONDS = 60.0
#: Named moments that need something out of the ordinary; the others lie on the way of every export.
SPECIAL = ("adopt", "recognise", "request", "undelivered", "report")


def rows(laboratory: Any, number: int, kind: int) -> list[str]:
    """The rows of an export of a kind; each has samples of its own."""
    sample, standards = f"SED-{number}", laboratory.standards()
    kinds = {
        0: lambda: [*standards, *laboratory.additions(sample, recovery=0.6)],  # fails
        1: lambda: [*standards, *laboratory.additions(sample)],  # passes
        2: lambda: [*standards, *laboratory.additions(sample, recovery=0.6), *laboratory.additions(f"BRN-{number}")],
        3: lambda: [*laboratory.additions(sample), f"ROOF-{number};Zn;0.1"],  # refused: a row too short
        4: lambda: [*standards, *laboratory.additions(sample, only="123")],  # incomplete: no unspiked run
        5: lambda: [*standards, *laboratory.additions(sample), laboratory.row("", 0.2)],  # a row without sample
    }
    return kinds[kind]()


def lands(number: int, point: str) -> Happening:
    """An export lands, of one of the kinds whose way leads past a named moment."""
    if point.startswith(("sending", "outcome", "mail")):
        kinds = (0, 2)
    elif point.startswith(("copy", "accept", "recover", "adopt")):
        kinds = (0, 1, 2, 3, 4, 5)
    else:  # not the one that is refused
        kinds = (0, 1, 2, 4, 5)
    kind = kinds[number % len(kinds)]
    return lambda laboratory: laboratory.export(f"FL-{number:04d}.csv", *rows(laboratory, number, kind))


def lands_again(number: int, _point: str) -> Happening:
    """The first export lands once more under another name."""
    return lambda laboratory: laboratory.export(f"FL-copy-{number}.csv", *rows(laboratory, 0, 0))


def odd(number: int, _point: str) -> Happening:
    """Something odd lies among the exports."""
    return lambda laboratory: (laboratory.folder / "exports" / f"ODD-{number}.csv").symlink_to("FL-0000.csv")


def asked(number: int, _point: str) -> Happening:
    """Somebody asks for something: a note about a failing export, or exports evaluated anew."""
    kind, export = [("note", "FL-0000.csv"), ("again", "FL-0001.csv"), ("again", "FL-0002.csv")][number % 3]
    request = Request(f"request{number}", kind, export, "bench lead", "checked the stock")
    return lambda laboratory: submit(laboratory.folder / "records", request)


def nothing(_laboratory: Any) -> None:
    """Nothing happens."""


def points(*, special: bool) -> Iterator[str]:
    """Named moments, with what makes the process die there."""
    for point in KILL_POINTS:
        step = point.rpartition("-")[0]
        if (step in SPECIAL) is not special:
            continue
        if step == "attempt":  # one failed attempt: the worker dies while the service lives
            yield f"{point},stage-written"
        elif point.startswith("stage-"):
            yield f"{point}:1:both"
        else:
            yield point


def ordinary() -> list[tuple[str, Happening]]:
    """Kills while exports land; the first ones before any settings were adopted."""
    numbers = count()
    adopting = [point for point in points(special=True) if point.startswith("adopt")]
    return [(point, lands(next(numbers), point)) for point in [*adopting, *points(special=False)]]


def out_of_the_ordinary() -> list[tuple[str, Happening]]:
    """Kills while something special happens, after everything before is done."""
    numbers = count(100)
    makes = {"recognise": lands_again, "request": asked, "undelivered": lands, "report": odd}
    return [
        (point, makes[point.rpartition("-")[0]](next(numbers), point))
        for point in points(special=True)
        if not point.startswith("adopt")
    ]


def kill_workers(laboratory: Any) -> None:
    """Kill what is left of the processes of a laboratory."""
    mark = f"{MARK}={laboratory.folder}".encode()
    for environ in Path("/proc").glob("[0-9]*/environ"):
        try:
            if mark in environ.read_bytes().split(b"\0"):
                subprocess.run(["kill", "-9", environ.parent.name], check=False, capture_output=True)
        except OSError:
            continue


class Killed:
    """A laboratory whose service is killed again and again.

    Attributes
    ----------
    unknown
        Message-ID to how often a kill found an attempt under way.
    """

    def __init__(self, laboratory: Any, eventually: Any) -> None:
        self.laboratory = laboratory
        self.unknown: Counter[str] = Counter()
        self.kills = 0
        self._eventually = eventually
        self._draw = random.Random(23)

    def at(self, point: str, happening: Happening) -> None:
        """Let something happen, and kill at a named moment."""
        results, away = self.laboratory.folder / "results", self.laboratory.folder / "away"
        happening(self.laboratory)
        if point.startswith("undelivered"):  # the share of the results is gone for a while
            results.rename(away)
        process = self._start(SPIKEWARDEN_KILL_AT=point)
        process.communicate(timeout=REACHED_SECONDS)
        assert process.returncode == -signal.SIGKILL, point
        self._after(group=self.kills % 2 == 0)
        if away.exists():
            away.rename(results)

    def at_random(self) -> None:
        """Kill at a random moment, now and then before the service runs."""
        process = self._start()
        if self._draw.random() < 0.7:
            self._eventually(lambda: self.laboratory.status().get("pid") == process.pid, "the service runs", 60.0)
        group = self.kills % 2 == 0
        try:
            process.communicate(timeout=self._draw.uniform(0.05, 1.8))
        except subprocess.TimeoutExpired:  # the timeout is the moment of the kill
            process.send_signal(signal.SIGSTOP)  # so that it does not see its worker die first
            process.kill()
        if group:
            kill_workers(self.laboratory)
        process.communicate(timeout=REACHED_SECONDS)
        assert process.returncode == -signal.SIGKILL
        self._after(group=group)

    def _start(self, **environment: str) -> subprocess.Popen[str]:
        environment[MARK] = str(self.laboratory.folder)
        environment["SPIKEWARDEN_NO_EVENTS"] = str(self.kills // 2 % 2)
        return self.laboratory.start("watch", **environment)

    def _after(self, *, group: bool) -> None:
        if group:
            kill_workers(self.laboratory)
        self.kills += 1
        states = what_remains.mail_states(self.laboratory.folder)
        self.unknown.update(identity for identity, state in states.items() if state == "sending")


def is_idle(laboratory: Any, process: Any) -> bool:
    """Tell whether a running service has nothing left to do."""
    status = laboratory.status()
    contents = [path for path in (laboratory.folder / "exports").iterdir() if not path.is_symlink()]
    pages = {path.suffix: 0 for path in (Path("a.json"), Path("a.html"))}
    for path in laboratory.folder.glob("results/*/*.r*"):
        pages[path.suffix] = pages.get(path.suffix, 0) + 1
    requests = laboratory.folder / "records" / "requests"
    return (
        status.get("pid") == process.pid
        and sum(status["counts"].values()) == len(contents)
        and "accepted" not in status["counts"]
        and status["undelivered_files"]["count"] == status["undelivered_mails"]["count"] == 0
        and pages[".json"] == pages[".html"]
        and not (requests.is_dir() and any(requests.glob("*.json")))
    )


def finish(laboratory: Any, process: Any, eventually: Any) -> None:
    """Wait until a service has nothing left to do, and stop it in order."""
    eventually(lambda: is_idle(laboratory, process), "everything is done", 180.0)
    process.terminate()
    _, err = process.communicate(timeout=REACHED_SECONDS)
    assert process.returncode == 0, err


def uninterrupted(laboratory: Any, eventually: Any) -> None:
    """Let the same happen in the same order to a service that nobody kills."""
    for _, happening in ordinary():
        happening(laboratory)
    process = laboratory.start("watch")
    eventually(lambda: is_idle(laboratory, process), "everything is done", 180.0)
    for _, happening in out_of_the_ordinary():
        mails = sum(status_count(laboratory).values())
        happening(laboratory)
        eventually(lambda mails=mails: sum(status_count(laboratory).values()) > mails, "it is noticed", 60.0)
        eventually(lambda: is_idle(laboratory, process), "everything is done", 60.0)
    finish(laboratory, process, eventually)


def status_count(laboratory: Any) -> dict[str, int]:
    """What grows with everything that may happen: exports, problems, delivered files, requests done."""
    status = laboratory.status()
    return {
        "exports": sum(status["counts"].values()),
        "problems": len(status["problems"]),
        "files": len(list(laboratory.folder.glob("results/*/*"))),
        "closed": -len(status["open_failures"]),
    }


@pytest.mark.proof
@pytest.mark.skipif(not Path("/proc/self/environ").exists(), reason="workers are found in /proc")
def test_kills_of_service_and_worker_end_in_the_same_state(
    make_laboratory: Any, mail_server: Any, eventually: Any
) -> None:
    """Killed at each named moment and at random ones, results, ledger and mails are those of a run without kills.

    Alternately the service alone is killed and its worker with it. A mail came twice only where a kill left an attempt
    under way; the repeat bears the same identity and says what it may be.
    """
    began = time.monotonic()
    quiet, laboratory = make_laboratory(), make_laboratory()
    for each in (quiet, laboratory):
        each.mail_to(mail_server.port)
    uninterrupted(quiet, eventually)
    assert quiet.run("once").stdout == "Nothing new.\n"
    expected = what_remains.by_identity(mail_server.mailbox.received)
    assert all(len(messages) == 1 for messages in expected.values())
    mail_server.mailbox.received.clear()
    print(f"{time.monotonic() - began:.0f} s without kills", flush=True)

    killed = Killed(laboratory, eventually)
    at_random = 0
    plan = [*ordinary(), None, *out_of_the_ordinary()]
    for number, step in enumerate(plan, 1):
        if step is None:
            finish(laboratory, laboratory.start("watch"), eventually)
            continue
        killed.at(*step)
        while at_random < RANDOM_KILLS * number // len(plan):
            killed.at_random()
            at_random += 1
    finish(laboratory, laboratory.start("watch"), eventually)
    came = list(mail_server.mailbox.received)
    assert laboratory.run("once").stdout == "Nothing new.\n"
    print(f"{killed.kills} kills, {sum(killed.unknown.values())} mails of unknown outcome, ", end="")
    print(f"{time.monotonic() - began:.0f} s", flush=True)

    files, files_expected = what_remains.results(laboratory.folder), what_remains.results(quiet.folder)
    assert files.keys() == files_expected.keys()
    for name in files:
        assert files[name] == files_expected[name], name
    assert what_remains.delivered_as_recorded(laboratory.folder)
    found, wanted = what_remains.ledger(laboratory.folder), what_remains.ledger(quiet.folder)
    for table in wanted:
        assert found[table] == wanted[table], table
    assert list((laboratory.folder / "records" / "outgoing").iterdir()) == []
    assert [path.name for path in laboratory.folder.rglob("*.tmp")] == []
    assert laboratory.run("audit", "--all").returncode == 0

    assert mail_server.mailbox.received == came
    received = what_remains.by_identity(came)
    states = what_remains.mail_states(laboratory.folder)
    assert received.keys() == {identity for identity, state in states.items() if state == "delivered"}
    for identity, messages in received.items():
        assert len(messages) <= 1 + killed.unknown[identity]
        assert all(what_remains.says_repeat(each) for each in messages[1:])
        assert killed.unknown[identity] or not what_remains.says_repeat(messages[0])
        assert len({what_remains.letter(each) for each in messages}) == 1
    told, should_tell = (
        sorted(what_remains.letter(messages[0]) for messages in each.values()) for each in (received, expected)
    )
    assert told == should_tell
    # a plot that a kill or a busy computer took is not drawn again: its mail goes without, and none has another plot
    drawn = {what_remains.letter(each): what_remains.plots(each) for (each,) in expected.values()}
    assert any(drawn.values())
    for message in (each for messages in received.values() for each in messages):
        has, should_have = what_remains.plots(message), drawn[what_remains.letter(message)]
        assert not has or not should_have or has == should_have
