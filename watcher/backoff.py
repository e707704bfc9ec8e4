"""How long to wait before trying again: longer each time, up to a limit, never in step with others."""

from __future__ import annotations

import random
from dataclasses import dataclass, field
from datetime import timedelta
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable


def _jitter() -> float:
    return random.SystemRandom().uniform(0.8, 1.2)


@dataclass(frozen=True, slots=True)
class Backoff:
    """A plan of retries.

    Attributes
    ----------
    first_seconds, longest_seconds
        The wait after the first failure; it doubles with each further one up to the longest.
    jitter
        A factor around 1, drawn anew for each wait.
    """

    first_seconds: float
    longest_seconds: float
    jitter: Callable[[], float] = field(default=_jitter)

    def after(self, attempts: int) -> timedelta:
        """Return the wait after so many failed attempts (from 1).

        >>> [Backoff(10, 60, lambda: 1.0).after(n).seconds for n in (1, 2, 3, 4, 5000)]
        [10, 20, 40, 60, 60]
        """
        doublings = min(max(attempts, 1) - 1, 32)
        return timedelta(seconds=min(self.first_seconds * 2**doublings, self.longest_seconds) * self.jitter())
