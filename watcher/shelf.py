"""Keeps index.html in the results folder current: after what was delivered, and now and then as a sign of life.

Where the folder is not there or cannot be written, nothing happens: results and mails do not depend on it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import structlog

from watcher.index import FILE_NAME, MOST_EXPORTS, index

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.clock import Clock
    from watcher.disk import Disk
    from watcher.ledger import Ledger
    from watcher.troubles import Troubles

#: Seconds between two times that it is written while something changes, and while nothing does.
BUSY_SECONDS, IDLE_SECONDS = 5.0, 60.0
#: Open failures that are listed.
MOST_FAILURES = 200

_log = structlog.get_logger("spikewarden.shelf")


class Shelf:
    """Writes index.html.

    Parameters
    ----------
    laboratory
        Whose results these are.
    ledger, troubles, disk, clock
        What it tells of, and the world.
    """

    def __init__(self, laboratory: str, ledger: Ledger, troubles: Troubles, disk: Disk, clock: Clock) -> None:
        self._laboratory = laboratory
        self._ledger = ledger
        self._troubles = troubles
        self._disk = disk
        self._clock = clock
        self._written_at: float | None = None
        self._shown: tuple[int, tuple[str, ...]] | None = None

    def renew(self, laboratory: str) -> None:
        """Name this laboratory from now on."""
        self._laboratory = laboratory

    def seconds_to_next(self) -> float:
        """How long it need not be written."""
        if self._written_at is None:
            return 0.0
        pause = IDLE_SECONDS if self._shown == self._state() else BUSY_SECONDS
        return max(self._written_at + pause - self._clock.monotonic(), 0.0)

    def refresh(self, results: Path, *, running: bool = True, now: bool = False) -> None:
        """Write it where it is time, or in any case."""
        if not now and self.seconds_to_next() > 0:
            return
        self._written_at, self._shown = self._clock.monotonic(), self._state()
        try:
            if results.is_dir():
                self._disk.atomic_write(results / FILE_NAME, self._page(running=running).encode("utf-8", "replace"))
        except OSError as error:  # each delivery says what is wrong with the folder
            _log.warning("index not written", error=str(error))

    def _state(self) -> tuple[int, tuple[str, ...]]:
        return self._ledger.changes, tuple(self._troubles.sentences())

    def _page(self, *, running: bool) -> str:
        failures = self._ledger.open_failures()[-MOST_FAILURES:]
        pages = self._ledger.pages_of({each.export_id for each in failures})
        return index(
            self._laboratory,
            self._clock.now(),
            running=running,
            troubles=self._troubles.sentences(),
            failures=[(each, pages.get(each.export_id)) for each in reversed(failures)],
            exports=self._ledger.listed(MOST_EXPORTS),
        )
