"""Lines to a table: the header, the rows with their lines, and the reason of every line that is no row.

Every row must have as many fields as the header. This is the reference reading, one record after the other, which
takes quotes and every irregularity; `parsers.block` reads large clean tables at once and must agree with it. Where a
table lies among other parts, and which rows are none, is for `parsers.shaping`. Nothing here knows what a column means.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np

from parsers import fates
from parsers.readings import SetAside, Texts
from parsers.spelling import fold, shown
from parsers.splitting import read_record

if TYPE_CHECKING:
    from collections.abc import Sequence

    from parsers.cells import Grammar, Numbers
    from parsers.layout import Layout
    from parsers.readings import Lines as LineNumbers
    from parsers.text import Lines

#: Lines in which a header is looked for before the whole export is split.
_LIKELY_HEAD = 200
#: Most columns of a table: far beyond any export of readings, and little enough to list.
MOST_COLUMNS = 20_000

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

    def line_of(self, row: int, column: int | None) -> int:
        """Return the line on which a cell of a row stands."""
        ...

    def holds(self, row: int, column: int | None) -> bool:
        """Tell whether the block of a row has a column at all."""
        ...


@dataclass(frozen=True, slots=True)
class Frame:
    """Where the table of an export begins.

    Attributes
    ----------
    lines
        The export.
    headers
        Header names with folded blanks; of several header lines, the names of each column joined by `` | ``.
    header
        The header line as written.
    header_at, first
        Indices of the header line and of the first line behind it.
    offset
        Where that line begins in the text; 0 for a table inside a block.
    set_aside
        The lines up to there.
    end
        Index of the line behind the part of the export in which the table lies.
    parts
        For each column its name on each of several header lines; empty where there is one.
    again
        The further header lines as written.
    """

    lines: Lines
    headers: tuple[str, ...]
    header: str
    header_at: int
    first: int
    offset: int
    set_aside: tuple[SetAside, ...]
    end: int
    parts: tuple[tuple[str, ...], ...] = ()
    again: tuple[str, ...] = ()

    def named(self, name: str) -> list[int]:
        """Return the columns of a name: the whole of it, else that on any one of several header lines."""
        wanted = fold(name)
        whole = [at for at, header in enumerate(self.headers) if header == wanted]
        return whole or [at for at, parts in enumerate(self.parts) if wanted in parts]


def find_table(lines: Lines, layout: Layout, begin: int = 0, end: int | None = None, *, headed: bool = True) -> Frame:
    """Find the header of the table in a part of an export.

    Parameters
    ----------
    lines, layout
        The export and its layout.
    begin, end
        Indices of the first line to look at, and of the line behind the last.
    headed
        Whether the line found holds the names of the columns; without it, it is a row and they are numbered.

    Raises
    ------
    ExportRefused
        If no line is the header.
    """
    last = len(lines) if end is None else end
    for count in (min(_LIKELY_HEAD, last), last) if begin == 0 else (last,):
        head = lines.head(count) if begin == 0 else lines.lines
        at = _header_index(head, begin, count, layout)
        if at is not None:
            return _framed(lines, layout, (begin, at, last), headed=headed)
    where = "" if begin == 0 else f" behind line {begin}"
    if layout.header_pattern is None:
        todo = "Export again, or correct header in the layout"
        raise lines.refusal(begin or None, f"expected a header line{where}, got blank lines only", todo)
    sentence = (
        f"expected a header line that matches {layout.header_pattern.pattern!r}, got none in {last - begin} lines"
    )
    raise lines.refusal(begin or None, sentence + where, "Correct header in the layout, or export again")


def _header_index(head: Sequence[str], begin: int, last: int, layout: Layout) -> int | None:
    pattern = layout.header_pattern
    for at in range(begin, last):
        line = head[at]
        if not line.strip() or any(skipped.search(line) for skipped in layout.skip):
            continue
        if pattern.search(line) if pattern else not _SEPARATOR_NOTE.match(line):
            return at
    return None


def _framed(lines: Lines, layout: Layout, place: tuple[int, int, int], *, headed: bool) -> Frame:
    begin, at, last = place
    records: list[list[str]] = []
    behind = at
    for _ in range(layout.header_lines if headed else 0):
        if behind >= last:
            sentence = f"expected {layout.header_lines} header lines, got the end after {len(records)}"
            raise lines.refusal(at, sentence, "Correct header_lines in the layout, or export again")
        record, behind = read_record(lines, behind, layout)
        records.append(record)
    head = lines.head(behind + 1) if begin == 0 else lines.lines
    above = [(number, head[number]) for number in range(begin, at)]
    aside = fates.outside([text for _, text in above], begin, fates.BEFORE)
    aside += [SetAside(number + 1, fates.HEADER, head[number]) for number in range(at, behind)]
    offset = sum(len(head[number]) + 1 for number in range(behind)) if begin == 0 else 0
    if not records:
        count = len(read_record(lines, at, layout)[0])
        names = tuple(str(number) for number in range(1, count + 1))
        return Frame(lines, names, "", at, at, offset, tuple(aside), last)
    names, parts = composed(records, layout)
    if len(names) > MOST_COLUMNS:
        sentence = f"expected at most {MOST_COLUMNS} columns, got {len(names)}"
        raise lines.refusal(at, sentence, "Look whether separator and header in the layout are right")
    again = tuple(head[number] for number in range(at + 1, behind) if head[number].strip())
    return Frame(lines, names, head[at], at, behind, offset, tuple(aside), last, parts, again)


def composed(records: Sequence[Sequence[str]], layout: Layout) -> tuple[tuple[str, ...], tuple[tuple[str, ...], ...]]:
    """Return the name of each column, and its names on each of several header lines."""
    width = max(map(len, records))
    rows = [[fold(cell) for cell in (*record, *[""] * (width - len(record)))] for record in records]
    for number in layout.repeat_right:
        rows[number - 1] = _filled(rows[number - 1])
    if layout.unnamed:
        rows[-1] = _with_unnamed(rows, layout.unnamed)
    if len(rows) == 1:
        return tuple(rows[0]), ()
    parts = tuple(zip(*rows, strict=True))
    return tuple(" | ".join(part for part in column if part) for column in parts), parts


def _filled(cells: list[str]) -> list[str]:
    """Repeat each name to the right until the next one."""
    name, filled = "", []
    for cell in cells:
        name = cell or name
        filled.append(name)
    return filled


def _with_unnamed(rows: Sequence[list[str]], word: str) -> list[str]:
    """Call each column without any name by the name to its left and a word."""
    names = list(rows[-1])
    for at in range(1, len(names)):
        if not any(row[at] for row in rows) and names[at - 1]:
            names[at] = f"{names[at - 1]} {word}"
    return names


def wrong_count(frame: Frame, at: int, got: int) -> Exception:
    """Make the error for a row of another length than the header."""
    sentence = f"expected {len(frame.headers)} fields as in the header, got {got} in {shown(frame.lines.lines[at])}"
    return frame.lines.refusal(
        at, sentence, "Correct the row, or leave such lines out with skip or until in the layout"
    )


@dataclass(slots=True)
class RowTable:
    """A table as lists of cells.

    Attributes
    ----------
    headers, line, set_aside
        Names of the columns, line of each row, and the lines that are no rows.
    rows
        The cells.
    across
        For each row whose cells stand on lines of their own, the line of each; empty where every row is one line.
    lacking
        For each row the columns that its block does not have; empty where all blocks have the same.
    """

    headers: tuple[str, ...]
    line: LineNumbers
    set_aside: list[SetAside]
    rows: Sequence[Sequence[str]]
    across: Sequence[Sequence[int] | None] = ()
    lacking: Sequence[frozenset[int]] = ()

    def texts(self, column: int) -> Texts:
        """Return a column as trimmed texts; an empty cell has none."""
        return Texts.of([row[column].strip() or None for row in self.rows])

    def numbers(self, column: int, grammar: Grammar) -> Numbers:
        """Return a column as numbers."""
        return grammar.column(self.texts(column))

    def line_of(self, row: int, column: int | None) -> int:
        """Return the line on which a cell of a row stands."""
        lines = self.across[row] if self.across else None
        if lines is None or column is None or column >= len(lines):
            return int(self.line[row])
        return lines[column]

    def holds(self, row: int, column: int | None) -> bool:
        """Tell whether the block of a row has a column at all."""
        return not self.lacking or column not in self.lacking[row]


def read_rows(frame: Frame, layout: Layout) -> RowTable:
    """Read the rows one after the other.

    Raises
    ------
    ExportRefused
        If a row has another number of fields than the header, a quote is left open, or another header follows.
    """
    lines, width = frame.lines, len(frame.headers)
    nameless = _nameless_at_end(frame.headers)
    rows: list[list[str]] = []
    starts: list[int] = []
    aside = list(frame.set_aside)
    fate = fates.judge(frame, layout)
    at, end = frame.first, frame.end
    while at < end:
        line = lines.lines[at]
        reason = fate(at, line)
        if reason is not None:
            aside.append(SetAside(at + 1, reason, line))
            at += 1
            if reason == fates.UNTIL:
                break
            continue
        record, behind = read_record(lines, at, layout)
        if len(record) != width:
            record = _fitted(record, width, nameless, fill=layout.short_rows == "fill")
            if len(record) != width:
                raise wrong_count(frame, at, len(record))
        rows.append(record)
        starts.append(at + 1)
        aside += [SetAside(number + 1, fates.CONTINUED, lines.lines[number]) for number in range(at + 1, behind)]
        at = behind
    aside += fates.outside(lines.lines[at:end], at, fates.AFTER)
    return RowTable(frame.headers, np.asarray(starts, dtype=np.int64), aside, rows)


def _nameless_at_end(headers: Sequence[str]) -> int:
    """Count the columns without name at the end: they come of separators that close the line."""
    count = 0
    for header in reversed(headers):
        if header:
            break
        count += 1
    return count


def _fitted(record: list[str], width: int, nameless: int, *, fill: bool) -> list[str]:
    """Take away empty cells behind the last column, and add those that only close a line (or all, where asked for)."""
    while len(record) > width and not record[-1].strip():
        record = record[:-1]
    if len(record) < width and (fill or len(record) >= width - nameless):
        record = [*record, *[""] * (width - len(record))]
    return record
