"""Where each cell of a large clean table lies in its bytes, found for all rows at once.

Nothing here converts a cell.
"""

from __future__ import annotations

import codecs
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from parsers.fates import Fates

#: Longest plain number in bytes.
LONGEST_NUMBER = 17
_NEWLINE, _RETURN = 10, 13
#: For each ASCII separator: all bytes but itself and the line feed.
_ALL_BUT = [bytes(byte for byte in range(256) if byte not in (separator, _NEWLINE)) for separator in range(128)]


@dataclass(slots=True)
class Spans:
    """The cells of a table, every row of which has the same number of them.

    Attributes
    ----------
    data
        The rows as UTF-8, each with a line feed, perhaps after a carriage return.
    header, begin
        Index of a header line directly before the first row, or None; and how many bytes stand before that row.
    separator
        Code of the separator.
    rows, width
        Number of rows, and of cells in each.
    """

    data: bytes
    header: int | None
    begin: int
    separator: int
    rows: int
    width: int
    _ends: NDArray[np.int64] | None = field(default=None, repr=False)

    @classmethod
    def of(cls, fates: Fates, separator: str, width: int) -> Spans | None:
        """Take the rows of a table; None where one has another number of cells than the header."""
        spans = cls._regular(fates, separator, width)
        if spans is None and fates.leave_out_blanks():
            spans = cls._regular(fates, separator, width)
        return spans

    @classmethod
    def _regular(cls, fates: Fates, separator: str, width: int) -> Spans | None:
        (data, header, begin), rows, code = fates.data(), fates.rows(), ord(separator)
        # A mark of UTF-8 at the beginning would vanish in the C parser.
        if rows == 0 or data.startswith(codecs.BOM_UTF8, begin):
            return None
        before = len(data[:begin].translate(None, _ALL_BUT[code]))
        marks = data.translate(None, _ALL_BUT[code])[before:]
        regular = marks == (separator * (width - 1) + "\n").encode() * rows
        return cls(data, header, begin, code, rows, width) if regular else None

    def span(self, column: int) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Return begin and end of the cells of a column."""
        if self._ends is None:
            codes = np.frombuffer(self.data, dtype=np.uint8, offset=self.begin)
            marks = np.flatnonzero((codes == self.separator) | (codes == _NEWLINE)) + self.begin
            self._ends = marks.reshape(self.rows, self.width)
        if column:
            return self._ends[:, column - 1] + 1, self._ends[:, column]
        begin = np.empty(self.rows, dtype=np.int64)
        begin[0], begin[1:] = self.begin, self._ends[:-1, -1] + 1
        return begin, self._ends[:, 0]

    def texts(self, column: int, rows: NDArray[np.int64]) -> Iterator[str]:
        """Yield the raw cells of some rows."""
        begin, end = self.span(column)
        for start, stop in zip(begin[rows].tolist(), end[rows].tolist(), strict=True):
            yield self.data[start:stop].removesuffix(b"\r").decode()

    def doubtful(self, column: int, decimal: str) -> NDArray[np.bool_]:
        """Tell which cells of a column are empty, long, or hold a character that no plain number has."""
        begin, end = self.span(column)
        codes = np.frombuffer(self.data, dtype=np.uint8)
        # A carriage return stands before a line feed only: it is no part of the last cell.
        length = end - begin - ((codes[end] == _NEWLINE) & (codes[end - 1] == _RETURN))
        foreign = np.ones(256, dtype=bool)
        foreign[list(b"0123456789+-eE\r" + decimal.encode())] = False
        doubtful: NDArray[np.bool_] = (length == 0) | (length > LONGEST_NUMBER)
        for place in range(min(int(length.max()), LONGEST_NUMBER)):
            doubtful |= foreign[codes[np.minimum(begin + place, end - 1)]] & (length > place)
        return doubtful
