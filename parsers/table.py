"""Lines to a table: the header, the rows with their lines, and the reason of every line that is no row.

Every row must have as many fields as the header. This is the reference reading, one record after the other, which
takes quotes and every irregularity; `parsers.block` reads large clean tables at once and must agree with it. Nothing
here knows what a column means.
"""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np

from parsers import fates
from parsers.readings import SetAside, Texts
from parsers.spelling import fold, shown

if TYPE_CHECKING:
    from collections.abc import Sequence

    from parsers.cells import Grammar, Numbers
    from parsers.layout import Layout
    from parsers.readings import Lines as LineNumbers
    from parsers.text import Lines

#: Most lines of one quoted cell: more of them mean a quote that was never closed.
MOST_LINES_IN_CELL = 20

#: Lines in which a header is looked for before the whole export is split.
_LIKELY_HEAD = 200

#: A line by which spreadsheets note their separator.
_SEPARATOR_NOTE = re.compile(r"^sep=.$", re.IGNORECASE)


class Table(Protocol):
    """Rows of equal length, by column."""

    headers: tuple[str, ...]
    line: LineNumbers
    set_aside: list[SetAside]

    def texts(self, column: int) -> Texts:
        """Return a column as trimmed texts; an empty cell has none."""
        ...

    def numbers(self, column: int, grammar: Grammar) -> Numbers:
        """Return a column as numbers."""
        ...


@dataclass(frozen=True, slots=True)
class Frame:
    """Where the table of an export begins.

    Attributes
    ----------
    lines
        The export.
    headers
        Header names with folded blanks.
    header
        The header line as written.
    header_at, first
        Indices of the header line and of the first line behind it.
    offset
        Where that line begins in the text.
    set_aside
        The lines up to there.
    """

    lines: Lines
    headers: tuple[str, ...]
    header: str
    header_at: int
    first: int
    offset: int
    set_aside: tuple[SetAside, ...]


def find_table(lines: Lines, layout: Layout) -> Frame:
    """Find the header of the table.

    Raises
    ------
    ExportRefused
        If no line is the header.
    """
    for count in (_LIKELY_HEAD, len(lines)):
        at = _header_index(lines.head(count), layout)
        if at is not None:
            record, behind = read_record(lines, at, layout.separator)
            above = lines.head(behind)
            aside = fates.outside(above[:at], 0, fates.BEFORE)
            aside += [SetAside(number, fates.HEADER, text) for number, text in enumerate(above[at:], at + 1)]
            offset = sum(len(text) + 1 for text in above)
            return Frame(lines, tuple(map(fold, record)), above[at], at, behind, offset, tuple(aside))
    if layout.header is None:
        raise lines.refusal(None, "expected a header line, got blank lines only", "Export again")
    sentence = f"expected a header line that matches {layout.header.pattern!r}, got none in {len(lines)} lines"
    raise lines.refusal(None, sentence, "Correct header in the layout, or export again")


def _header_index(head: Sequence[str], layout: Layout) -> int | None:
    for at, line in enumerate(head):
        if not line.strip() or any(pattern.search(line) for pattern in layout.skip):
            continue
        if layout.header.search(line) if layout.header else not _SEPARATOR_NOTE.match(line):
            return at
    return None


def read_record(lines: Lines, at: int, separator: str) -> tuple[list[str], int]:
    """Split the record that begins at an index; return its cells and the index behind it.

    Raises
    ------
    ExportRefused
        If a quote is left open or followed by anything but a separator.
    """
    line = lines.line(at)
    if separator == " ":
        return line.split(), at + 1
    if '"' not in line:
        return line.split(separator), at + 1
    feed = (f"{text}\n" for text in lines.lines[at : at + MOST_LINES_IN_CELL])
    reader = csv.reader(feed, delimiter=separator, strict=True)
    try:
        record = next(reader)
    except csv.Error as error:
        todo = "Close the quote in the export, or double it where it is meant"
        if "unexpected end" in str(error):
            sentence = f"a quote is opened here and not closed within {MOST_LINES_IN_CELL} lines: {shown(line)}"
        else:
            sentence = f"a quote stands where none belongs ({error}): {shown(line)}"
        raise lines.refusal(at, sentence, todo) from error
    return record, at + reader.line_num


def wrong_count(frame: Frame, at: int, got: int) -> Exception:
    """Make the error for a row of another length than the header."""
    sentence = f"expected {len(frame.headers)} fields as in the header, got {got} in {shown(frame.lines.lines[at])}"
    return frame.lines.refusal(
        at, sentence, "Correct the row, or leave such lines out with skip or until in the layout"
    )


@dataclass(slots=True)
class RowTable:
    """A table as lists of cells."""

    headers: tuple[str, ...]
    line: LineNumbers
    set_aside: list[SetAside]
    rows: Sequence[Sequence[str]]

    def texts(self, column: int) -> Texts:
        """Return a column as trimmed texts; an empty cell has none."""
        return Texts.of([row[column].strip() or None for row in self.rows])

    def numbers(self, column: int, grammar: Grammar) -> Numbers:
        """Return a column as numbers."""
        return grammar.column(self.texts(column))


def read_rows(frame: Frame, layout: Layout) -> RowTable:
    """Read the rows one after the other.

    Raises
    ------
    ExportRefused
        If a row has another number of fields than the header, a quote is left open, or another header follows.
    """
    lines, width = frame.lines, len(frame.headers)
    rows: list[list[str]] = []
    starts: list[int] = []
    aside = list(frame.set_aside)
    fate, separator = fates.judge(frame, layout), layout.separator
    at, end = frame.first, len(lines)
    while at < end:
        line = lines.lines[at]
        reason = fate(at, line)
        if reason is not None:
            aside.append(SetAside(at + 1, reason, line))
            at += 1
            if reason == fates.UNTIL:
                break
            continue
        record, behind = read_record(lines, at, separator)
        if len(record) != width:
            raise wrong_count(frame, at, len(record))
        rows.append(record)
        starts.append(at + 1)
        aside += [SetAside(number + 1, fates.CONTINUED, lines.lines[number]) for number in range(at + 1, behind)]
        at = behind
    aside += fates.outside(lines.lines[at:], at, fates.AFTER)
    return RowTable(frame.headers, np.asarray(starts, dtype=np.int64), aside, rows)
