"""A thread that does the same round again and again until it is told to stop, and survives what a round meets.

Nothing here knows what a round does; how a failed one is told is for `survive`.
"""

from __future__ import annotations

import threading
from typing import TYPE_CHECKING

from watcher.clock import stamp
from watcher.wake import Wake

if TYPE_CHECKING:
    from collections.abc import Callable

    from watcher.clock import Clock

#: Seconds after a round that failed as a whole.
FAULT_PAUSE = 10.0


class Rounds:
    """Runs rounds in a thread of its own.

    Parameters
    ----------
    name
        For the log.
    turn
        One round; returns how many seconds to wait before the next.
    break_off
        Ends a round under way.
    survive
        Runs a round and deals with whatever stops it (a full disk under the ledger, a defect).
    clock
        For `last_round_at`.
    """

    def __init__(
        self,
        name: str,
        turn: Callable[[], float],
        break_off: Callable[[], None],
        survive: Callable[[str, Callable[[], float]], float | None],
        clock: Clock,
    ) -> None:
        self._turn = turn
        self._break_off = break_off
        self._name = name
        self._survive = survive
        self._clock = clock
        self._wake = Wake()
        self._stopping = False
        self._thread = threading.Thread(target=self._run, name=name, daemon=True)
        self.last_round_at: str | None = None
        #: Rounds that came to their end.
        self.count = 0

    def start(self) -> None:
        """Begin."""
        self._thread.start()

    def ring(self) -> None:
        """There is something to do."""
        self._wake.ring()

    def stop(self, seconds: float) -> bool:
        """Break off and wait for the end at most so long; returns whether it ended."""
        self._stopping = True
        self._break_off()
        self._wake.ring()
        if self._thread.is_alive():
            self._thread.join(seconds)
        return not self._thread.is_alive()

    def _run(self) -> None:
        while not self._stopping:
            seconds = self._survive(self._name, self._round)
            if not self._stopping:
                self._wake.wait(FAULT_PAUSE if seconds is None else seconds)

    def _round(self) -> float:
        seconds = self._turn()
        self.count += 1
        self.last_round_at = stamp(self._clock.now())
        return seconds
