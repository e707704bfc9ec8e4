"""Which lines behind the header are rows of the table, and the reason of every line that is none.

The order counts: a blank line, the end of the table, the end mark of the export, a line to skip, the header again.
Nothing here splits a line.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import SetAside
from parsers.spelling import shown

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Sequence

    from parsers.layout import Layout
    from parsers.readings import Lines as LineNumbers
    from parsers.table import Frame
    from parsers.text import Line

BLANK = "blank line"
BEFORE = "before the table"
HEADER = "header"
HEADER_AGAIN = "header again"
SKIPPED = "left out by skip"
FINISHED = "end mark of the export"
UNTIL = "end of the table"
AFTER = "after the table"
CONTINUED = "continues the line above"
OUTSIDE = "outside the blocks"
HEADING = "heading of a block"
ACROSS = "read across"
EXCLUDED = "excluded by the export"
#: Lines above and below a table.
OUTSIDE_TABLE = (BEFORE, UNTIL, AFTER)


def judge(frame: Frame, layout: Layout) -> Callable[[int, str], str | None]:
    """Return a function that tells why a line, given by index and text, is no row; it returns None for a row."""
    searches = [
        (pattern.search, reason)
        for pattern, reason in [
            (layout.until, UNTIL), (layout.finished, FINISHED), *((pattern, SKIPPED) for pattern in layout.skip)
        ]
        if pattern is not None
    ]  # fmt: skip

    def fate(at: int, line: str) -> str | None:
        if not line.strip():
            return BLANK
        for search, reason in searches:
            if search(line):
                return reason
        return HEADER_AGAIN if header_again(frame, at, line, layout) else None

    return fate


def header_again(frame: Frame, at: int, line: str, layout: Layout) -> bool:
    """Tell whether a line repeats the header.

    Raises
    ------
    ExportRefused
        If it is a header by its pattern, but another one.
    """
    if frame.header and (line == frame.header or line in frame.again):
        return True
    pattern = layout.header_pattern
    if not frame.header or pattern is None or not pattern.search(line):
        return False
    sentence = f"expected rows under the header of line {frame.header_at + 1}, got another header: {shown(line)}"
    raise frame.lines.refusal(
        at, sentence, "Begin a block at each header (blocks in the layout), set until, or export each batch on its own"
    )


def outside(lines: Sequence[str], at: int, reason: str) -> list[SetAside]:
    """Return the fate of lines before or behind the table, the first of which has the index `at`."""
    return noted(enumerate(lines, at), reason)


def noted(lines: Iterable[tuple[int, str]], reason: str) -> list[SetAside]:
    """Return the fate of lines, given by index and text."""
    return [SetAside(at + 1, reason if text.strip() else BLANK, text) for at, text in lines]


@dataclass(slots=True)
class Fates:
    """Which lines behind the header are rows, and why the others are not.

    Attributes
    ----------
    frame
        Where the table begins.
    last, end
        Index of the line behind the last row, and where it begins in the text.
    reasons
        The lines before `last` that are no rows, with their reasons.
    tail
        The lines from `last` on.
    """

    frame: Frame
    last: int
    end: int
    reasons: dict[int, tuple[str, Line]] = field(default_factory=dict)
    tail: list[SetAside] = field(default_factory=list)

    @classmethod
    def of(cls, frame: Frame, layout: Layout) -> Fates:
        """Apply the patterns of a layout in the order of `judge`."""
        lines, first, offset = frame.lines, frame.first, frame.offset
        fates = cls(frame, len(lines), len(lines.text))
        if layout.until is not None:
            fates._stop_at(line for line in lines.matching(layout.until, first, offset) if line.text.strip())
        fates._trim()
        searches = [(layout.finished, FINISHED), *((pattern, SKIPPED) for pattern in layout.skip)]
        for pattern, reason in searches:
            for line in lines.matching(pattern, first, offset) if pattern is not None else ():
                fates._note(line, reason)
        for line in fates._perhaps_headers(layout):
            if fates._is_open(line) and header_again(frame, line.at, line.text, layout):
                fates._note(line, HEADER_AGAIN)
        return fates

    def _stop_at(self, ends: Iterator[Line]) -> None:
        """End the table at the first of some lines."""
        until = next(ends, None)
        if until is not None:
            self.last, self.end = until.at, until.offset
            behind = self.frame.lines.text[until.offset + len(until.text) + 1 :]
            self.tail = [SetAside(until.at + 1, UNTIL, until.text)]
            self.tail += outside(behind.removesuffix("\n").split("\n") if behind else [], until.at + 1, AFTER)

    def _trim(self) -> None:
        """Leave blank lines at the end out, so that the rows before them need not be put together anew."""
        text = self.frame.lines.text
        while self.last > self.frame.first:
            end = self.end - text.endswith("\n", 0, self.end)
            begin = text.rfind("\n", 0, end) + 1
            if text[begin:end].strip():
                return
            self.last, self.end = self.last - 1, begin
            self.tail.append(SetAside(self.last + 1, BLANK, text[begin:end]))

    def _is_open(self, line: Line) -> bool:
        return line.at < self.last and line.at not in self.reasons and bool(line.text.strip())

    def _note(self, line: Line, reason: str) -> None:
        if self._is_open(line):
            self.reasons[line.at] = (reason, line)

    def _perhaps_headers(self, layout: Layout) -> Iterable[Line]:
        frame, lines = self.frame, self.frame.lines
        pattern = layout.header_pattern
        if pattern is not None:  # the header itself matches its pattern, so a repetition does
            return lines.matching(pattern, frame.first, frame.offset)
        again = lines.text.find(frame.header, frame.offset, self.end) >= 0
        return lines.all_from(frame.first, frame.offset) if again else ()

    def leave_out_blanks(self) -> bool:
        """Set blank lines between the rows aside; tell whether there were any."""
        blank = [
            line
            for line in self.frame.lines.all_from(self.frame.first, self.frame.offset)
            if line.at < self.last and not line.text.strip()
        ]
        self.reasons.update((line.at, (BLANK, line)) for line in blank)
        return bool(blank)

    def rows(self) -> int:
        """Return the number of rows."""
        return self.last - self.frame.first - len(self.reasons)

    def data(self) -> tuple[bytes, int | None, int]:
        """Return the rows as UTF-8, each with a line feed, perhaps after a carriage return.

        Returns
        -------
        tuple
            The bytes; the index of a header line directly before the first row, or None; how many bytes stand before
            that row. An export that is in UTF-8 already and has rows to its end is not copied.
        """
        lines, frame = self.frame.lines, self.frame
        if lines.data is not None and not self.reasons:
            begin, end = lines.byte_range(frame.first, self.last)
            ended = lines.data.endswith(b"\n", begin, end)
            if ended and end == len(lines.data) and frame.first == frame.header_at + 1 and '"' not in frame.header:
                return lines.data, frame.header_at, begin
            return lines.data[begin:end] + (b"" if ended else b"\n"), None, 0
        pieces, begin = [], frame.offset
        for _, line in sorted(self.reasons.values(), key=lambda reason: reason[1].at):
            pieces.append(lines.text[begin : line.offset])
            begin = line.offset + len(line.text) + 1
        chunk = "".join([*pieces, lines.text[begin : self.end]])
        return (chunk if chunk.endswith("\n") else f"{chunk}\n").encode(), None, 0

    def line_numbers(self) -> LineNumbers:
        """Return the line of each row."""
        numbers = np.arange(self.frame.first + 1, self.last + 1, dtype=np.int64)
        return np.delete(numbers, np.array(sorted(self.reasons), dtype=np.int64) - self.frame.first)

    def set_aside(self) -> list[SetAside]:
        """Return every line that is no row."""
        between = [SetAside(at + 1, reason, line.text) for at, (reason, line) in self.reasons.items()]
        return [*self.frame.set_aside, *between, *self.tail]
