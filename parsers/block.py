"""Large clean tables read at once, with the same outcome as reading record after record.

A table qualifies if no quote stands in it and every row has as many separators as the header. Number columns go through
the C parser only where each cell is made of digits, signs, the decimal mark and ``e``; every other cell goes through
the grammar of the layout, one by one. Whatever is in doubt is left to `parsers.table.read_rows`. Nothing here knows
what a column means.
"""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass, field
from io import BytesIO
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from parsers import table
from parsers.cells import Cell, Grammar, Kind, Numbers
from parsers.patterns import literal_start
from parsers.readings import SetAside, Texts
from parsers.spelling import renamed

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from parsers.columns import Plan
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.readings import Lines as LineNumbers
    from parsers.table import Frame

#: Rows from which the C parser pays: it costs a millisecond before it starts.
FEWEST_ROWS = 1500
#: Longest plain number in bytes: up to here the C parser rounds as Python does; longer ones are converted by Python.
LONGEST_NUMBER = 17
_NEWLINE = 10
_CLASS = re.compile(r"\[([^\]\\^-]+)\][+*]?")


def read_block(frame: Frame, layout: Layout, plan: Plan, fewest_rows: int = FEWEST_ROWS) -> BlockTable | None:
    """Read a table at once, or return None where it must be read record after record."""
    if len(frame.lines) - frame.first < fewest_rows or not _qualifies(frame, layout):
        return None
    fates = _Fates.of(frame, layout)
    cells = _Spans.of(fates, layout.separator, len(frame.headers))
    if cells is None:
        return None
    block = BlockTable(frame.headers, fates.line_numbers(), fates.set_aside(), cells)
    try:
        block.read(layout.separator, plan, layout.grammar)
    except (ValueError, OverflowError):
        return None  # a cell that only looks like a number: the reading one by one names it
    return block


def _qualifies(frame: Frame, layout: Layout) -> bool:
    grammar, separator = layout.grammar, layout.separator
    return (
        len(frame.headers) > 1
        and separator.isascii()
        and separator not in " 0123456789+-eE" + grammar.decimal
        and all(_spares_numbers(pattern) for pattern in (grammar.below, grammar.above, grammar.flags))
    )


def _spares_numbers(pattern: re.Pattern[str] | tuple[str, ...] | None) -> bool:
    """Tell whether a pattern certainly needs a character that no plain number has."""
    if pattern is None or isinstance(pattern, tuple):
        return True  # words are compared with the numbers that they may write
    plain = set("0123456789+-.,eE")
    start = literal_start(pattern)
    if start:
        return not plain.issuperset(start)
    only = _CLASS.fullmatch(pattern.pattern)
    return only is not None and not plain & set(only.group(1)) and not pattern.pattern.endswith("*")


