"""START HERE: the service waits, accepts, evaluates, records and delivers, until it is stopped.

`Service.run` is the unattended service, `Service.once` takes in what is there and ends; both go through the same
parts. Whoever opens a service holds the records folder (`watcher.instance`) and has adopted settings in the
ledger. What is computed is the worker's work; what is wrong is kept and told by `watcher.troubles`.
"""

from __future__ import annotations

import json
import os
import signal
import sqlite3
import threading
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from datetime import timedelta
from typing import TYPE_CHECKING

import structlog

from watcher import notices
from watcher.addressing import Addressing
from watcher.assessment import Assessed, Assessment
from watcher.attention import Attention
from watcher.backup import Backup
from watcher.clock import SystemClock, moment, stamp
from watcher.copies import Copies
from watcher.cut_short import CutShort
from watcher.disk import Disk
from watcher.errors import WatcherError
from watcher.events import Events
from watcher.folder import Trouble
from watcher.intake import Intake, Taken
from watcher.manager import Manager
from watcher.outbox import Files, Mails, OutboxThread
from watcher.paging import Pages
from watcher.post import Post
from watcher.pulse import Pulse
from watcher.requests import RequestRefused, waiting
from watcher.rounds import Rounds
from watcher.shelf import Shelf
from watcher.troubles import Troubles
from watcher.wake import Wake
from watcher.week import daily, hours
from watcher.worker import WorkerFailed, WorkerStopped, WorkerUnfit

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator
    from pathlib import Path

    from watcher.adoption import Adoption
    from watcher.clock import Clock
    from watcher.ledger import Ledger
    from watcher.ledger_rows import ExportRow, UndeliveredFile, UndeliveredMail
    from watcher.requests import Request
    from watcher.service_settings import ServiceSettings
    from watcher.worker import Worker

#: Seconds a clean stop may take for the threads that deliver.
STOP_SECONDS = 1.5
#: The shortest time between two looks, however many events ring.
LOOK_GAP_SECONDS = 0.2
#: The longest time until a person's request is done, or a changed file of the settings noticed.
ASKED_SECONDS = 2.0

_log = structlog.get_logger("spikewarden.service")


class ServiceUnready(WatcherError):
    """The ledger holds no settings to work with."""

    def __str__(self) -> str:
        return "No settings were adopted yet. Nothing was taken in. Adopt the configuration first."


@dataclass(frozen=True, slots=True)
class OnceReport:
    """What `Service.once` did.

    Attributes
    ----------
    assessed
        Every export that was evaluated, as it stands now.
    unsettled
        Names of files that were still changing or could not be read.
    troubles
        What is wrong, in sentences.
    undelivered_mails, undelivered_files
        What is still in the queue.
    stopped
        It was told to stop before it was done.
    """

    assessed: tuple[Assessed, ...]
    unsettled: tuple[str, ...]
    troubles: tuple[str, ...]
    undelivered_mails: tuple[UndeliveredMail, ...]
    undelivered_files: tuple[UndeliveredFile, ...]
    stopped: bool


def _unheard(_done: int, _count: int) -> None:
    """Nobody wants to hear how far it is."""


def _looking(settings: ServiceSettings) -> tuple[object, ...]:
    """What the way of looking through the folders depends on."""
    return settings.exports, settings.settle_seconds, settings.subfolders


