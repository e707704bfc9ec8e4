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
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from parsers.cells import Cell, Grammar, Kind, Numbers
from parsers.errors import ExportRefused
from parsers.fates import Fates
from parsers.patterns import literal_start
from parsers.readings import Texts
from parsers.spans import Spans
from parsers.spelling import looked_up

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from parsers.columns import Plan
    from parsers.layout import Layout
    from parsers.readings import Floats, SetAside
    from parsers.readings import Lines as LineNumbers
    from parsers.table import Frame

#: Rows from which the C parser pays: it costs a millisecond before it starts.
FEWEST_ROWS = 1500
#: Share of cells that are no plain numbers from which a column is read as texts.
MOST_DOUBTFUL = 0.1
_CLASS = re.compile(r"\[([^\]\\^-]+)\][+*]?")


def read_block(frame: Frame, layout: Layout, plan: Plan, fewest_rows: int = FEWEST_ROWS) -> BlockTable | None:
    """Read a table at once, or return None where it must be read record after record."""
    if len(frame.lines) - frame.first < fewest_rows or not _qualifies(frame, layout):
        return None
    try:
        fates = Fates.of(frame, layout)
        quoted = frame.lines.text.find('"', frame.offset, fates.end) >= 0
        cells = None if quoted else Spans.of(fates, layout.separator, len(frame.headers))
        if cells is None:
            return None
        block = BlockTable(frame.headers, fates.line_numbers(), fates.set_aside(), cells)
        block.read(layout.separator, plan, layout.grammar)
    except (ExportRefused, ValueError, OverflowError):
        return None  # another header, or a cell that only looks like a number: the reading one by one names the first
    return block


def _qualifies(frame: Frame, layout: Layout) -> bool:
    grammar, separator = layout.grammar, layout.separator
    return (
        len(frame.headers) > 1
        and not frame.lines.may_be_long()
        and separator.isascii()
        and separator not in " 0123456789+-eE" + grammar.decimal
        and not grammar.others
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
class BlockTable:
    """A table whose columns were converted at once."""

    headers: tuple[str, ...]
    line: LineNumbers
    set_aside: list[SetAside]
    cells: Spans
    columns: dict[int, Texts | Numbers] = field(default_factory=dict)

    def texts(self, column: int) -> Texts:
        """Return a column as trimmed texts; an empty cell has none."""
        texts = self.columns[column]
        if isinstance(texts, Texts):
            return texts
        cells = self.cells.texts(column, np.arange(len(self.line)))  # a number that has another source as well
        return Texts.of([cell.strip() or None for cell in cells])

    def numbers(self, column: int, grammar: Grammar) -> Numbers:
        """Return a column as numbers."""
        values = self.columns[column]
        return values if isinstance(values, Numbers) else grammar.column(values)

    def line_of(self, row: int, column: int | None) -> int:  # noqa: ARG002 (a row is one line)
        """Return the line on which a cell of a row stands."""
        return int(self.line[row])

    def holds(self, row: int, column: int | None) -> bool:  # noqa: ARG002 (there is one block)
        """Tell whether the block of a row has a column at all."""
        return True

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
            doubtful = {at: np.zeros(self.cells.rows, dtype=bool) for at in numbers}
            if any(_may_be_words(frame[at].to_numpy()) for at in numbers):
                raise ValueError("perhaps a column of True and False")  # noqa: TRY301
        except ValueError:
            doubtful = {at: self.cells.doubtful(at, grammar.decimal) for at in numbers}
            numbers = frozenset(at for at in numbers if doubtful[at].mean() < MOST_DOUBTFUL)
            words = {at: sorted(set(self.cells.texts(at, np.flatnonzero(doubtful[at])))) for at in numbers}
            frame = self._parsed(separator, plan, grammar.decimal, words)
        for at in sorted(plan.text_columns | plan.number_columns):
            if at in numbers:
                self.columns[at] = self._numbers(at, frame[at].to_numpy(copy=True), doubtful[at], grammar)
            else:
                self.columns[at] = _texts(frame[at].to_numpy())

    def _parsed(
        self, separator: str, plan: Plan, decimal: str, number_columns: Mapping[int, Sequence[str]]
    ) -> pd.DataFrame:
        """Let the C parser split and convert; `number_columns` names the words that are no numbers."""
        wanted = plan.text_columns | plan.number_columns
        options: dict[str, Any] = {
            "header": self.cells.header,
            "names": list(range(len(self.headers))),
            "usecols": sorted(wanted),
            "dtype": {at: "float64" if at in number_columns else "object" for at in wanted},
            "na_values": {at: list(words) for at, words in number_columns.items() if words} or None,
            "na_filter": any(number_columns.values()),
            "keep_default_na": False,
            "index_col": False,
            "quoting": csv.QUOTE_NONE,
            "on_bad_lines": "error",
            "skip_blank_lines": False,
        }
        frame: pd.DataFrame = pd.read_csv(BytesIO(self.cells.data), sep=separator, decimal=decimal, **options)
        return frame

    def _numbers(self, column: int, values: Floats, doubtful: NDArray[np.bool_], grammar: Grammar) -> Numbers:
        """Put what is no plain number through the grammar."""
        words = (
            *grammar.missing,
            *(word for some in (grammar.below, grammar.above) if isinstance(some, tuple) for word in some),
        )
        if grammar.zero != "number":
            words = (*words, "0")
        written = [value for word in words if (value := grammar.value(word)) is not None]
        doubtful = doubtful | ~np.isfinite(values)
        if written:
            doubtful |= np.isin(values, written)
        rows = np.flatnonzero(doubtful)
        if not len(rows):
            return Numbers(values, {})  # the places of cells are looked for only where they are needed
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


def _texts(column: NDArray[np.object_]) -> Texts:
    """Return a column as trimmed texts, numbered in the order in which they first appear."""
    codes, names = pd.factorize(column)
    trimmed = [name.strip() for name in names.tolist()]
    if "" in trimmed or len(set(trimmed)) < len(trimmed):
        of_names = Texts.of([name or None for name in trimmed])
        return looked_up(of_names, Texts(codes.astype(np.int32), tuple(trimmed)))
    return Texts(codes.astype(np.int32), tuple(trimmed))
