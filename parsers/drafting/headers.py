"""One header taken apart: its name and the unit written with it.

Nothing here knows what a column means.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from parsers.drafting.vocabulary import is_unit

_WITH_UNIT = re.compile(
    r"(?P<name>.*?\S)\s*(?:\((?P<round>[^()]+)\)|\[(?P<square>[^\[\]]+)\]|/\s*(?P<slash>\S+)|,\s*(?P<comma>\S+)|"
    r"\bin (?P<in>\S+)|\s(?P<blank>\S+))"
)


@dataclass(frozen=True, slots=True)
class Header:
    """A header as written, its name and its unit (empty where it states none)."""

    written: str
    name: str
    unit: str = ""


def take_apart(written: str, below: str = "") -> Header:
    """Take a header apart.

    >>> take_apart("Std (mL)")
    Header(written='Std (mL)', name='Std', unit='mL')

    Parameters
    ----------
    written
        The header.
    below
        What a row of units says under it.
    """
    unit = below.strip("()[] ")
    parts = written.split(" | ")
    last = parts[-1]
    if unit:
        return Header(written, last, unit)
    if len(parts) > 1 and is_unit(last.strip("()[] ")):
        return Header(written, parts[-2], last.strip("()[] "))
    match = _WITH_UNIT.fullmatch(last)
    if match is not None:
        unit = next((text.strip() for key, text in match.groupdict().items() if key != "name" and text), "")
        if is_unit(unit):
            return Header(written, match["name"].strip(), unit)
    return Header(written, last)
