"""The two deliverers: result files and mails, each with its own thread, so that neither waits for the other.

Both do the same: take what is due from the ledger, try it once, write down how that ended, and sleep until the
next is due or somebody rings. `once` does a single round of the same without the threads.
"""

from __future__ import annotations

import contextlib
from dataclasses import replace
from datetime import timedelta
from typing import TYPE_CHECKING, Protocol

import structlog

from watcher.backoff import Backoff
from watcher.clock import moment, stamp
from watcher.delivery import deliver
from watcher.disk import sweep
from watcher.errors import WatcherError
from watcher.kill_points import at
from watcher.letter import compose
from watcher.rounds import Rounds

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from watcher.clock import Clock
    from watcher.disk import Disk
    from watcher.ledger_rows import DueFile, DueMail, RecipientOutcome
    from watcher.outgoing import Outgoing
    from watcher.post import Post
    from watcher.shelf import Shelf

#: A spreadsheet that holds a file open is closed within minutes; a share may be away for a day.
FILE_BACKOFF = Backoff(5.0, 300.0)
#: An alert counts while the vials are on the rack: the first retries come fast.
MAIL_BACKOFF = Backoff(10.0, 900.0)
#: So long a mail waits for its plots, which are drawn once it is queued.
PICTURE_PATIENCE = timedelta(seconds=4)
#: The longest sleep, whatever the ledger says: a clock that was set back must not stop deliveries.
LONGEST_SLEEP = 60.0

_log = structlog.get_logger("spikewarden.outbox")


class Deliverer(Protocol):
    """What a thread of the outbox runs."""

    def deliver_due(self) -> int:
        """Try everything that is due once; returns how many attempts were made."""
        ...

    def seconds_to_next(self) -> float:
        """How long nothing is due."""
        ...

    def close(self) -> None:
        """Break off an attempt under way."""
        ...


class Files:
    """Delivers result files.

    Parameters
    ----------
    outgoing
        The queue.
    results
        The results folder.
    disk, clock
        The world.
    backoff
        When to try again.
    shelf
        Keeps the list of what lies in the results folder.
    """

    def __init__(
        self,
        outgoing: Outgoing,
        results: Path,
        disk: Disk,
        clock: Clock,
        backoff: Backoff = FILE_BACKOFF,
        shelf: Shelf | None = None,
    ) -> None:
        self._shelf = shelf
        self._outgoing = outgoing
        self._results = results
        self._disk = disk
        self._clock = clock
        self._backoff = backoff
        self._closed = False
        #: The results folder was made and its name was not forced to disk yet.
        self._nameless = False

    def renew(self, results: Path) -> None:
        """Deliver to this results folder from now on."""
        if results != self._results:
            self._results = results
            self.prepare()

    def prepare(self) -> None:
        """Make the results folder before the first delivery ever; remove what a killed run left in it."""
        with contextlib.suppress(OSError):  # each delivery says what is wrong; mails must not wait for it
            if not self._outgoing.any_file_delivered():
                self._results.mkdir(parents=True, exist_ok=True)
                self._nameless = True
            for folder in (self._results, *(each for each in self._results.iterdir() if each.is_dir())):
                sweep(folder)

    def deliver_due(self) -> int:
        """Try every due file once."""
        due = self._outgoing.due_files(self._clock.now())
        for each in due:
            if self._closed:
                break
            self._deliver(each)
        if self._shelf is not None:
            self._shelf.refresh(self._results)
        return len(due)

    def seconds_to_next(self) -> float:
        """How long nothing is due."""
        due = _seconds_to_next(self._outgoing, "files", self._clock)
        return due if self._shelf is None else min(due, max(self._shelf.seconds_to_next(), 0.05))

    def close(self) -> None:
        """Begin no further attempt; one under way is short."""
        self._closed = True

    def _deliver(self, due: DueFile) -> None:
        try:
            if self._nameless:
                # Before anything counts as delivered: a power cut would take the folder with all that lies in it.
                self._disk.sync_folder(self._results.parent)
                self._nameless = False
            deliver(due, self._results, self._disk)
        except (OSError, WatcherError) as error:
            again = self._clock.now() + self._backoff.after(due.attempts + 1)
            self._outgoing.file_failed(due, str(error), again)
            _log.warning("result file not delivered", target=due.target, error=str(error), again=stamp(again))
            return
        self._outgoing.file_delivered(due)
        due.staged.unlink(missing_ok=True)
        at("staged-removed")
        _log.info("result file delivered", target=due.target)


