"""Transposed tables of an example: the first column names what each line holds, every further column is a vial.

Nothing here reads a number.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from parsers.drafting.numerals import numberish
from parsers.drafting.structure import SEPARATORS, Structure, split
from parsers.drafting.vocabulary import field_of
from parsers.drafting.wide import names_element
from parsers.spelling import fold

if TYPE_CHECKING:
    from parsers.drafting.example import Example

#: Fewest fields of a line: its name and two vials.
FEWEST_FIELDS = 3


def find_turned(example: Example) -> Structure | None:
    """Find a transposed table; None where there is none.

    It is one where the line of labels begins with a word for labels, and below it several lines begin with the names of
    different elements and hold numbers.
    """
    for word, character in SEPARATORS.items():
        if word == "blanks":
            continue
        records = {at: split(line, character) for at, line in enumerate(example.lines) if line.strip()}
        header_at = next(
            (at for at, cells in records.items() if len(cells) >= FEWEST_FIELDS and "label" in field_of(cells[0])), None
        )
        if header_at is None:
            continue
        width = len(records[header_at])
        lines = [cells for at, cells in records.items() if at >= header_at]
        names = [fold(cells[0]) for cells in lines]
        elements = [cells[0] for cells in lines if names_element(cells[0]) and any(map(numberish, cells[1:]))]
        whole = all(len(cells) == width for cells in lines) and len(set(names)) == len(names)
        if not whole or not elements or any(map(names_element, records[header_at])) or not all(records[header_at]):
            continue
        return Structure(
            example=example,
            separator=word,
            header_at=header_at,
            headers=names,
            rows=[(header_at, [cells[at] for cells in lines]) for at in range(1, width)],
            table="transposed",
        )
    return None
