"""Days and times as people write them, and how much of a silence lies in opening hours."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher.week import daily, hours

MONDAY = datetime(2026, 11, 30, tzinfo=UTC).astimezone().replace(hour=0)


@pytest.mark.parametrize(
    ("since", "until", "expected"),
    [
        ((0, 8), (0, 10), 2.0),
        ((0, 5), (0, 8), 1.0),
        ((0, 18), (1, 8), 2.0),
        ((4, 18), (7, 8), 2.0),
        ((5, 8), (5, 20), 0.0),
        ((0, 0), (7, 0), 60.0),
    ],
)
def test_only_opening_hours_count(since: tuple[int, int], until: tuple[int, int], expected: float) -> None:
    """Nights and weekends are no silence."""
    begin, end = (MONDAY + timedelta(days=day, hours=hour) for day, hour in (since, until))
    assert hours("Mon-Fri 07:00-19:00").within(begin, end) == timedelta(hours=expected)


@given(st.floats(0, 50), st.floats(0, 200))
def test_all_hours_count_all_time(offset: float, length: float) -> None:
    """Where the laboratory never closes, the silence is the time that has passed."""
    begin = MONDAY + timedelta(hours=offset)
    within = hours("Mon-Sun 00:00-24:00").within(begin, begin + timedelta(hours=length))
    assert abs(within - timedelta(hours=length)) < timedelta(seconds=1)


@pytest.mark.parametrize(("text", "hour", "come"), [("07:30", 7, False), ("07:30", 8, True), ("07:30 Tue", 8, False)])
def test_a_daily_minute_comes_on_its_days(text: str, hour: int, *, come: bool) -> None:
    """Before its minute, and on other days, it has not come."""
    assert daily(text).has_come(MONDAY + timedelta(hours=hour)) is come


@pytest.mark.parametrize("text", ["", "Mon-Fri", "Mon-Fri 19:00-07:00", "Mo-Fr 07:00-19:00", "Mon 07:00-25:00"])
def test_hours_that_nobody_could_mean_are_refused(text: str) -> None:
    """A text that is no opening hours says what was expected."""
    with pytest.raises(ValueError, match="expected"):
        hours(text)


@pytest.mark.parametrize("text", ["", "7", "07:60", "07:30 Monday"])
def test_a_time_that_is_none_is_refused(text: str) -> None:
    """A text that is no time of day says what was expected."""
    with pytest.raises(ValueError, match="expected"):
        daily(text)
