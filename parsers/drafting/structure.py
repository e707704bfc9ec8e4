"""Where the table of an example lies: separator, header, rows, and the lines that are none.

Made out by counting fields: rows of a table have as many as their header, and hold numbers, which the header does not.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass, field
from itertools import pairwise
from typing import TYPE_CHECKING

from parsers.drafting.errors import DraftRefused
from parsers.drafting.numerals import numberish
from parsers.drafting.vocabulary import begins_with_statistic, is_mean, is_statistic, is_unit
from parsers.spelling import fold, shown

if TYPE_CHECKING:
    from parsers.drafting.example import Example

#: Separators by what a layout calls them, the surer ones first: a decimal comma makes commas look regular.
SEPARATORS = {"tab": "\t", ";": ";", "|": "|", ",": ",", "blanks": " "}
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
        Index of the header line.
    headers
        Its names, blanks folded.
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

    def column(self, at: int) -> list[str]:
        """Return the cells of a column."""
        return [cells[at] for _, cells in self.rows]

    @property
    def character(self) -> str:
        """The separator itself."""
        return SEPARATORS[self.separator]


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
    most = max(len(trial.body) for trial in found)
    return next(trial for trial in found if len(trial.body) >= 0.9 * most).structure()


def split(line: str, separator: str) -> list[str]:
    """Split one line into trimmed cells."""
    if separator == " ":
        return line.split()
    if '"' in line:
        return [cell.strip() for cell in next(csv.reader([line], delimiter=separator), [])]
    return [cell.strip() for cell in line.split(separator)]


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
        records = {at: split(line, separator) for at, line in enumerate(example.lines) if line.strip()}
        numeric: dict[int, list[int]] = {}
        for at, cells in records.items():
            if len(cells) > 1 and any(map(numberish, cells[1:])):
                numeric.setdefault(len(cells), []).append(at)
        if not numeric:
            return None
        width = max(numeric, key=lambda count: (len(numeric[count]), count))
        if len(numeric[width]) < FEWEST_ROWS:
            return None
        return cls(example, word, records, width, numeric[width])

    def structure(self) -> Structure:
        """Tell header, rows and the rest apart."""
        header_at = self._header()
        inside = self._inside(header_at)
        units_at = next((at for at in inside[:1] if self._holds_units(at)), None)
        again = [at for at in inside if self.example.lines[at] == self.example.lines[header_at]]
        candidates = [at for at in inside if at != units_at and at not in again]
        statistics = self._statistics(candidates)
        rows = [at for at in candidates if at not in statistics]
        if not rows:
            raise DraftRefused(self.example.name, "expected rows of readings, found statistics only.", header_at + 1)
        last = max([*rows, *statistics])
        known = {*rows, *again, *statistics, units_at}
        return Structure(
            example=self.example,
            separator=self.word,
            header_at=header_at,
            headers=[fold(name) for name in self.records[header_at]],
            rows=[(at, self.records[at]) for at in rows],
            units=self.records[units_at] if units_at is not None else [],
            units_at=units_at,
            statistics=statistics,
            stray=[at for at in self.records if header_at < at < last and at not in known],
            tail=next((at for at in self.records if at > last), None),
        )

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

    def _header(self) -> int:
        """Return the index of the header, the last line of names before the first row."""
        first = self.body[0]
        above = [at for at in self.records if at < first and len(self.records[at]) == self.width]
        if above and self._holds_units(above[-1]):
            above.pop()
        if above and not self._holds_numbers(above[-1]):
            self._refuse_second_header(above)
            return above[-1]
        near = [at for at in self.records if at < first][-1:]
        got = f"{len(self.records[near[0]])} in {shown(self.example.lines[near[0]])}" if near else "none"
        sentence = (
            f"expected a header of {self.width} names above the rows, which have {self.width} fields "
            f"(separator {self.word}), got {got}. If decimal commas part the numbers as well, export with another "
            f"separator."
        )
        raise DraftRefused(self.example.name, sentence, first + 1)

    def _refuse_second_header(self, above: list[int]) -> None:
        """Refuse where the names of the columns stand on several lines: either alone would merge unlike columns."""
        consecutive = [at for at, below in pairwise(above) if below == at + 1 and not self._holds_numbers(at)]
        named = [name for name in self.records[above[-1]] if name]
        if consecutive and consecutive[-1] == above[-1] - 1 and len(set(named)) < len(named):
            sentence = (
                "the names of the columns stand on several lines, and the last of them alone does not tell them apart. "
                "Write the layout by hand, or export with one header line."
            )
            raise DraftRefused(self.example.name, sentence, consecutive[-1] + 1)

    def _inside(self, header_at: int) -> list[int]:
        """Return the lines of as many fields as the header, up to the last one that holds numbers of a reading."""
        inside = [at for at, cells in self.records.items() if at > header_at and len(cells) == self.width]
        rows = set(self.body)
        while inside and (inside[-1] not in rows or any(map(begins_with_statistic, self.records[inside[-1]][:2]))):
            inside.pop()
        return inside

    def _holds_numbers(self, at: int) -> bool:
        cells = [cell for cell in self.records[at] if cell]
        return bool(cells) and sum(map(numberish, cells)) > len(cells) / 2

    def _holds_units(self, at: int) -> bool:
        cells = [cell for cell in self.records[at] if cell]
        return len(self.records[at]) == self.width and bool(cells) and all(map(is_unit, cells))
