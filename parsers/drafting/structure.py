"""Where the table of an example lies: separator, header, rows, and the lines that are none.

Made out by counting fields: rows of a table have as many as their header, and hold numbers, which the header does not.
"""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from parsers.drafting.blocks import find_blocks
from parsers.drafting.errors import DraftRefused
from parsers.drafting.numerals import numberish
from parsers.drafting.vocabulary import begins_with_statistic, is_mean, is_statistic, is_unit
from parsers.spelling import fold, shown
from parsers.splitting import MOST_LINES_IN_CELL

if TYPE_CHECKING:
    from parsers.drafting.blocks import Blocks
    from parsers.drafting.example import Example

#: Separators by what a layout calls them, the surer ones first: a decimal comma makes commas look regular.
SEPARATORS = {"tab": "\t", ";": ";", "|": "|", ",": ",", "blanks": " "}
#: A line that begins another section.
_SECTION = re.compile(r"\s*\[[^\[\]]+\][;,\t\s]*")
#: Fewest rows from which a shape is made out.
FEWEST_ROWS = 2


@dataclass(slots=True)
class Structure:
    """The table of an example.

    Attributes
    ----------
    example
        Where it comes from.
    separator
        As a layout writes it.
    header_at
        Index of the (first) header line.
    headers
        Its names, blanks folded; those of several header lines joined as the layout joins them.
    rows
        Index of each row and its trimmed cells.
    units
        The units under the headers, and the index of their line; empty and None where there is no such line.
    statistics
        Lines that hold a statistic of rows above, by index, with the column that says which.
    stray
        Other lines among the rows that are none, by index.
    tail
        Index of the first line behind the table that is not blank, or None.
    header_lines, repeat_right
        How many lines the header has, and which of them (from 1) name several columns to their right.
    blocks
        The lines that begin another block of rows, where there are any.
    names
        The label of each row, where no column holds it.
    any_order
        Whether the headers of blocks have their columns in different orders.
    table, widths
        As a layout writes them, where the table is no plain one or has no separator.
    headless
        Whether there is no header.
    file_name, file_words
        A pattern of the file's name where it says what the lines do not, and what this one says.
    fill_down
        Columns in which only the first of several rows of a vial is filled.
    """

    example: Example
    separator: str
    header_at: int
    headers: list[str]
    rows: list[tuple[int, list[str]]]
    units: list[str] = field(default_factory=list)
    units_at: int | None = None
    statistics: dict[int, int] = field(default_factory=dict)
    stray: list[int] = field(default_factory=list)
    tail: int | None = None
    header_lines: int = 1
    repeat_right: list[int] = field(default_factory=list)
    blocks: Blocks | None = None
    names: list[str] = field(default_factory=list)
    any_order: bool = False
    table: str = ""
    widths: list[int] = field(default_factory=list)
    headless: bool = False
    file_name: str = ""
    file_words: dict[str, str] = field(default_factory=dict)
    fill_down: list[int] = field(default_factory=list)

    def column(self, at: int) -> list[str]:
        """Return the cells of a column, filled down where it is one that is."""
        cells = [cells[at] for _, cells in self.rows]
        if at in self.fill_down:
            for row in range(1, len(cells)):
                cells[row] = cells[row] or cells[row - 1]
        return cells

    @property
    def character(self) -> str:
        """The separator itself."""
        return SEPARATORS.get(self.separator, self.separator)


def find_structure(example: Example) -> Structure:
    """Find the table.

    Raises
    ------
    DraftRefused
        If there is none that has one header line and rows of its length.
    """
    found = [trial for word in SEPARATORS if (trial := _Trial.of(example, word)) is not None]
    if not found:
        sentence = "expected a table with a separator, a header and rows of numbers, found none."
        raise DraftRefused(example.name, sentence)
    found = [trial for trial in found if trial.word != "blanks"] or found  # every text has blanks
    most = max(len(trial.body) for trial in found)
    return next(trial for trial in found if len(trial.body) >= 0.9 * most).structure()


def split(line: str, separator: str) -> list[str]:
    """Split one line into trimmed cells."""
    if separator == " ":
        return line.split()
    if '"' in line:
        return [cell.strip() for cell in next(csv.reader([line], delimiter=separator), [])]
    return [cell.strip() for cell in line.split(separator)]


