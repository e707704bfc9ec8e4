"""A line (or several, where a quoted cell holds line breaks) to its cells.

Nothing here knows what a cell means.
"""

from __future__ import annotations

import csv
import re
from itertools import accumulate, pairwise
from typing import TYPE_CHECKING

from parsers.spelling import shown

if TYPE_CHECKING:
    from parsers.layout import Layout
    from parsers.text import Lines

#: Most lines of one quoted cell: more of them mean a quote that was never closed.
MOST_LINES_IN_CELL = 20
_NUMBER_CUT = re.compile(r"[0-9.,]{2}")
_WIDE = re.compile(r"[ \t\xa0]{2,}|\t")


def read_record(lines: Lines, at: int, layout: Layout) -> tuple[list[str], int]:
    """Split the record that begins at an index; return its cells and the index behind it.

    Raises
    ------
    ExportRefused
        If a quote is left open or followed by anything but a separator, or a line is longer than its columns.
    """
    line, separator = lines.line(at), layout.separator
    if layout.widths:
        return _fixed(lines, at, layout.widths), at + 1
    if separator == " ":
        return line.split(), at + 1
    if separator == "  ":
        return _WIDE.split(line.strip()), at + 1
    if layout.quote == "none" or layout.quote not in line:
        return line.split(separator), at + 1
    feed = (f"{text}\n" for text in lines.lines[at : at + MOST_LINES_IN_CELL])
    reader = csv.reader(feed, delimiter=separator, quotechar=layout.quote, strict=True)
    try:
        record = next(reader)
    except csv.Error as error:
        todo = "Close the quote in the export, double it where it is meant, or write quote: none in the layout"
        if "unexpected end" in str(error):
            sentence = f"a quote is opened here and not closed within {MOST_LINES_IN_CELL} lines: {shown(line)}"
        else:
            sentence = f"a quote stands where none belongs ({error}): {shown(line)}"
        raise lines.refusal(at, sentence, todo) from error
    return record, at + reader.line_num


def _fixed(lines: Lines, at: int, widths: tuple[int, ...]) -> list[str]:
    line = lines.line(at)
    ends = [0, *accumulate(widths)]
    beyond = line[ends[-1] :].strip()
    if beyond:
        sentence = f"expected at most {ends[-1]} characters as in widths, got {shown(beyond)} behind them"
        raise lines.refusal(at, sentence, "Correct widths in the layout, or leave such lines out with skip or until")
    for place in ends[1:-1]:
        if _NUMBER_CUT.fullmatch(line[place - 1 : place + 1]):
            around = shown(line[max(place - 12, 0) : place + 12])
            sentence = f"expected a column to end at character {place}, got a number that goes on: {around}"
            raise lines.refusal(at, sentence, "Correct widths in the layout, so that no cell is cut in two")
    return [line[begin:end].strip() for begin, end in pairwise(ends)]
