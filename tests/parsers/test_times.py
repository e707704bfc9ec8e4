"""Times read all at once are the ones that are read one by one."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from parsers import times
from parsers.cells import Grammar, Kind

FORMS = ("%d.%m.%Y %H:%M:%S", "%Y-%m-%d %H:%M", "%m/%d/%Y %I:%M %p", "%Y-%m-%dT%H:%M:%S.%f", "%d-%m-%y", "%Y%m%d")


@pytest.fixture(autouse=True)
def _few(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let the quick way begin with the first time."""
    monkeypatch.setattr(times, "MANY_TIMES", 1)


def _moments() -> st.SearchStrategy[datetime]:
    return st.datetimes(datetime(1970, 1, 2), datetime(2069, 12, 31)).map(lambda moment: moment.replace(tzinfo=UTC))  # noqa: DTZ001


def _spoilt(text: str, place: int, character: str) -> str:
    at = place % (len(text) + 1)
    return text[:at] + character + text[at + 1 :]


@settings(max_examples=400, deadline=None)
@given(
    moments=st.lists(_moments(), min_size=1, max_size=4),
    form=st.sampled_from(FORMS),
    place=st.integers(0, 30),
    character=st.sampled_from(["", " ", "0", "9", "-", "/", ".", "T", "x", "1", "1"]),
)
def test_all_at_once_equals_one_by_one(moments: list[datetime], form: str, place: int, character: str) -> None:
    """Whatever the quick way reads, also of texts with one character exchanged, `strptime` reads alike."""
    texts = [moment.strftime(form) for moment in moments]
    texts.append(_spoilt(texts[0], place, character))

    found = times.times_at_once(texts, (form,))

    for text, at in found.items():
        cell = times.read_time(text, (form,), Grammar())
        assert cell.kind is Kind.NUMBER, text
        assert cell.value == pytest.approx(at, abs=1e-6), text


def test_ordinary_times_are_read_at_once() -> None:
    """The quick way is not empty: it reads a run of ordinary times."""
    begin = datetime(2026, 12, 1, 8, 41, tzinfo=UTC)
    texts = [(begin + timedelta(minutes=3 * n)).strftime(FORMS[0]) for n in range(10)]

    found = times.times_at_once(texts, FORMS[:1])

    assert list(found.values()) == [begin.timestamp() + 180 * n for n in range(10)]


def test_times_with_a_zone_are_read_one_by_one() -> None:
    """A zone in the format is the slow way's business."""
    assert times.times_at_once(["2026-12-01 08:41 +0100"], ("%Y-%m-%d %H:%M %z",)) == {}