def _valued(cell: str) -> bool:
    """Tell whether a cell is a number, perhaps with a sign for its limit or a flag."""
    return numberish(cell.strip("<>~*!† []"))


def _records(lines: list[str], separator: str) -> dict[int, list[str]]:
    """Split lines; a cell in quotes may go on over several of them, which are one record then."""
    records: dict[int, list[str]] = {}
    at = 0
    while at < len(lines):
        behind = at + 1
        if separator != " " and lines[at].count('"') % 2:
            closed = (
                end for end in range(behind, min(at + MOST_LINES_IN_CELL, len(lines))) if lines[end].count('"') % 2
            )
            behind = next(closed, at) + 1
        if any(line.strip() for line in lines[at:behind]):
            feed = (f"{line}\n" for line in lines[at:behind])
            whole = behind > at + 1
            records[at] = (
                [cell.strip() for cell in next(csv.reader(feed, delimiter=separator))]
                if whole
                else split(lines[at], separator)
            )
        at = behind
    return records


@dataclass(slots=True)
class _Trial:
    """An example split by one separator."""

    example: Example
    word: str
    records: dict[int, list[str]]
    width: int
    body: list[int]

    @classmethod
    def of(cls, example: Example, word: str) -> _Trial | None:
        """Split the lines; None where no two lines look like rows of one table."""
        separator = SEPARATORS[word]
        records = _records(example.lines, separator)
        numeric: dict[int, list[int]] = {}
        for at, cells in records.items():
            if len(cells) > 1 and any(map(_valued, cells[1:])):
                numeric.setdefault(len(cells), []).append(at)
        if not numeric:
            return None
        width = max(numeric, key=lambda count: (len(numeric[count]), count))
        if len(numeric[width]) < FEWEST_ROWS:
            return None
        return cls(example, word, records, width, numeric[width])

    def structure(self) -> Structure:
        """Tell header, rows and the rest apart."""
        header = self._header()
        header_at = header[-1]
        inside = self._inside(header_at)
        units_at = next((at for at in inside[:1] if self._holds_units(at)), None)
        again = [at for at in inside if self.example.lines[at] == self.example.lines[header_at]]
        ordered = sorted(self.records[header_at])
        reordered = [at for at in inside if at not in again and sorted(self.records[at]) == ordered]
        candidates = [at for at in inside if at != units_at and at not in again and at not in reordered]
        statistics = self._statistics(candidates)
        rows = [at for at in candidates if at not in statistics]
        if not rows:
            raise DraftRefused(self.example.name, "expected rows of readings, found statistics only.", header_at + 1)
        heads = sorted([header_at, *again, *reordered])
        blocks = find_blocks(self.example.lines, heads) if len(header) == 1 else None
        if reordered and blocks is None:
            self._refuse_other_order(min(reordered))
        rows_at = self._in_order(rows, header_at, reordered)
        last = len(self.example.lines) if blocks else max([*rows, *statistics])
        known = {*rows, *heads, *statistics, units_at}
        if blocks is not None:  # what stands between a block's beginning and its header is told by the block
            known |= {at for start, head in zip(sorted(blocks.starts), heads, strict=True) for at in range(start, head)}
        return Structure(
            example=self.example,
            separator=self.word,
            header_at=header[0],
            headers=self._names(header),
            rows=rows_at,
            units=self.records[units_at] if units_at is not None else [],
            units_at=units_at,
            statistics=statistics,
            stray=[at for at in self.records if header_at < at < last and at not in known],
            tail=next((at for at in self.records if at > last), None),
            header_lines=len(header),
            blocks=blocks,
            names=[blocks.starts[blocks.start_of(at)] for at in rows] if blocks and blocks.named else [],
            any_order=bool(reordered),
            repeat_right=[number for number, at in enumerate(header[:-1], 1) if self._is_group(at, header[-1])],
        )

    def _in_order(self, rows: list[int], header_at: int, reordered: list[int]) -> list[tuple[int, list[str]]]:
        """Return the rows with their cells in the order of the first header."""
        names = self.records[header_at]
        heads = sorted([header_at, *reordered, *(at for at in self.records if self.records[at] == names)])
        found = []
        for at in rows:
            head = self.records[max(head for head in heads if head < at)]
            cells = self.records[at]
            found.append((at, cells if head == names else [cells[head.index(name)] for name in names]))
        return found

    def _statistics(self, rows: list[int]) -> dict[int, int]:
        """Return the rows that hold a statistic of others, each with the column that says so."""
        found: dict[int, int] = {}
        for column in range(self.width):
            said = {at: self.records[at][column] for at in rows if is_statistic(self.records[at][column])}
            if len(said) == len(rows):  # a column of statistics alone: the means are the readings
                said = {at: word for at, word in said.items() if not is_mean(word)}
            if len(said) < len(rows):
                found |= {at: column for at in said if at not in found}
        return found

    def _header(self) -> list[int]:
        """Return the header lines: the last line of names before the first row, and those above that complete it."""
        first = self.body[0]
        above = [at for at in self.records if at < first and len(self.records[at]) == self.width]
        if above and self._holds_units(above[-1]):
            above.pop()
        while above and self._recurs(above[-1]):  # a row without any number
            above.pop()
        if above and not self._holds_numbers(above[-1]):
            header = [above.pop()]
            while above and above[-1] == header[0] - 1 and self._is_incomplete(header) and self._may_head(above[-1]):
                header.insert(0, above.pop())
            return header
        near = [at for at in self.records if at < first][-1:]
        got = f"{len(self.records[near[0]])} in {shown(self.example.lines[near[0]])}" if near else "none"
        sentence = (
            f"expected a header of {self.width} names above the rows, which have {self.width} fields "
            f"(separator {self.word}), got {got}. If decimal commas part the numbers as well, export with another "
            f"separator."
        )
        raise DraftRefused(self.example.name, sentence, first + 1)

    def _recurs(self, at: int) -> bool:
        """Tell whether a line is a row rather than names: one of its cells stands in the rows as well."""
        return any(
            cell and any(self.records[row][column] == cell for row in self.body)
            for column, cell in enumerate(self.records[at])
        )

    def _is_incomplete(self, header: list[int]) -> bool:
        """Tell whether header lines leave columns without a name, or several with the same."""
        names = self._names(header)
        return "" in names or len(set(names)) < len(names)

    def _may_head(self, at: int) -> bool:
        """Tell whether a line can be one of names: several of them, and no numbers."""
        filled = [cell for cell in self.records[at] if cell]
        return len(filled) > 1 and not any(map(numberish, filled))

    def _names(self, header: list[int]) -> list[str]:
        """Return the names of the columns, of several header lines joined."""
        rows = [[fold(cell) for cell in self.records[at]] for at in header]
        for row, at in zip(rows[:-1], header[:-1], strict=True):
            if self._is_group(at, header[-1]):
                for place in range(1, len(row)):
                    row[place] = row[place] or row[place - 1]
        return [" | ".join(part for part in column if part) for column in zip(*rows, strict=True)]

    def _is_group(self, at: int, below: int) -> bool:
        """Tell whether the names of a header line hold for several columns to their right."""
        upper, lower = self.records[at], self.records[below]
        bare = [lower[place] for place in range(1, self.width) if not upper[place] and any(upper[:place])]
        return bool(bare) and all(bare) and len(set(lower)) < len(lower)

    def _inside(self, header_at: int) -> list[int]:
        """Return the lines of as many fields as the header, up to the last one that holds numbers of a reading."""
        inside = []
        for at, cells in self.records.items():
            if at > header_at and _SECTION.fullmatch(self.example.lines[at]):
                break
            if at > header_at and len(cells) == self.width:
                inside.append(at)
        rows = set(self.body)
        while inside and (inside[-1] not in rows or any(map(begins_with_statistic, self.records[inside[-1]][:2]))):
            inside.pop()
        return inside

    def _refuse_other_order(self, at: int) -> None:
        """Refuse a second table whose columns stand in another order: its cells would be read as others."""
        sentence = (
            "another header stands here, with its columns in another order, and no line before each header says where "
            "a part begins. Write the layout by hand, with blocks, or export each part by itself."
        )
        raise DraftRefused(self.example.name, sentence, at + 1)

    def _holds_numbers(self, at: int) -> bool:
        cells = [cell for cell in self.records[at] if cell]
        return bool(cells) and sum(map(numberish, cells)) > len(cells) / 2

    def _holds_units(self, at: int) -> bool:
        cells = [cell for cell in self.records[at] if cell]
        return len(self.records[at]) == self.width and bool(cells) and all(map(is_unit, cells))
