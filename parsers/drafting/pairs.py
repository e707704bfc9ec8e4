"""Exports of ``name = value`` lines, one file for each solution; its name may say what no line does.

Nothing here knows what a name means.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from parsers.drafting.patterns import literal
from parsers.drafting.structure import Structure
from parsers.drafting.vocabulary import ELEMENTS, field_of, is_unit
from parsers.spelling import fold

if TYPE_CHECKING:
    from parsers.drafting.example import Example

#: Fewest lines, and which share of all, that make an export one of pairs.
FEWEST, MOSTLY = 3, 0.7
_PAIR = re.compile(r"\s*(?P<name>[A-Za-z](?:[^=:;,\t ]| (?! )){1,40}?)\s*(?P<sign>[=:])\s*(?P<value>\S.*)")
_GLUED = re.compile(r"(?P<number>[+\-−]?\d[\d.,]*(?:[eE][+\-]?\d+)?)\s*(?P<unit>\D\S*)")
_REPLICATE = re.compile(r"(?P<word>(?:r|rep|run|n)-?)(?P<number>\d{1,2})", re.IGNORECASE)


def find_pairs(example: Example) -> Structure | None:
    """Find pairs; None where most lines are none, or a name comes twice."""
    for sign in "=:":
        pairs = {
            at: match
            for at, line in enumerate(example.lines)
            if (match := _PAIR.fullmatch(line)) is not None and match["sign"] == sign
        }
        filled = sum(bool(line.strip()) for line in example.lines)
        names = [fold(match["name"]) for match in pairs.values()]
        if len(pairs) < max(FEWEST, MOSTLY * filled) or len(set(names)) < len(names):
            continue
        cells, units = zip(*(_parted(match["value"].strip()) for match in pairs.values()), strict=True)
        found = Structure(
            example=example,
            separator=sign,
            header_at=0,
            headers=names,
            rows=[(min(pairs), list(cells))],
            units=list(units),
            table="pairs",
        )
        if not any("label" in field_of(name) for name in names):
            _name(found)
        return found
    return None


def _parted(value: str) -> tuple[str, str]:
    """Part a number from the unit behind it."""
    match = _GLUED.fullmatch(value)
    if match is not None and is_unit(match["unit"]):
        return match["number"], match["unit"]
    return value, ""


def _name(found: Structure) -> None:
    """Take the label, and what else it surely says, from the file's name; leave it where parts of it are in doubt."""
    stem, _, ending = found.example.name.rpartition(".")
    parts = (stem or ending).split("_")
    patterns, labels = [], []
    said: set[str] = set()
    for part in parts:
        replicate = _REPLICATE.fullmatch(part)
        if re.fullmatch(r"[A-Za-z]{2}", part) and part.capitalize() in ELEMENTS and "analyte" not in said:
            said.add("analyte")
            found.file_words["analyte"] = part
            patterns.append(r"(?P<analyte>[A-Za-z]{1,2})")
        elif replicate is not None and "replicate" not in said:
            said.add("replicate")
            patterns.append(rf"{literal(replicate['word'])}(?P<replicate>\d+)")
        elif re.fullmatch(r"[\d-]+", part):
            patterns.append(r"[\d-]+")
        else:
            labels.append(part)
            patterns.append(r"(?P<label>[^_]+)")
    if len(labels) == 1:
        found.file_name = "^" + "_".join(patterns) + (r"\." if ending and stem else "$")
        found.names = labels
