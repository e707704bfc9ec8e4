"""The two deliverers and their threads."""

from __future__ import annotations

import hashlib
import threading
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import pytest

from watcher.backoff import Backoff
from watcher.disk import Disk
from watcher.ledger_rows import Picture, RecipientOutcome, StagedFile
from watcher.letter import PNG
from watcher.outbox import PICTURE_PATIENCE, Files, Mails, OutboxThread

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger

STEADY = Backoff(10.0, 60.0, lambda: 1.0)


class _ScriptedPost:
    """Answers each attempt with the next outcome of its script."""

    sender = "bench@example"

    def __init__(self, *states: str) -> None:
        self.states = list(states)
        self.messages: list[str] = []

    def send(self, message: bytes, recipients: tuple[str, ...]) -> list[RecipientOutcome]:
        self.messages.append(message.decode())
        state = self.states.pop(0)
        return [RecipientOutcome(each, state, None if state == "delivered" else "as scripted") for each in recipients]

    def close(self) -> None:
        """Nothing to break off."""


def _mails(ledger: Ledger, clock: Any, *states: str) -> tuple[Mails, _ScriptedPost]:
    post = _ScriptedPost(*states)
    return Mails(ledger.outgoing, post, clock, STEADY), post  # type: ignore[arg-type]


