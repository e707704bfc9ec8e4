"""Days of the week and times of the day, as people write them in the settings, in the computer's local time.

Only the standard library: the service compares with the clock at every round.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import datetime, timedelta

DAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
#: A silence is not counted further back than this.
LONGEST = timedelta(days=60)

_TIME = r"(\d{1,2}):(\d{2})"
_SPAN = re.compile(rf"^(?P<days>\S+)\s+{_TIME}\s*-\s*{_TIME}$")
_MOMENT = re.compile(rf"^{_TIME}(?:\s+(?P<days>\S+))?$")


@dataclass(frozen=True, slots=True)
class Hours:
    """Opening hours: days (Monday is 0), minutes of the day at which they begin and end."""

    days: frozenset[int]
    begin: int
    end: int

    def within(self, since: datetime, until: datetime) -> timedelta:
        """Return how much of the time between two aware moments lies in these hours."""
        since = max(since, until - LONGEST).astimezone()
        until = until.astimezone()
        day = since.replace(hour=0, minute=0, second=0, microsecond=0)
        total = timedelta()
        while day <= until:
            if day.weekday() in self.days:
                begin = max(day + timedelta(minutes=self.begin), since)
                end = min(day + timedelta(minutes=self.end), until)
                total += max(end - begin, timedelta())
            day += timedelta(days=1)
        return total


@dataclass(frozen=True, slots=True)
class Daily:
    """A minute of certain days (Monday is 0)."""

    days: frozenset[int]
    minute: int

    def has_come(self, now: datetime) -> bool:
        """Tell whether today is one of the days and its minute has passed."""
        local = now.astimezone()
        return local.weekday() in self.days and local.hour * 60 + local.minute >= self.minute


def hours(text: str) -> Hours:
    """Read opening hours.

    >>> hours("Mon-Fri 07:00-19:00").begin
    420
    """
    found = _SPAN.match(text.strip())
    if found is None:
        raise ValueError(f"expected days and hours such as Mon-Fri 07:00-19:00, got '{text}'")
    _, *times = found.groups()
    begin, end = _minute(times[0], times[1]), _minute(times[2], times[3])
    if begin >= end:
        raise ValueError(f"expected hours that begin before they end, got '{text}'")
    return Hours(_days(found["days"]), begin, end)


def daily(text: str) -> Daily:
    """Read a time of day, on all days or on some.

    >>> sorted(daily("07:30 Mon-Wed").days)
    [0, 1, 2]
    """
    found = _MOMENT.match(text.strip())
    if found is None:
        raise ValueError(f"expected a time such as 07:30 or 07:30 Mon-Fri, got '{text}'")
    return Daily(_days(found["days"] or "Mon-Sun"), _minute(found[1], found[2]))


def _minute(hour: str, minute: str) -> int:
    if int(hour) > 24 or int(minute) > 59 or (int(hour) == 24 and int(minute)):
        raise ValueError(f"expected a time of day such as 07:30, got '{hour}:{minute}'")
    return int(hour) * 60 + int(minute)


def _days(text: str) -> frozenset[int]:
    days: set[int] = set()
    for part in text.lower().split(","):
        first, _, last = part.partition("-")
        if first not in DAYS or (last and last not in DAYS):
            raise ValueError(f"expected days such as Mon-Fri or Mon,Wed, got '{text}'")
        begin = DAYS.index(first)
        length = (DAYS.index(last) - begin) % 7 if last else 0
        days.update((begin + offset) % 7 for offset in range(length + 1))
    return frozenset(days)
