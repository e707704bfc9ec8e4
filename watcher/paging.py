"""Drawing the pages of finished exports, one at a time, when no export waits: results and mails never wait for a page.

Which pages are still to be drawn stands in the ledger, so that a restart goes on. A page is a view: one that cannot be
drawn is told of, and costs no result.
"""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING

import structlog

from watcher.replies import ReplyBroken, read_page
from watcher.worker import WorkerFailed

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.clock import Clock
    from watcher.ledger import Ledger
    from watcher.ledger_rows import WantedPage
    from watcher.troubles import Troubles
    from watcher.worker import Worker

#: Attempts at one page; then it is given up until the next start.
ATTEMPTS_ALLOWED = 3
#: Seconds until a page is tried again whose record cannot be read now: its share may be gone.
LATER_SECONDS = 60.0

_log = structlog.get_logger("spikewarden.pages")


class Pages:
    """The pages that are still to be drawn.

    Parameters
    ----------
    ledger, worker, troubles, clock
        The parts that it works with.
    staging
        Where files wait for delivery.
    results
        The results folder; a record that was delivered is read there.
    """

    def __init__(
        self, ledger: Ledger, worker: Worker, troubles: Troubles, clock: Clock, *, staging: Path, results: Path
    ) -> None:
        self._ledger = ledger
        self._worker = worker
        self._troubles = troubles
        self._clock = clock
        self._staging = staging
        self._results = results
        self._attempts: Counter[int] = Counter()
        self._not_before: dict[int, float] = {}

    def renew(self, results: Path) -> None:
        """Read delivered records in this folder from now on."""
        self._results = results

    def draw_pictures(self) -> None:
        """Have the plots of mails drawn that were queued since the last time; they are few and small.

        Raises
        ------
        WorkerUnfit, WorkerStopped
            They are not drawn; their mails go without.
        """
        try:
            self._worker.ask({"do": "pictures"})
        except WorkerFailed as error:
            _log.warning("pictures not drawn", reason=str(error))

    def draw_next(self) -> bool:
        """Draw the oldest page that is still to be drawn; False where none can be drawn now.

        Raises
        ------
        WorkerUnfit, WorkerStopped
            Nothing was recorded.
        """
        now = self._clock.monotonic()
        wanted = next((each for each in self._ledger.wanted_pages() if self._not_before.get(each.id, now) <= now), None)
        if wanted is None:
            return False
        try:
            drawn = read_page(self._worker.ask(self._request(wanted)), self._staging)
        except (WorkerFailed, ReplyBroken) as error:
            self._failed(wanted, str(error))
            return True
        if drawn.error is not None:
            self._troubles.defect(drawn.error, drawn.traceback or "")
            self._failed(wanted, drawn.error)
        elif drawn.file is None:
            self._not_before[wanted.id] = now + LATER_SECONDS
        else:
            self._ledger.page_drawn(wanted, drawn.file)
        return True

    def _request(self, wanted: WantedPage) -> dict[str, object]:
        return {
            "do": "page",
            "records": [str(wanted.staged), str(self._results / wanted.record)],
            "sha256": wanted.sha256,
            "target": wanted.target,
            "newer": wanted.newer,
            "staging": str(self._staging),
        }

    def _failed(self, wanted: WantedPage, reason: str) -> None:
        self._attempts[wanted.id] += 1
        given_up = self._attempts[wanted.id] >= ATTEMPTS_ALLOWED
        self._not_before[wanted.id] = float("inf") if given_up else 0.0
        _log.warning("page not drawn", target=wanted.target, reason=reason, given_up=given_up)