def test_a_mail_is_tried_at_growing_intervals_until_it_is_delivered(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """Put off three times, a mail is tried after 10, 20 and 40 seconds, and never after it was delivered."""
    ledger.report(make_mail())
    deliverer, post = _mails(ledger, clock, "waiting", "waiting", "waiting", "delivered")
    for wait in (10, 20, 40):
        assert deliverer.deliver_due() == 1
        assert deliverer.seconds_to_next() == wait
        assert deliverer.deliver_due() == 0
        clock.advance(wait)
    deliverer.deliver_due()
    clock.advance(10_000)

    assert deliverer.deliver_due() == 0
    assert len(post.messages) == 4
    assert len({message.split("Message-ID: ")[1].split("\r\n")[0] for message in post.messages}) == 1


def test_after_an_unknown_outcome_repeats_say_so(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """The first attempt says nothing, every later one is a possible repeat."""
    ledger.report(make_mail())
    deliverer, post = _mails(ledger, clock, "unknown", "waiting", "delivered")
    for _ in range(3):
        deliverer.deliver_due()
        clock.advance(60)

    assert ["possible repeat" in message for message in post.messages] == [False, True, True]


def test_a_refused_mail_is_not_tried_again_and_stays_visible(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """A recipient refused for good is kept with the reason."""
    ledger.report(make_mail())
    deliverer, _ = _mails(ledger, clock, "refused")
    deliverer.deliver_due()
    clock.advance(100_000)

    assert deliverer.deliver_due() == 0
    (left,) = ledger.outgoing.undelivered_mails()
    assert (left.address, left.state, left.last_error) == ("lead@example", "refused", "as scripted")


@pytest.fixture
def mail_with_plot(ledger: Ledger, clock: Any, make_mail: Any, tmp_path: Path) -> Path:
    """A queued mail whose plot is not drawn yet; returns where it will be."""
    place = tmp_path / "plot.png"
    ledger.report(replace(make_mail(), pictures=(Picture(place, "the line"),)))
    return place


def test_a_mail_waits_for_its_plot_and_goes_when_it_is_there(ledger: Ledger, clock: Any, mail_with_plot: Path) -> None:
    """The mail is held while its plot is drawn, bears it, and the file is gone once nobody needs it."""
    deliverer, post = _mails(ledger, clock, "delivered")
    deliverer.deliver_due()
    assert post.messages == []

    mail_with_plot.write_bytes(PNG + b"plot")
    deliverer.deliver_due()

    (message,) = post.messages
    assert "image/png" in message
    assert not mail_with_plot.exists()


def test_a_plot_that_is_never_drawn_keeps_no_alert_back(ledger: Ledger, clock: Any, mail_with_plot: Path) -> None:
    """After a moment the mail goes without its plot."""
    deliverer, post = _mails(ledger, clock, "delivered")

    clock.advance(PICTURE_PATIENCE.total_seconds())
    deliverer.deliver_due()

    assert len(post.messages) == 1
    assert not mail_with_plot.exists()


def test_a_clock_set_back_makes_no_mail_wait_longer(ledger: Ledger, clock: Any, mail_with_plot: Path) -> None:
    """A mail that seems to be of the future waits for nothing."""
    deliverer, _ = _mails(ledger, clock)
    (due,) = ledger.outgoing.due_mails(clock.now())
    assert deliverer._awaits_pictures(due)

    clock.advance(-3600)

    assert not mail_with_plot.exists()
    assert not deliverer._awaits_pictures(due)


def test_once_waits_for_no_plot(ledger: Ledger, clock: Any, mail_with_plot: Path) -> None:
    """A single round that nobody follows up sends the mail as it is."""
    deliverer, post = _mails(ledger, clock, "delivered")

    deliverer.deliver_due(patient=False)

    assert len(post.messages) == 1
    assert not mail_with_plot.exists()


def test_without_mail_nothing_is_sent_and_nothing_is_lost(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """A queue filled under other settings waits while mail is switched off."""
    ledger.report(make_mail())

    assert Mails(ledger.outgoing, None, clock).deliver_due() == 0
    assert len(ledger.outgoing.undelivered_mails()) == 1


@pytest.fixture
def staged(ledger: Ledger, tmp_path: Path, done: Any) -> Path:
    """A result file in the queue."""
    path = tmp_path / "FL-1.r1.csv"
    path.write_bytes(b"SED-12,pass\n")
    file = StagedFile("2026-12/FL-1.r1.csv", path, hashlib.sha256(path.read_bytes()).hexdigest())
    export = ledger.accept("FL-1.csv", "1" * 64, 12)
    assert export is not None
    ledger.finish(export, done(files=(file,)))
    return path


class _HeldDisk(Disk):
    """A disk on which files cannot be replaced, so many times."""

    def __init__(self, times: int) -> None:
        super().__init__()
        self.times = times

    def replace(self, source: Path, target: Path) -> None:
        if self.times:
            self.times -= 1
            raise PermissionError(13, "held open by another program")
        super().replace(source, target)


def test_a_held_file_waits_and_arrives(ledger: Ledger, clock: Any, staged: Path, tmp_path: Path) -> None:
    """A result file held open is tried again when due; delivered, its staged copy is gone."""
    deliverer = Files(ledger.outgoing, tmp_path / "results", _HeldDisk(2), clock, STEADY)
    deliverer.prepare()
    for wait in (10, 20):
        deliverer.deliver_due()
        assert "held open" in (ledger.outgoing.undelivered_files()[0].last_error or "")
        assert staged.exists()
        assert [path for path in (tmp_path / "results").rglob("*") if path.is_file()] == []
        clock.advance(wait)

    deliverer.deliver_due()

    assert (tmp_path / "results" / "2026-12" / "FL-1.r1.csv").read_bytes() == b"SED-12,pass\n"
    assert not staged.exists()
    assert ledger.outgoing.undelivered_files() == []


def test_the_results_folder_is_made_only_before_the_first_delivery(
    ledger: Ledger, clock: Any, staged: Path, tmp_path: Path
) -> None:
    """Once something was delivered, a missing results folder is a share that is gone."""
    deliverer = Files(ledger.outgoing, tmp_path / "results", Disk(), clock, STEADY)
    deliverer.prepare()
    deliverer.deliver_due()
    (tmp_path / "results").rename(tmp_path / "away")

    deliverer.prepare()

    assert not (tmp_path / "results").exists()


class _Counted:
    """A deliverer that tells of its rounds and fails in the first."""

    def __init__(self) -> None:
        self.rounds = 0
        self.ran = threading.Semaphore(0)
        self.closed = False

    def deliver_due(self) -> int:
        self.rounds += 1
        self.ran.release()
        if self.rounds == 1:
            raise ZeroDivisionError
        return 0

    def seconds_to_next(self) -> float:
        return 60.0

    def close(self) -> None:
        self.closed = True


def test_a_thread_survives_a_failed_round_and_stops_when_told(clock: Any) -> None:
    """A round that fails is handed on; a ring starts the next one; stopping takes no time."""
    failed: list[str] = []

    def survive(part: str, work: Any) -> float | None:
        try:
            return float(work())
        except ZeroDivisionError:
            failed.append(part)
            return None

    deliverer = _Counted()
    thread = OutboxThread("mailing", deliverer, survive, clock)
    thread.start()
    assert deliverer.ran.acquire(timeout=10)
    thread.ring()
    assert deliverer.ran.acquire(timeout=10)

    assert thread.stop(10.0)
    assert failed == ["mailing"]
    assert deliverer.closed
    assert thread.last_round_at == "2026-12-01T07:30:00.000000Z"
