"""The service's own account of how it is, gathered and written as a heartbeat after each round.

Figures from the ledger are read again only when the ledger changed, so that an idle service stays idle over a
ledger of any size. The file itself is described in `watcher.health`.
"""

from __future__ import annotations

import os
import threading
from dataclasses import replace
from typing import TYPE_CHECKING

from watcher.clock import stamp
from watcher.health import Heartbeat, Undelivered, write_heartbeat

if TYPE_CHECKING:
    from collections.abc import Sequence

    from watcher.clock import Clock
    from watcher.intake import Taken
    from watcher.ledger import Ledger
    from watcher.ledger_rows import UndeliveredMail
    from watcher.rounds import Rounds
    from watcher.service_settings import ServiceSettings
    from watcher.troubles import Troubles

#: Figures that change with time alone are read again after so many seconds.
REREAD_SECONDS = 60.0
#: Open failures that are listed; the daily mail counts them all.
MOST_FAILURES = 200
#: Exports that are listed, the newest.
MOST_LATEST = 8
#: How often an idle service shows that it lives.
BEAT_SECONDS = 30.0
#: How old the heartbeat may be when an evaluation begins that may take minutes.
SHOW_SECONDS = 1.0


class Pulse:
    """Writes the heartbeat.

    Parameters
    ----------
    settings, ledger, troubles, clock
        What it tells about.
    version, settings_number
        What is running.
    """

    def __init__(
        self,
        settings: ServiceSettings,
        ledger: Ledger,
        troubles: Troubles,
        clock: Clock,
        *,
        version: str,
        settings_number: int,
    ) -> None:
        self._records = settings.records
        self._ledger = ledger
        self._troubles = troubles
        self._clock = clock
        self._mailing: Rounds | None = None
        self._lock = threading.Lock()
        self._read: tuple[int, float] | None = None
        self._written = self._evaluating_since = clock.monotonic()
        now = stamp(clock.now())
        self._last = Heartbeat(
            running=True,
            pid=os.getpid(),
            version=version,
            laboratory=settings.laboratory,
            started_at=now,
            written_at=now,
            settings_number=settings_number,
        )

    def follow(self, mailing: Rounds) -> None:
        """Tell when this thread last came by."""
        self._mailing = mailing

    def renew(self, settings: ServiceSettings, settings_number: int) -> None:
        """Other settings are in force."""
        with self._lock:
            self._last = replace(self._last, laboratory=settings.laboratory, settings_number=settings_number)
            self._read = None  # shown at the next beat

    def looked(self, taken: Taken) -> None:
        """The folders were looked through."""
        last = taken.exports[-1].name if taken.exports else self._last.last_export
        with self._lock:
            self._last = replace(self._last, last_scan_at=stamp(self._clock.now()), last_export=last)

    def evaluates(self, name: str | None) -> None:
        """An export is being evaluated, or none any more; shown at once where nothing was written for a while."""
        with self._lock:
            self._last = replace(self._last, evaluating=name)
            self._evaluating_since = self._clock.monotonic()
            self._show_evaluation(name)

    def _show_evaluation(self, name: str | None) -> None:
        if name is not None and self._clock.monotonic() - self._written >= SHOW_SECONDS:
            self._write(running=True)

    def beat(self, *, running: bool) -> None:
        """Write the heartbeat; while nothing but the time changes, only now and then."""
        problems = self._troubles.sentences()
        with self._lock:
            self._beat(problems, running=running)

    def _beat(self, problems: list[str], *, running: bool) -> None:
        news = self._reread() or problems != self._last.problems or running != self._last.running
        # an evaluation that takes its time is shown, one that is over in a moment is not worth a write
        long_ago = self._clock.monotonic() - SHOW_SECONDS
        news |= self._last.evaluating is not None and self._written < self._evaluating_since <= long_ago
        if news or self._clock.monotonic() - self._written >= BEAT_SECONDS:
            self._last = replace(self._last, problems=problems)
            self._write(running=running)

    def _write(self, *, running: bool) -> None:
        self._written = self._clock.monotonic()
        self._last = replace(
            self._last,
            running=running,
            written_at=stamp(self._clock.now()),
            last_delivery_at=None if self._mailing is None else self._mailing.last_round_at,
        )
        write_heartbeat(self._records, self._last)

    def _reread(self) -> bool:
        """Read the figures of the ledger again where they may have changed."""
        now = self._clock.monotonic()
        if self._read and self._read[0] == self._ledger.changes and now - self._read[1] < REREAD_SECONDS:
            return False
        self._read = (self._ledger.changes, now)
        mails = self._ledger.outgoing.undelivered_mails()
        files = self._ledger.outgoing.undelivered_files()
        file_errors = [each.last_error for each in files if each.last_error]
        self._last = replace(
            self._last,
            counts=self._ledger.counts(),
            refused=self._ledger.refused(),
            open_failures=self._ledger.open_failures()[:MOST_FAILURES],
            latest=self._ledger.listed(MOST_LATEST),
            undelivered_mails=_undelivered([each for each in mails if each.state != "refused"]),
            refused_mails=_undelivered([each for each in mails if each.state == "refused"]),
            undelivered_files=Undelivered(
                len(files), files[0].due_at if files else None, file_errors[-1] if file_errors else None
            ),
        )
        return True


def _undelivered(mails: Sequence[UndeliveredMail]) -> Undelivered:
    errors = [each.last_error for each in mails if each.last_error]
    oldest = min((each.first_due_at for each in mails), default=None)
    return Undelivered(len(mails), oldest, errors[-1] if errors else None)
