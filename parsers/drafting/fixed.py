"""Columns of fixed width without separator or header: made out by the places in which every line is blank.

Nothing here knows what a column means.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from parsers.drafting.numerals import numberish
from parsers.drafting.structure import FEWEST_ROWS, Structure

if TYPE_CHECKING:
    from parsers.drafting.example import Example

#: Fewest blank places that part two columns: one blank may stand within a name.
GUTTER = 2


def find_fixed(example: Example) -> Structure | None:
    """Find columns of fixed width; None where the lines do not stand in such.

    Every line that is not blank must be a row: where headings or footers stand, nothing proves the columns.
    """
    rows = [(at, line.expandtabs()) for at, line in enumerate(example.lines) if line.strip()]
    if len(rows) < FEWEST_ROWS + 1:
        return None
    length = max(len(line) for _, line in rows)
    blank = [all(line[place : place + 1] in ("", " ") for _, line in rows) for place in range(length)]
    starts = [
        place
        for place in range(length)
        if not blank[place] and (place == 0 or (place >= GUTTER and all(blank[place - GUTTER : place])))
    ]
    if len(starts) < 2 or starts[0] != 0 or any("\t" in line for line in example.lines):
        return None
    ends = [*starts[1:], length]
    cells = [[line[start:end].strip() for start, end in zip(starts, ends, strict=True)] for _, line in rows]
    numbers = [all(numberish(cell) for cell in column if cell) for column in zip(*cells, strict=True)]
    if numbers[0] or not any(numbers):  # the first column names the vials
        return None
    return Structure(
        example=example,
        separator="",
        header_at=0,
        headers=[str(number) for number in range(1, len(starts) + 1)],
        rows=[(at, row) for (at, _), row in zip(rows, cells, strict=True)],
        widths=[end - start for start, end in zip(starts, ends, strict=True)],
        headless=True,
    )