@dataclass(slots=True)
class _Fates:
    """Which lines behind the header are rows, and why the others are not."""

    frame: Frame
    last: int
    reasons: dict[int, str]

    @classmethod
    def of(cls, frame: Frame, layout: Layout) -> _Fates:
        """Apply the patterns of a layout in the order of `parsers.table.fate`."""
        lines, first, last = frame.lines, frame.first, len(frame.lines)
        reasons: dict[int, str] = {}
        if layout.until is not None:
            ends = lines.matching(layout.until, first, last)
            end = next((at for at in ends if lines.lines[at].strip()), None)
            if end is not None:
                reasons[end], last = table.UNTIL, end
        searches = [(layout.finished, table.FINISHED), *((pattern, table.SKIPPED) for pattern in layout.skip)]
        for pattern, reason in searches:
            for at in lines.matching(pattern, first, last) if pattern is not None else ():
                reasons.setdefault(at, reason)
        header = lines.lines[frame.header_at].strip()
        again = [at for at in range(first, last) if header in lines.lines[at]] if lines.text.count(header) > 1 else []
        if layout.header is not None:
            again += lines.matching(layout.header, first, last)
        for at in again:
            if at not in reasons and lines.lines[at].strip() and table.header_again(frame, at, layout):
                reasons[at] = table.HEADER_AGAIN
        return cls(frame, last, reasons)

    def leave_out_blanks(self) -> bool:
        """Set blank lines aside; tell whether there were any."""
        lines = self.frame.lines.lines
        blank = [at for at in range(self.frame.first, self.last) if not lines[at].strip()]
        self.reasons.update(dict.fromkeys(blank, table.BLANK))
        return bool(blank)

    def _cut(self) -> list[int]:
        return sorted(at for at in self.reasons if at < self.last)

    def rows(self) -> int:
        """Return the number of rows."""
        return self.last - self.frame.first - len(self._cut())

    def data(self) -> bytes:
        """Return the rows as UTF-8, each with a line feed."""
        lines, first = self.frame.lines, self.frame.first
        cut = set(self._cut())
        if cut:
            chunk = "\n".join([lines.lines[at] for at in range(first, self.last) if at not in cut])
        else:
            begin = sum(len(line) + 1 for line in lines.lines[:first])
            behind = sum(len(line) + 1 for line in lines.lines[self.last :])
            chunk = lines.text[begin : len(lines.text.removesuffix("\n")) + 1 - behind].removesuffix("\n")
        return f"{chunk}\n".encode()

    def line_numbers(self) -> LineNumbers:
        """Return the line of each row."""
        numbers = np.arange(self.frame.first + 1, self.last + 1, dtype=np.int64)
        cut = self._cut()
        return np.delete(numbers, np.asarray(cut, dtype=np.int64) - self.frame.first) if cut else numbers

    def set_aside(self) -> list[SetAside]:
        """Return every line that is no row."""
        lines = self.frame.lines
        aside = [*self.frame.set_aside]
        aside += [SetAside(at + 1, reason, lines.lines[at]) for at, reason in sorted(self.reasons.items())]
        return aside + table.behind_table(lines, self.last + (self.last in self.reasons))


