"""The form of dates and times, as far as the cells prove it.

`03/04/2026` proves nothing about day and month; then no form is given.
"""

from __future__ import annotations

import re
from datetime import datetime
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

#: Dates, the forms that exclude one another beside each other.
_DATES = ("%Y-%m-%d", "%Y/%m/%d", "%Y%m%d", "%d.%m.%Y", "%d.%m.%y", "%d-%b-%Y", "%d-%b-%y", "%d %b %Y", "%b %d %Y",
          "%d/%m/%Y", "%m/%d/%Y", "%d-%m-%Y", "%m-%d-%Y", "%d/%m/%y", "%m/%d/%y", "%y%m%d", "%y-%m-%d")  # fmt: skip
_TIMES = ("%H:%M:%S", "%H:%M", "%I:%M:%S %p", "%I:%M %p", "%H:%M:%S.%f", "%H.%M")
_JOINTS = (" ", "T", ", ")
_DIGITS = re.compile(r"\d")


def forms_of_date(cells: Sequence[str]) -> list[str]:
    """Return every form of a date that all cells fit; more than one means that they prove none."""
    return _fitting(cells, _DATES)


def forms_of_time(cells: Sequence[str]) -> list[str]:
    """Return the form of a time of day that all cells fit."""
    return _fitting(cells, _TIMES)[:1]


def forms_of_moment(cells: Sequence[str]) -> list[str]:
    """Return every form of date and time that all cells fit."""
    return _fitting(cells, [f"{date}{joint}{time}" for joint in _JOINTS for date in _DATES for time in _TIMES])


def _fitting(cells: Sequence[str], forms: Sequence[str]) -> list[str]:
    filled = sorted({cell for cell in cells if cell})
    if not filled or not all(_DIGITS.search(cell) for cell in filled):
        return []
    left = list(forms)
    for cell in filled:
        left = [form for form in left if _fits(cell, form)]
        if not left:
            break
    return left


def _fits(cell: str, form: str) -> bool:
    try:
        moment = datetime.strptime(cell, form)  # noqa: DTZ007 (exports write local time)
    except ValueError:
        return False
    return "%y" not in form.lower() or 1990 <= moment.year < 2100
