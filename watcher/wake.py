"""A bell: one thread waits for it, any thread and any signal handler may ring it.

A `threading.Event` may not be set from a signal handler (the handler can interrupt its own thread while that holds
the event's lock); a `SimpleQueue` may. Rings while nobody waits are kept, as one.
"""

from __future__ import annotations

import queue


class Wake:
    """The bell."""

    def __init__(self) -> None:
        self._rings: queue.SimpleQueue[None] = queue.SimpleQueue()

    def ring(self) -> None:
        """Wake whoever waits, or the next to wait."""
        if self._rings.empty():
            self._rings.put(None)

    def wait(self, seconds: float) -> bool:
        """Wait for a ring, at most so long; returns whether it rang."""
        try:
            self._rings.get(timeout=max(seconds, 0.0))
        except queue.Empty:
            return False
        while not self._rings.empty():
            self._rings.get_nowait()
        return True