@dataclass(slots=True)
class _Spans:
    """Where each cell lies in the bytes of the rows.

    Attributes
    ----------
    data
        The rows.
    codes
        The same as uint8.
    ends
        int64[rows, columns], index of the separator or line feed behind each cell.
    """

    data: bytes
    codes: NDArray[np.uint8]
    ends: NDArray[np.int64]

    @classmethod
    def of(cls, fates: _Fates, separator: str, width: int) -> _Spans | None:
        """Find the cells; None where a row has another number of fields than the header or a quote stands in it."""
        spans = cls._regular(fates, separator, width)
        if spans is None and fates.leave_out_blanks():
            spans = cls._regular(fates, separator, width)
        return spans

    @classmethod
    def _regular(cls, fates: _Fates, separator: str, width: int) -> _Spans | None:
        data, rows = fates.data(), fates.rows()
        codes = np.frombuffer(data, dtype=np.uint8)
        if rows == 0 or b'"' in data:
            return None
        marks = np.flatnonzero((codes == ord(separator)) | (codes == _NEWLINE))
        if len(marks) != rows * width:
            return None
        ends = marks.reshape(rows, width)
        # As many line feeds as rows, and all at the ends of rows: no row is short while another is long.
        regular = (codes[ends[:, -1]] == _NEWLINE).all() and data.count(b"\n") == rows
        return cls(data, codes, ends) if regular else None

    def span(self, column: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return begin and end of the cells of a column."""
        if column:
            return self.ends[:, column - 1] + 1, self.ends[:, column]
        begin = np.empty(len(self.ends), dtype=np.int64)
        begin[0], begin[1:] = 0, self.ends[:-1, -1] + 1
        return begin, self.ends[:, 0]

    def texts(self, column: int, rows: NDArray[np.int64]) -> Iterator[str]:
        """Yield the raw cells of some rows."""
        begin, end = self.span(column)
        for start, stop in zip(begin[rows].tolist(), end[rows].tolist(), strict=True):
            yield self.data[start:stop].decode()


@dataclass(slots=True)
class BlockTable:
    """A table whose columns were converted at once."""

    headers: tuple[str, ...]
    line: LineNumbers
    set_aside: list[SetAside]
    cells: _Spans
    columns: dict[int, Texts | Numbers] = field(default_factory=dict)

    def texts(self, column: int) -> Texts:
        """Return a column as trimmed texts; an empty cell has none."""
        texts = self.columns[column]
        assert isinstance(texts, Texts)  # noqa: S101 (the plan said so)
        return texts

    def numbers(self, column: int, grammar: Grammar) -> Numbers:
        """Return a column as numbers."""
        values = self.columns[column]
        return values if isinstance(values, Numbers) else grammar.column(values)

    def read(self, separator: str, plan: Plan, grammar: Grammar) -> None:
        """Convert the columns of a plan.

        Raises
        ------
        ValueError
            If a cell made of the characters of a number is none.
        """
        plain = _plain_cells(self.cells, plan.number_columns, grammar.decimal)
        enough = {column for column, rows in plain.items() if rows.mean() > 0.9}
        frame = pd.read_csv(
            BytesIO(self.cells.data),
            sep=separator,
            header=None,
            names=list(range(len(self.headers))),
            usecols=sorted(plan.text_columns | plan.number_columns),
            dtype={at: "float64" if at in enough else "category" for at in plan.text_columns | plan.number_columns},
            na_values={at: sorted(set(self.cells.texts(at, np.flatnonzero(~plain[at])))) for at in enough},
            keep_default_na=False,
            index_col=False,
            quoting=csv.QUOTE_NONE,
            on_bad_lines="error",
            skip_blank_lines=False,
            lineterminator="\n",
            decimal=grammar.decimal,
            low_memory=False,
        )
        for at in frame.columns:
            if at in enough:
                self.columns[at] = self._numbers(at, frame[at].to_numpy(dtype=np.float64, copy=True), plain[at], grammar)
            else:
                self.columns[at] = _texts(frame[at])

    def _numbers(self, column: int, values: Floats, plain: NDArray[np.bool_], grammar: Grammar) -> Numbers:
        """Put what is no plain number through the grammar."""
        words = (*grammar.missing, *(word for some in (grammar.below, grammar.above) if isinstance(some, tuple) for word in some))
        written = [value for word in words if (value := grammar.value(word)) is not None]
        doubtful = ~plain | ~np.isfinite(values)
        if written:
            doubtful |= np.isin(values, written)
        rows = np.flatnonzero(doubtful)
        known: dict[str, Cell] = {}
        odd: dict[int, Cell] = {}
        for row, text in zip(rows.tolist(), self.cells.texts(column, rows), strict=True):
            cell = known.get(text)
            if cell is None:
                cell = known[text] = grammar.cell(text)
            values[row] = cell.value
            if cell.kind is not Kind.NUMBER:
                odd[row] = cell
        return Numbers(values, odd)


def _plain_cells(cells: _Spans, columns: frozenset[int], decimal: str) -> dict[int, NDArray[np.bool_]]:
    """Tell for each cell of the number columns whether it is short, not empty and made of the characters of a number."""
    if not columns:
        return {}
    foreign = np.ones(256, dtype=np.uint8)
    foreign[list(b"0123456789+-eE" + decimal.encode())] = 0
    so_far = np.empty(len(cells.codes) + 1, dtype=np.int32)
    so_far[0] = 0
    np.cumsum(foreign[cells.codes], dtype=np.int32, out=so_far[1:])
    plain = {}
    for column in columns:
        begin, end = cells.span(column)
        length = end - begin
        plain[column] = (so_far[end] == so_far[begin]) & (length > 0) & (length <= LONGEST_NUMBER)
    return plain


def _texts(column: pd.Series) -> Texts:
    """Return a column of categories as trimmed texts, numbered in the order in which they first appear."""
    names = column.cat.categories.to_list()
    codes, order = pd.factorize(column.cat.codes.to_numpy())
    texts = Texts(codes.astype(np.int32), tuple(names[code] for code in order.tolist()))
    return renamed(texts, lambda name: name.strip() or None)