class Mails:
    """Delivers mails.

    Parameters
    ----------
    outgoing
        The queue.
    post
        The way to the server; None: no mail is sent, what is queued stays.
    clock
        The world.
    backoff
        When to try again.
    """

    def __init__(self, outgoing: Outgoing, post: Post | None, clock: Clock, backoff: Backoff = MAIL_BACKOFF) -> None:
        self._outgoing = outgoing
        self._post = post
        self._clock = clock
        self._backoff = backoff
        self._closed = False

    def renew(self, post: Post | None) -> None:
        """Send by this way from now on; an attempt under way is not broken off."""
        self._post = post

    def deliver_due(self, *, patient: bool = True) -> int:
        """Try every due mail once; if patient, a mail whose plots are being drawn only in a moment."""
        if self._post is None:
            return 0
        due = self._outgoing.due_mails(self._clock.now())
        for each in due:
            if self._closed:
                break
            if not (patient and self._awaits_pictures(each)):
                self._send(each, self._post)
        return len(due)

    def seconds_to_next(self) -> float:
        """How long nothing is due."""
        return LONGEST_SLEEP if self._post is None else _seconds_to_next(self._outgoing, "mails", self._clock)

    def close(self) -> None:
        """Break off the attempt under way; its outcome is written down as what it is."""
        self._closed = True
        if self._post is not None:
            self._post.close()

    def _awaits_pictures(self, due: DueMail) -> bool:
        """Tell whether a mail's plots are being drawn; it waits for them for a moment only."""
        age = self._clock.now() - moment(due.created_at)
        # A mail of the future was queued before the clock was set back: it waits for nothing.
        return timedelta(0) <= age < PICTURE_PATIENCE and not all(picture.staged.exists() for picture in due.pictures)

    def _send(self, due: DueMail, post: Post) -> None:
        message = compose(due, post.sender, due.recipients, self._clock.now())
        if not self._outgoing.sending(due):
            return
        outcomes = post.send(message, due.recipients)
        at("mail-answered")
        again = stamp(self._clock.now() + self._backoff.after(due.attempts + 1))
        self._outgoing.outcome(due, [self._planned(each, again) for each in outcomes])
        if due.pictures and self._outgoing.is_settled(due):
            for picture in due.pictures:
                picture.staged.unlink(missing_ok=True)
        for each in outcomes:
            _log.log(
                20 if each.state == "delivered" else 30,
                "mail",
                message_id=due.message_id,
                subject=due.subject,
                address=each.address,
                outcome=each.state,
                error=each.error,
            )

    def _planned(self, outcome: RecipientOutcome, again: str) -> RecipientOutcome:
        return replace(outcome, due_at=again) if outcome.state in ("waiting", "unknown") else outcome


class OutboxThread(Rounds):
    """Runs a deliverer until told to stop; see `Rounds`."""

    def __init__(
        self,
        name: str,
        deliverer: Deliverer,
        survive: Callable[[str, Callable[[], float]], float | None],
        clock: Clock,
    ) -> None:
        def turn() -> float:
            deliverer.deliver_due()
            return deliverer.seconds_to_next()

        super().__init__(name, turn, deliverer.close, survive, clock)


def _seconds_to_next(outgoing: Outgoing, what: str, clock: Clock) -> float:
    due = outgoing.next_due(what)
    if due is None:
        return LONGEST_SLEEP
    return min(max((due - clock.now()).total_seconds(), 0.05), LONGEST_SLEEP)
