"""The contract between reading and calculating: what an export says, as equal-length columns.

A long export has 10⁵ rows, so a reading is not an object: `Readings` is one frozen record of columns, validated
once when it is made. Numbers come with the unit text the export or layout gave; converting is the rules' work.
Nothing here reads, converts or judges.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Codes = NDArray[np.int32]
    Lines = NDArray[np.int64]


class Role(IntEnum):
    """What a solution is for; the number is its code in `Readings.role`."""

    UNSPIKED = 0
    SPIKED = 1
    STANDARD = 2
    BLANK = 3
    CHECK_STANDARD = 4
    SPIKED_BLANK = 5

    @property
    def word(self) -> str:
        """The word that layouts and results use: ``check_standard``."""
        return self.name.lower()


#: Every word that a layout may give as a role.
ROLE_WORDS = {role.word: role for role in Role}


class ContractBroken(Exception):
    """The columns of a `Readings` do not fit together: a defect of the program, never of an export."""


@dataclass(frozen=True, slots=True)
class Texts:
    """A column of texts, each distinct text once.

    Attributes
    ----------
    codes
        int32[n], an index into `names` for each row; -1 where the row has none.
    names
        The distinct texts.
    """

    codes: Codes
    names: tuple[str, ...]

    @classmethod
    def of(cls, values: Iterable[str | None]) -> Texts:
        """Make a column from one text (or None) a row.

        >>> Texts.of(["a", None, "a", "b"]).codes.tolist()
        [0, -1, 0, 1]
        """
        seen: dict[str, int] = {}
        codes = [-1 if value is None else seen.setdefault(value, len(seen)) for value in values]
        return cls(np.asarray(codes, dtype=np.int32), tuple(seen))

    @classmethod
    def absent(cls, rows: int) -> Texts:
        """Make a column in which no row has a text."""
        return cls(np.full(rows, -1, dtype=np.int32), ())

    @classmethod
    def constant(cls, value: str, rows: int) -> Texts:
        """Make a column in which every row has the same text."""
        return cls(np.zeros(rows, dtype=np.int32), (value,))

    def __getitem__(self, row: int) -> str | None:
        """Return the text of a row, None where it has none."""
        code = int(self.codes[row])
        return None if code < 0 else self.names[code]

    def take(self, rows: NDArray[Any]) -> Texts:
        """Return the column for a selection of rows."""
        return Texts(self.codes[rows], self.names)


@dataclass(frozen=True, slots=True)
class Quantities:
    """A column of numbers with their unit texts.

    Attributes
    ----------
    values
        float64[n]; NaN where the row has none.
    units
        The unit text of each row, as written; absent (code -1) where nothing states a unit.
    """

    values: Floats
    units: Texts

    @classmethod
    def absent(cls, rows: int) -> Quantities:
        """Make a column in which no row has a number."""
        return cls(np.full(rows, np.nan), Texts.absent(rows))

    def take(self, rows: NDArray[Any]) -> Quantities:
        """Return the column for a selection of rows."""
        return Quantities(self.values[rows], self.units.take(rows))


@dataclass(frozen=True, slots=True)
class Fault:
    """A cell that cannot be used: it fails its own series and nothing else.

    Attributes
    ----------
    row
        Index of the row in the `Readings`.
    line
        Line of the export, from 1.
    column
        The header as written in the export (or a description, such as ``label``).
    cell
        The raw text of the cell.
    field
        The field of the layout that the cell was meant for, such as ``signal``.
    sentence
        What was expected, what was found and what to do, as one or two sentences without the place.
    """

    row: int
    line: int
    column: str
    cell: str
    field: str
    sentence: str

    def __str__(self) -> str:
        """Say where and what."""
        return f"line {self.line}, column {self.column!r}: {self.sentence}"


@dataclass(frozen=True, slots=True)
class SetAside:
    """A line of the export that gives no reading, with the reason."""

    line: int
    reason: str
    text: str


@dataclass(frozen=True, slots=True)
class Problem:
    """Something in the export that a person must see, which belongs to no series: a row without sample ID."""

    line: int
    column: str
    sentence: str

    def __str__(self) -> str:
        """Say where and what."""
        return f"line {self.line}, column {self.column!r}: {self.sentence}"


@dataclass(frozen=True, slots=True)
class LabelUse:
    """How one distinct label was understood: for `explain` and for the record."""

    label: str
    rule: str
    role: str
    sample: str
    level: str
    rows: int


@dataclass(frozen=True, slots=True)
class ColumnUse:
    """What became of one column of the table: the fields it feeds, or ignored (no fields)."""

    header: str
    fields: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Readings:
    """Everything that one export says, one row for each solution (or replicate), analyte and channel.

    Rows stand in the order of the file. Of several rows of one line (wide tables) `line` is the same.

    Attributes
    ----------
    line
        int64[n], line of the export from 1 on which the row begins.
    label, sample, analyte, channel, level, stock, batch, analyst, instrument, duplicate_of, comment
        Texts. `label` is as written, trimmed. `sample` groups spiked with unspiked. `analyte` is always there.
        `duplicate_of` names what the row is a duplicate of, `origin` the other export that a row was lent by: rows
        of the export itself have none.
    role
        int8[n], codes of `Role`.
    signals
        float64[n, k]: the replicate readings, NaN where the row has fewer. Where only a mean is known, k = 1.
    signal_sd, signal_rsd
        float64[n]: standard deviation in units of the signal, relative one in percent; NaN where absent.
    readings
        float64[n]: number of readings behind a mean; NaN where not said.
    replicate
        float64[n]: replicate number of a replicate row; NaN where a row is a whole solution.
    position
        float64[n]: place in the run as the instrument counts; NaN where absent.
    measured_at
        float64[n]: seconds since 1970-01-01 of the local time that the export wrote; NaN where absent.
    added, nominal
        Concentrations added to a spiked solution, and of a standard or check standard.
    concentration, reported_result, reference_signal
        What the instrument reports beside the signal: the concentration in the solution, the result of the sample,
        and the signal of an internal standard.
    spike_volume, aliquot, made_up_to, digest_volume
        Volumes; `digest_volume` is what a solid's digest was made up to.
    mass
        Mass of the portion of a solid that was digested.
    predilution
        float64[n]: factor from aliquot to sample, ≥ 1 as a rule; NaN where the row has none.
    faults, set_aside, problems
        Cells that cannot be used; lines without reading; rows that belong to no sample.
    labels, columns
        How every distinct label and every column was understood.
    heading
        Values found outside the table, name to text.
    lines
        Number of lines in the export.
    """

    line: Lines
    label: Texts
    sample: Texts
    role: NDArray[np.int8]
    analyte: Texts
    channel: Texts
    level: Texts
    stock: Texts
    batch: Texts
    analyst: Texts
    instrument: Texts
    duplicate_of: Texts
    comment: Texts
    origin: Texts
    signals: Floats
    signal_sd: Floats
    signal_rsd: Floats
    readings: Floats
    replicate: Floats
    position: Floats
    measured_at: Floats
    predilution: Floats
    added: Quantities
    nominal: Quantities
    spike_volume: Quantities
    aliquot: Quantities
    made_up_to: Quantities
    mass: Quantities
    digest_volume: Quantities
    concentration: Quantities
    reported_result: Quantities
    reference_signal: Quantities
    faults: tuple[Fault, ...]
    set_aside: tuple[SetAside, ...]
    problems: tuple[Problem, ...]
    labels: tuple[LabelUse, ...]
    columns: tuple[ColumnUse, ...]
    heading: dict[str, str]
    lines: int

    def __post_init__(self) -> None:
        """Check once that the columns fit together.

        Raises
        ------
        ContractBroken
            If a column has another length, a role is unknown, a row has no analyte or sample, or a fault points
            outside.
        """
        n = len(self.line)
        for name, length in self._lengths():
            if length != n:
                raise ContractBroken(f"readings: column {name} has {length} rows, line has {n}")
        if self.signals.ndim != 2:
            raise ContractBroken("readings: signals must be two-dimensional")
        if n and not 0 <= int(self.role.min()) <= int(self.role.max()) < len(Role):
            raise ContractBroken("readings: unknown role code")
        for name in ("analyte", "sample", "label"):
            if n and int(getattr(self, name).codes.min()) < 0:
                raise ContractBroken(f"readings: a row without {name}")
        if any(not 0 <= fault.row < n for fault in self.faults):
            raise ContractBroken("readings: a fault points at no row")

    def _lengths(self) -> Iterable[tuple[str, int]]:
        for name in self.__slots__:
            column = getattr(self, name)
            if isinstance(column, Texts):
                yield name, len(column.codes)
            elif isinstance(column, Quantities):
                yield name, len(column.values)
                yield name, len(column.units.codes)
            elif isinstance(column, np.ndarray):
                yield name, len(column)

    def __len__(self) -> int:
        """Return the number of rows."""
        return len(self.line)


def line_ranges(lines: Sequence[int]) -> str:
    """Write line numbers as people do.

    >>> line_ranges([12, 13, 14, 20, 14])
    '12-14, 20'
    """
    ordered = sorted(set(lines))
    parts: list[str] = []
    start = previous = None
    for line in [*ordered, None]:
        if previous is not None and line != previous + 1:
            parts.append(str(previous) if start == previous else f"{start}-{previous}")
            start = line
        elif previous is None:
            start = line
        previous = line
    return ", ".join(parts)
