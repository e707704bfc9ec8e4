"""The time, as the service sees it: one small thing that tests can replace.

Wall-clock time is only recorded and compared with due times; intervals are measured on the monotonic clock,
so that a computer whose date is set does not confuse them. Nothing here waits.
"""

from __future__ import annotations

import time
from datetime import UTC, datetime
from typing import Protocol


class Clock(Protocol):
    """Where the time comes from."""

    def now(self) -> datetime:
        """Return the wall-clock time, aware, in UTC."""
        ...

    def monotonic(self) -> float:
        """Return seconds that only ever grow; for intervals."""
        ...


class SystemClock:
    """The computer's own clocks."""

    def now(self) -> datetime:
        """Return the wall-clock time, aware, in UTC."""
        return datetime.now(UTC)

    def monotonic(self) -> float:
        """Return seconds since some fixed moment."""
        return time.monotonic()


def stamp(moment: datetime) -> str:
    """Write a moment as the ledger keeps it: ISO 8601, UTC, microseconds; sorts as text.

    >>> stamp(datetime(2026, 12, 1, 4, 30, tzinfo=UTC))
    '2026-12-01T04:30:00.000000Z'
    """
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def moment(text: str) -> datetime:
    """Read what `stamp` wrote.

    >>> stamp(moment("2026-12-01T04:30:00.000001Z"))
    '2026-12-01T04:30:00.000001Z'
    """
    return datetime.fromisoformat(text)
