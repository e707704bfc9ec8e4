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
from parsers.spelling import looked_up
from parsers.text import MOST_CHARACTERS

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from parsers.columns import Plan
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.readings import Lines as LineNumbers
    from parsers.table import Frame

#: Rows from which the C parser pays: it costs a millisecond before it starts.
FEWEST_ROWS = 1500
#: Longest plain number in bytes where cells are looked at one by one.
LONGEST_NUMBER = 17
#: Share of cells that are no plain numbers from which a column is read as texts.
MOST_DOUBTFUL = 0.1
_NEWLINE = 10
_PIECE = 1 << 18
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
    """Which lines behind the header are rows, and why the others are not.

    Attributes
    ----------
    frame
        Where the table begins.
    last, end
        Index of the line behind the table, and where it begins in the text.
    reasons
        Why lines before `last`, and the line `last` itself, are no rows.
    """

    frame: Frame
    last: int
    end: int
    reasons: dict[int, str]

    @classmethod
    def of(cls, frame: Frame, layout: Layout) -> _Fates:
        """Apply the patterns of a layout in the order of `parsers.table.fate`."""
        lines, first, offset = frame.lines, frame.first, frame.offset
        fates = cls(frame, len(lines), len(lines.text), {})
        if layout.until is not None:
            ends = lines.matching(layout.until, first, offset)
            last = next((at for at in ends if lines.lines[at].strip()), None)
            if last is not None:
                behind = sum(len(line) + 1 for line in lines.lines[last:]) - (not lines.text.endswith("\n"))
                fates = cls(frame, last, len(lines.text) - behind, {last: table.UNTIL})
        searches = [(layout.finished, table.FINISHED), *((pattern, table.SKIPPED) for pattern in layout.skip)]
        for pattern, reason in searches:
            for at in lines.matching(pattern, first, offset) if pattern is not None else ():
                fates.note(at, reason)
        fates.headers_again(layout)
        return fates

    def note(self, at: int, reason: str) -> None:
        if at < self.last and at not in self.reasons and self.frame.lines.lines[at].strip():
            self.reasons[at] = reason

    def headers_again(self, layout: Layout) -> None:
        frame, lines = self.frame, self.frame.lines
        if layout.header is not None:  # the header itself matches its pattern, so a repetition does
            again = lines.matching(layout.header, frame.first, frame.offset)
        elif lines.text.find(frame.header, frame.offset, self.end) >= 0:
            again = [at for at in range(frame.first, self.last) if lines.lines[at] == frame.header]
        else:
            again = []
        for at in again:
            other = at < self.last and at not in self.reasons and lines.lines[at].strip()
            if other and table.header_again(frame, at, lines.lines[at], layout):
                self.reasons[at] = table.HEADER_AGAIN

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
        lines, cut = self.frame.lines, set(self._cut())
        if not cut:
            chunk = lines.text[self.frame.offset : self.end]
        else:
            chunk = "\n".join([lines.lines[at] for at in range(self.frame.first, self.last) if at not in cut])
        return (chunk if chunk.endswith("\n") else f"{chunk}\n").encode()

    def line_numbers(self) -> LineNumbers:
        """Return the line of each row."""
        numbers = np.arange(self.frame.first + 1, self.last + 1, dtype=np.int64)
        cut = self._cut()
        return np.delete(numbers, np.asarray(cut, dtype=np.int64) - self.frame.first) if cut else numbers

    def set_aside(self) -> list[SetAside]:
        """Return every line that is no row."""
        aside, lines = [*self.frame.set_aside], self.frame.lines
        aside += [SetAside(at + 1, reason, lines.lines[at]) for at, reason in sorted(self.reasons.items())]
        if self.last in self.reasons:
            aside += table.behind_table(lines.lines[self.last + 1 :], self.last + 1)
        return aside


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

    def __len__(self) -> int:
        """Return the number of rows."""
        return len(self.ends)

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
        # A mark of UTF-8 at the beginning would vanish in the C parser.
        if rows == 0 or b'"' in data or data.startswith(b"\xef\xbb\xbf"):
            return None
        marks = _marks(codes, ord(separator))
        if len(marks) != rows * width:
            return None
        ends = marks.reshape(rows, width)
        # There are as many line feeds as rows. Where all stand at ends of rows, no row is short while another is long.
        regular = bool((codes[ends[:, -1]] == _NEWLINE).all())
        longest = int(np.diff(ends[:, -1], prepend=-1).max())
        return cls(data, codes, ends) if regular and longest <= MOST_CHARACTERS else None

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