class Service:
    """The service over one records folder.

    Parameters
    ----------
    settings
        The adopted settings as plain records.
    ledger
        Open, with settings adopted.
    worker
        Computes; given its settings here.
    version
        The program's, for the heartbeat.
    adoption
        Looks after the files of the settings; None: what was adopted stays.
    disk, clock
        The world; for tests.

    Raises
    ------
    ServiceUnready
        No settings were adopted.
    """

    def __init__(
        self,
        settings: ServiceSettings,
        ledger: Ledger,
        worker: Worker,
        *,
        version: str = "unknown",
        adoption: Adoption | None = None,
        disk: Disk | None = None,
        clock: Clock | None = None,
    ) -> None:
        adopted = ledger.current_settings()
        if adopted is None:
            raise ServiceUnready
        disk, clock = disk or Disk(), clock or SystemClock()
        self._settings = settings
        self._adopted = adopted
        self._ledger = ledger
        self._worker = worker
        self._clock = clock
        self._stopping = False
        self._adoption = adoption
        self._disk = disk
        self._wake = Wake()
        self._halt = Wake()
        worker.on_start = [{"do": "adopt", "snapshot": json.loads(adopted.body)}]
        self._addressing = Addressing(settings.mail, clock)
        self._troubles = Troubles(ledger, self._addressing, clock)
        self._copies = Copies(
            settings.records,
            disk,
            size_limit_bytes=settings.size_limit_bytes,
            reserve_bytes=settings.reserve_bytes,
        )
        self._intake = Intake(settings, ledger, self._copies, clock)
        self._assessment = Assessment(
            settings,
            adopted,
            worker=worker,
            ledger=ledger,
            copies=self._copies,
            addressing=self._addressing,
            troubles=self._troubles,
            clock=clock,
            disk=disk,
        )
        self._shelf = Shelf(settings.laboratory, ledger, self._troubles, disk, clock)
        self._files = Files(ledger.outgoing, settings.results, disk, clock, shelf=self._shelf)
        self._pages = Pages(
            ledger, worker, self._troubles, clock, staging=self._assessment.staging, results=settings.results
        )
        self._mails = Mails(ledger.outgoing, Post(settings.mail) if settings.mail else None, clock)
        self._pulse = Pulse(settings, ledger, self._troubles, clock, version=version, settings_number=adopted.number)
        self._cut_short = CutShort(settings.records)
        self._attention = Attention(disk, clock)
        self._backup = Backup(ledger, settings.records, disk, clock)
        self._manager = Manager(clock)
        self._began_at = clock.now()
        self._looks = 0
        self._threads: list[Rounds] = []
        self._evaluating: Rounds | None = None
        self._rung_for = ledger.changes

    # -- the three that say it all -----------------------------------------------------------------------------

    def run(self) -> None:
        """Wait, accept, evaluate, record and deliver, until stopped by a signal or `stop`."""
        with self._stopped_by_signals(), self._open(), self._delivering(), self._listening() as events:
            while not self._stopping:
                events.renew()
                seconds = self._troubles.survive("taking in", self._round)
                self._troubles.survive("reporting", self._tell)
                self._show_life()
                self._rest(self._settings.scan_seconds if seconds is None else seconds)

    def once(self, told: Callable[[int, int], None] = _unheard) -> OnceReport:
        """Take in what is there now, evaluate it, try each delivery that is due once, and end.

        `told` hears how many exports are done, and how many there are in all.
        """
        with self._stopped_by_signals(), self._open():
            self._do_requests()
            self._take_in()
            self._halt.wait(self._settings.settle_seconds + 0.01)
            taken = self._take_in()
            assessed = self._evaluate_everything(told)
            self._tell()
            self._draw_pictures()
            if not self._stopping:
                self._files.deliver_due()
                self._mails.deliver_due(patient=False)
                while self._draw_page():
                    self._files.deliver_due()
            return self._report(taken, assessed)

    def _round(self) -> float:
        """Look and take in; returns how long to wait before the next look. Evaluating has a thread of its own."""
        taken = self._take_in()
        self._looks += 1
        if taken.exports and self._evaluating is not None:
            self._evaluating.ring()
        if taken.settles_at is not None:
            return max(taken.settles_at - self._clock.monotonic(), 0.0) + 0.005
        return self._settings.scan_seconds

    def _evaluation_round(self) -> float:
        """Adopt what changed, do what people asked for, evaluate for a while; how long to wait then."""
        self._look_after_settings()
        self._do_requests()
        more = self._evaluate_for_a_while() or self._draw_page()
        self._worker.retire_if_idle()
        if self._settings.backup is not None:
            self._back_up(self._settings.backup)
        return 0.0 if more else min(self._settings.scan_seconds, ASKED_SECONDS)

    # -- stopping ----------------------------------------------------------------------------------------------

    def note(self, found: Iterable[Trouble]) -> None:
        """Say what was found at the start and is to be told."""
        self._troubles.set("start", found)

    def stop(self) -> None:
        """End soon; safe to call from a signal handler and from any thread. Accepted exports stay accepted."""
        self._stopping = True
        self._worker.interrupt()
        self._halt.ring()
        self._wake.ring()

    # -- the steps of a round ----------------------------------------------------------------------------------

    def _take_in(self) -> Taken:
        taken = self._intake.take_in(lambda: self._stopping)
        self._troubles.set("folders", taken.troubles)
        self._pulse.looked(taken)
        return taken

    def _evaluate_for_a_while(self) -> bool:
        """Evaluate pending exports until the next look is due; returns whether some are left."""
        until = self._clock.monotonic() + self._settings.scan_seconds
        for export in self._pending():
            if self._stopping or not self._evaluate(export, at_once=False):
                return False
            if self._clock.monotonic() >= until:
                return True
        return bool(self._pending()) and not self._stopping

    def _evaluate_everything(self, told: Callable[[int, int], None] = _unheard) -> dict[int, Assessed]:
        """Evaluate until nothing is pending; for `once`, after which nobody waits for what a sample still lacks."""
        assessed: dict[int, Assessed] = {}
        while exports := self._pending():
            count = len(assessed) + len(exports)
            for export in exports:
                told(len(assessed), count)
                if self._stopping or not (found := self._evaluate(export, at_once=True)):
                    return assessed
                assessed[export.id] = found
        return assessed

    def _draw_page(self) -> bool:
        """Draw one page; returns whether there was one to draw. An export that came meanwhile is evaluated first."""
        self._draw_pictures()
        try:
            drawn = not self._stopping and self._pages.draw_next()
        except (WorkerStopped, WorkerUnfit):
            return False
        self._ring_deliverers()
        return drawn

    def _draw_pictures(self) -> None:
        """Draw the plots of mails that were just queued; the mails wait for them a moment."""
        if self._assessment.undrawn and not self._stopping:
            self._assessment.undrawn = False
            with suppress(WorkerStopped, WorkerUnfit):
                self._pages.draw_pictures()

    def _look_after_settings(self) -> None:
        if self._adoption is not None and self._adoption.changed():
            self._adopt(self._adoption)

    def _adopt(self, adoption: Adoption, request: Request | None = None) -> None:
        """Read the files of the settings and work with what may be adopted of them from now on."""
        try:
            found = adoption.adopt(self._settings, request.by if request else None, request.why if request else "")
        except WorkerStopped:
            return
        except (WorkerUnfit, WorkerFailed) as error:
            self._troubles.set("settings", [Trouble("settings-unread", f"The settings cannot be read. {error}")])
            return
        self._troubles.set("settings", found.troubles)
        if found.settings is not None:
            self._work_with(found.settings)

    def _work_with(self, settings: ServiceSettings) -> None:
        """Work with newly adopted settings; what is under way ends under the old ones."""
        adopted = self._ledger.current_settings()
        if adopted is None:  # they were recorded a moment ago
            raise ServiceUnready
        if _looking(settings) != _looking(self._settings):
            self._intake = Intake(settings, self._ledger, self._copies, self._clock)
        self._settings, self._adopted = settings, adopted
        self._worker.on_start = [{"do": "adopt", "snapshot": json.loads(adopted.body)}]
        self._worker.restart()
        self._addressing.renew(settings.mail)
        self._assessment.renew(settings, adopted)
        self._files.renew(settings.results)
        self._shelf.renew(settings.laboratory)
        self._pages.renew(settings.results)
        self._mails.renew(Post(settings.mail) if settings.mail else None)
        self._pulse.renew(settings, adopted.number)
        self._ring_deliverers()
        self._wake.ring()

    def _do_requests(self) -> None:
        """Do what people asked for through files in the records; each is removed once the ledger holds it."""
        refused: list[Trouble] = []
        for path, request in waiting(self._settings.records):
            if request is None:
                refused.append(Trouble(f"odd:request:{path.name}", f"{path} is no request of ours. Remove it."))
                continue
            try:
                if request.kind != "adopt":
                    self._ledger.do(request)
                elif self._adoption is not None:
                    self._adopt(self._adoption, request)
            except RequestRefused as error:
                _log.warning("request refused", by=request.by, reason=str(error))
            path.unlink(missing_ok=True)
        self._troubles.set("requests", refused)

    def _back_up(self, folder: Path) -> None:
        try:
            self._backup.keep(folder)
        except (OSError, sqlite3.Error) as error:
            sentence = (
                f"The backup in {folder} cannot be written ({error}). Everything else goes on. "
                "See whether it is connected, may be written and has space; it is tried again by itself."
            )
            self._troubles.set("backup", [Trouble(f"backup:{folder}", sentence)])
        else:
            self._troubles.set("backup", [])

    def _pending(self) -> list[ExportRow]:
        complete_after_seconds = self._settings.complete_after_seconds
        exports = self._ledger.pending(self._adopted.number, complete_after_seconds=complete_after_seconds)
        # The one that the last run did not survive comes last, so that it cannot keep the others waiting.
        return sorted(exports, key=lambda each: each.id == self._cut_short.export_id)

    def _evaluate(self, export: ExportRow, *, at_once: bool) -> Assessed | None:
        """Evaluate one export; None where the worker cannot work now, and nothing was recorded."""
        self._cut_short.begins(export.id)
        self._pulse.evaluates(export.name)
        try:
            assessed = self._assessment.evaluate(export, at_once=at_once)
        except WorkerStopped:
            return None
        except WorkerUnfit as error:
            self._troubles.set("worker", [Trouble("worker-unfit", str(error))])
            return None
        finally:
            self._cut_short.ends()
            self._pulse.evaluates(None)
        self._troubles.set("worker", [])
        self._ring_deliverers()
        return assessed

    def _tell(self) -> None:
        """Mail what is new about troubles and unclaimed exports; write the heartbeat."""
        self._troubles.set("silence", self._silence())
        self._troubles.set("mail", self._mail_is_broken())
        self._troubles.report_new()
        self._say_alive()
        self._digest_unclaimed()
        self._ring_deliverers()
        self._pulse.beat(running=True)

    def _ring_deliverers(self) -> None:
        """Wake the threads that deliver where something was recorded that may be for them."""
        if self._rung_for != self._ledger.changes:
            self._rung_for = self._ledger.changes
            for thread in self._threads:
                thread.ring()

    def _silence(self) -> list[Trouble]:
        """Tell when nothing arrived for longer than the laboratory expects."""
        settings = self._settings
        if not settings.silence_seconds:
            return []
        last = self._ledger.last_accepted_at()
        since = self._began_at if last is None else moment(last)
        quiet = hours(settings.silence_hours).within(since, self._clock.now())
        if quiet.total_seconds() <= settings.silence_seconds:
            return []
        came = "none came yet" if last is None else f"the last one came at {last}"
        return [
            Trouble(
                f"silence:{last}",
                f"No export arrived for {quiet.total_seconds() / 3600:.1f} h of {settings.silence_hours}: {came}. "
                "See whether the instrument's program still exports into the folder, and whether the share is there.",
            )
        ]

    def _mail_is_broken(self) -> list[Trouble]:
        """Keep ATTENTION.txt in the results folder while mails do not go out; it reaches people when mail does not."""
        mail = self._settings.mail
        if mail is None:
            return []
        try:
            sentence = self._attention.show(
                self._settings.results, f"{mail.server}:{mail.port}", self._ledger.outgoing.undelivered_mails()
            )
        except OSError as error:
            sentence = f"Mails do not go out, and {self._settings.results} cannot be written either ({error})."
        return [] if sentence is None else [Trouble("mail", sentence)]

    def _say_alive(self) -> None:
        """Mail once a day that the service runs, and what is open."""
        mail, now = self._settings.mail, self._clock.now()
        if mail is None or mail.daily is None or not daily(mail.daily).has_come(now):
            return
        day = f"{now.astimezone():%Y-%m-%d}"
        if self._ledger.mailed(f"alive:{day}"):
            return
        counts = self._ledger.accepted_since(stamp(now - timedelta(hours=24)))
        wanted = notices.alive(day, counts, self._ledger.open_failures(), self._troubles.sentences())
        if (queued := self._addressing.address(wanted)) is not None:
            self._ledger.report(queued)

    def _show_life(self) -> None:
        """Tell the service manager, if the folders were looked through and the mailing thread came by since."""
        if self._threads and self._manager.due():
            self._threads[1].ring()
            self._manager.alive(self._looks, self._threads[1].count)

    def _digest_unclaimed(self) -> None:
        """Mail once a day which exports no layout claims, all those that no such mail named yet."""
        today = f"unclaimed:{self._clock.now():%Y-%m-%d}"
        if self._settings.mail is None or self._ledger.mailed(today):
            return
        keys = {f"unclaimed:{each.name}:{each.sha256}": each for each in self._ledger.unclaimed()}
        new = {key: each for key, each in keys.items() if not self._ledger.mailed(key)}
        mail = self._addressing.address(notices.unclaimed(list(new.values()), (today, *new))) if new else None
        if mail is not None:
            self._ledger.report(mail)

    def _rest(self, seconds: float) -> None:
        """Wait for a ring; many rings in a row do not make many looks."""
        if self._manager.interval_seconds is not None:
            seconds = min(seconds, self._manager.interval_seconds / 4)
        if self._stopping or not self._wake.wait(seconds):
            return
        self._halt.wait(min(LOOK_GAP_SECONDS, self._settings.settle_seconds))

    def _report(self, taken: Taken, assessed: dict[int, Assessed]) -> OnceReport:
        outgoing = self._ledger.outgoing
        return OnceReport(
            assessed=tuple(assessed.values()),
            unsettled=taken.unsettled,
            troubles=tuple(self._troubles.sentences()),
            undelivered_mails=tuple(outgoing.undelivered_mails()),
            undelivered_files=tuple(outgoing.undelivered_files()),
            stopped=self._stopping,
        )

    # -- opening and closing -----------------------------------------------------------------------------------

    @contextmanager
    def _open(self) -> Iterator[None]:
        """Put the records in order after whatever the last run went through; leave them in order."""
        unknown = self._ledger.outgoing.recover()
        self._copies.prepare()
        self._assessment.prepare()
        self._files.prepare()
        _log.info("service begins", pid=os.getpid(), attempts_of_unknown_outcome=unknown)
        try:
            yield
        finally:
            self._worker.close()
            self._pulse.beat(running=False)
            self._shelf.refresh(self._settings.results, running=False, now=True)
            _log.info("service ends", stopped=self._stopping)

    @contextmanager
    def _delivering(self) -> Iterator[None]:
        """Run the two threads that deliver."""
        self._threads = [
            OutboxThread("delivering result files", self._files, self._troubles.survive, self._clock),
            OutboxThread("mailing", self._mails, self._troubles.survive, self._clock),
        ]
        self._evaluating = Rounds(
            "evaluating", self._evaluation_round, self._worker.interrupt, self._troubles.survive, self._clock
        )
        self._threads.append(self._evaluating)
        self._pulse.follow(self._threads[1])
        self._manager.ready()
        for thread in self._threads:
            thread.start()
        try:
            yield
        finally:
            self._manager.stopping()
            for thread in self._threads:
                thread.stop(STOP_SECONDS)

    @contextmanager
    def _listening(self) -> Iterator[Events]:
        settings = self._settings
        events = Events(settings.exports, self._wake, subfolders=settings.subfolders, enabled=settings.events)
        try:
            yield events
        finally:
            events.close()

    @contextmanager
    def _stopped_by_signals(self) -> Iterator[None]:
        """Let the signals that ask a process to end call `stop`, while this runs in the main thread."""
        if threading.current_thread() is not threading.main_thread():
            yield
            return
        names = [name for name in ("SIGTERM", "SIGINT", "SIGBREAK") if hasattr(signal, name)]
        before = {name: signal.signal(getattr(signal, name), lambda *_: self.stop()) for name in names}
        try:
            yield
        finally:
            for name, handler in before.items():
                signal.signal(getattr(signal, name), handler)