def _marks(codes: NDArray[np.uint8], separator: int) -> NDArray[np.int64]:
    """Return the indices of separators and line feeds, looked for in pieces that fit the processor's cache."""
    found = []
    for begin in range(0, len(codes), _PIECE):
        piece = codes[begin : begin + _PIECE]
        found.append(np.flatnonzero((piece == separator) | (piece == _NEWLINE)) + begin)
    return np.concatenate(found)


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
        """Convert the columns of a plan, all at once where each number column holds plain numbers only.

        Raises
        ------
        ValueError
            If a cell made of the characters of a number is none.
        """
        numbers = plan.number_columns
        try:
            frame = self._parsed(separator, plan, grammar.decimal, dict.fromkeys(numbers, ()))
            doubtful = {at: np.zeros(len(self.cells), dtype=bool) for at in numbers}
            if any(_may_be_words(frame[at].to_numpy()) for at in numbers):
                raise ValueError("perhaps a column of True and False")  # noqa: TRY301
        except ValueError:
            doubtful = {at: _doubtful(self.cells, at, grammar.decimal) for at in numbers}
            numbers = frozenset(at for at in numbers if doubtful[at].mean() < MOST_DOUBTFUL)
            words = {at: sorted(set(self.cells.texts(at, np.flatnonzero(doubtful[at])))) for at in numbers}
            frame = self._parsed(separator, plan, grammar.decimal, words)
        for at in frame.columns:
            if at in numbers:
                self.columns[at] = self._numbers(at, frame[at].to_numpy(copy=True), doubtful[at], grammar)
            else:
                self.columns[at] = _texts(frame[at])

    def _parsed(
        self, separator: str, plan: Plan, decimal: str, number_columns: Mapping[int, Sequence[str]]
    ) -> pd.DataFrame:
        """Let the C parser split and convert; `number_columns` names the words that are no numbers."""
        wanted = plan.text_columns | plan.number_columns
        return pd.read_csv(
            BytesIO(self.cells.data),
            sep=separator,
            header=None,
            names=list(range(len(self.headers))),
            usecols=sorted(wanted),
            dtype={at: "float64" if at in number_columns else "object" for at in wanted},
            na_values={at: list(words) for at, words in number_columns.items() if words} or None,
            na_filter=any(number_columns.values()),
            keep_default_na=False,
            index_col=False,
            quoting=csv.QUOTE_NONE,
            on_bad_lines="error",
            skip_blank_lines=False,
            lineterminator="\n",
            decimal=decimal,
        )

    def _numbers(self, column: int, values: Floats, doubtful: NDArray[np.bool_], grammar: Grammar) -> Numbers:
        """Put what is no plain number through the grammar."""
        words = (
            *grammar.missing,
            *(word for some in (grammar.below, grammar.above) if isinstance(some, tuple) for word in some),
        )
        written = [value for word in words if (value := grammar.value(word)) is not None]
        doubtful = doubtful | ~np.isfinite(values)
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


def _may_be_words(values: Floats) -> bool:
    """Tell whether a column may be made of True and False, which the C parser takes for numbers."""
    return bool(((values == 0) | (values == 1)).all())


def _doubtful(cells: _Spans, column: int, decimal: str) -> NDArray[np.bool_]:
    """Tell which cells of a column are empty, long, or hold a character that no plain number has."""
    begin, end = cells.span(column)
    length = end - begin
    foreign = np.ones(256, dtype=bool)
    foreign[list(b"0123456789+-eE" + decimal.encode())] = False
    doubtful = (length == 0) | (length > LONGEST_NUMBER)
    for place in range(min(int(length.max()), LONGEST_NUMBER)):
        doubtful |= foreign[cells.codes[np.minimum(begin + place, end - 1)]] & (length > place)
    return doubtful


def _texts(column: pd.Series) -> Texts:
    """Return a column as trimmed texts, numbered in the order in which they first appear."""
    codes, names = pd.factorize(column.to_numpy(dtype=object))
    trimmed = [name.strip() for name in names.tolist()]
    if "" in trimmed or len(set(trimmed)) < len(trimmed):
        of_names = Texts.of([name or None for name in trimmed])
        return looked_up(of_names, Texts(codes.astype(np.int32), tuple(trimmed)))
    return Texts(codes.astype(np.int32), tuple(trimmed))
