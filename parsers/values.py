"""The values of one field over the rows of a table, from whichever source the layout names.

Cells that give no value are collected with their place; `parsers.judgement` judges them when the roles are known.
Nothing here decides what a row is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from parsers import fields
from parsers.cells import Cell, Grammar, Kind, Numbers, converted
from parsers.readings import Quantities, Texts
from parsers.spelling import fold, folded, looked_up, renamed, shown

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from parsers.columns import Mapped, Plan
    from parsers.heading import Heading
    from parsers.labels import Understanding
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.source import Source
    from parsers.table import Frame, Table

#: From so many distinct times on they are read all at once.
MANY_TIMES = 500
#: … if they lie in here.
PLAUSIBLE = (pd.Timestamp(1900, 1, 1), pd.Timestamp(2200, 1, 1))
#: How constants of a layout are written, whatever marks its exports use.
_LAYOUT_GRAMMAR = Grammar()


@dataclass(frozen=True, slots=True)
class Odd:
    """Cells of one column that gave no value.

    Attributes
    ----------
    field, header
        What the column was for, and its name.
    entry
        Index of the entry of a wide table, or None where the row is meant.
    cells
        The cells by row.
    optional
        Whether a cell may be empty.
    in_table
        Whether the value comes from a column of its own, and not from the label.
    """

    field: str
    header: str
    entry: int | None
    cells: dict[int, Cell]
    optional: bool
    in_table: bool


@dataclass(slots=True)
class Values:
    """Everything that the rows say, field by field."""

    frame: Frame
    layout: Layout
    plan: Plan
    table: Table
    heading: dict[str, Heading]
    label: Texts
    understood: Understanding
    odd: list[Odd] = field(default_factory=list)

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(self.table.line)

    def label_header(self) -> str:
        """Return the header of the column that names the vials."""
        mapped = self.plan.mapped.get("label") or self.plan.mapped.get("sample")
        return self.table.headers[mapped.columns[0]] if mapped else "label"

    def header_of(self, name: str) -> str:
        """Return the header of a field's column, or of the label's where it has none."""
        mapped = self.plan.mapped.get(name)
        return self.table.headers[mapped.columns[0]] if mapped else self.label_header()

    def doubt(self, name: str, header: str, cells: dict[int, Cell]) -> None:
        """Note rows in which a field cannot be made out."""
        self.odd.append(Odd(name, header, None, cells, optional=False, in_table=True))

    def texts(self, name: str) -> Texts:
        """Return a text field: blanks folded, words mapped, absent where the row says nothing."""
        source: Source | None = getattr(self.layout.columns, name)
        mapped = self.plan.mapped.get(name)
        if mapped is not None:
            words = {fold(code): word for code, word in mapped.source.map.items()}
            raw = self.table.texts(mapped.columns[0])
            names = folded(raw.names)
            return renamed(raw, [words.get(name, name) or None for name in names] if words else names)
        if source is not None and source.constant is not None:
            return Texts.constant(source.constant, self.rows)
        if name in self.heading:
            return Texts.constant(self.heading[name].value, self.rows)
        return self._captured(name)

    def numbers(self, name: str, *, entry: int | None = None, column: int | None = None) -> Floats:
        """Return a number field, or one column of it: NaN where the row has none."""
        mapped = self.plan.mapped.get(name)
        if column is None and mapped is not None:
            column = mapped.columns[0]
        if column is not None:
            numbers = self.table.numbers(column, self.layout.grammar)
            self._keep(name, column, numbers, mapped, entry)
            return numbers.values
        return self._elsewhere(name, lambda text, grammar: (grammar.cell(text), ""), units=False).values

    def quantities(self, name: str) -> Quantities:
        """Return a quantity with its unit."""
        mapped = self.plan.mapped.get(name)
        if mapped is None:
            return self._elsewhere(name, lambda text, grammar: _quantity(text, grammar, name), units=True)
        unit = mapped.source.unit
        return Quantities(self.numbers(name), Texts.constant(unit, self.rows) if unit else Texts.absent(self.rows))

    def predilution(self) -> Floats:
        """Return the factor from aliquot to sample."""
        mapped = self.plan.mapped.get("predilution")
        if mapped is None:
            return self._elsewhere(
                "predilution", lambda text, grammar: (_predilution(text, grammar), ""), units=False
            ).values
        texts = self.table.texts(mapped.columns[0])
        numbers = converted(texts, lambda text: _predilution(text, self.layout.grammar))
        self._keep("predilution", mapped.columns[0], numbers, mapped, None)
        return numbers.values

    def times(self) -> Floats:
        """Return the time of measurement in seconds since 1970-01-01 of the local time that was written."""
        mapped = self.plan.mapped.get("measured_at")
        if mapped is None:
            return np.full(self.rows, np.nan)
        texts = self.table.texts(mapped.columns[0])
        for column in mapped.columns[1:]:
            texts = _joined(texts, self.table.texts(column))
        forms, grammar = mapped.source.format, self.layout.grammar
        known = _times_at_once(texts.names, forms)
        numbers = converted(texts, lambda text: _time(text, forms, grammar), known.get, missing=False)
        self._keep("measured_at", mapped.columns[0], numbers, mapped, None)
        return numbers.values

    def _keep(self, name: str, column: int, numbers: Numbers, mapped: Mapped | None, entry: int | None) -> None:
        if numbers.odd:
            optional = mapped is not None and mapped.source.optional
            self.odd.append(Odd(name, self.table.headers[column], entry, numbers.odd, optional, in_table=True))

    def _captured(self, name: str) -> Texts:
        said = self.understood.said.get(name)
        return Texts.absent(self.rows) if said is None else looked_up(said, self.label)

    def _elsewhere(self, name: str, convert: Callable[[str, Grammar], tuple[Cell, str]], *, units: bool) -> Quantities:
        """Return a number from a constant, a heading or the label."""
        source: Source | None = getattr(self.layout.columns, name)
        if source is not None and source.constant is not None:
            cell, _ = convert(f"{source.constant} {source.unit}" if units else source.constant, _LAYOUT_GRAMMAR)
            return self._everywhere(cell.value, source.unit)
        if name in self.heading:
            cell, unit = convert(self.heading[name].value, self.layout.grammar)
            if cell.kind is not Kind.NUMBER:
                raise self.frame.lines.refusal(self.heading[name].at, cell.expected, cell.remedy, f"heading {name}")
            return self._everywhere(cell.value, unit)
        texts = self._captured(name)
        if not texts.names:
            return Quantities.absent(self.rows)
        known = {text: convert(text, self.layout.grammar) for text in texts.names}
        absent = Cell(Kind.MISSING, math.nan, "")
        numbers = converted(texts, lambda text: known[text][0] if text else absent, missing=False)
        self.odd.append(Odd(name, self.label_header(), None, numbers.odd, optional=True, in_table=False))
        return Quantities(numbers.values, renamed(texts, [known[text][1] or None for text in texts.names]))

    def _everywhere(self, value: float, unit: str) -> Quantities:
        units = Texts.constant(unit, self.rows) if unit else Texts.absent(self.rows)
        return Quantities(np.full(self.rows, value), units)


def _joined(left: Texts, right: Texts) -> Texts:
    """Join two columns with a blank, each distinct pair once; a half alone is kept as it is."""
    pairs = left.codes.astype(np.int64) * (len(right.names) + 1) + right.codes
    distinct, codes = np.unique(pairs, return_inverse=True)
    first = np.empty(len(distinct), dtype=np.int64)
    first[codes[::-1]] = np.arange(len(codes) - 1, -1, -1)
    names = [" ".join(part for part in (left[row], right[row]) if part) or None for row in first.tolist()]
    joined = Texts.of(names)
    return Texts(joined.codes[codes], joined.names)


def _quantity(text: str, grammar: Grammar, name: str) -> tuple[Cell, str]:
    """Understand a number with a glued unit; a volume must have one."""
    found = grammar.quantity(text)
    if found is None:
        plain = grammar.cell(text)
        return Cell(Kind.UNREADABLE, math.nan, text, plain.expected, plain.remedy), ""
    value, unit = found
    if name in (*fields.VOLUMES, *fields.MASSES) and not unit:
        expected = f"expected a volume with its unit, got {shown(text)}"
        return Cell(Kind.UNREADABLE, math.nan, text, expected, "Write for instance 5 mL"), ""
    return Cell(Kind.NUMBER, value, text), unit


def _predilution(text: str, grammar: Grammar) -> Cell:
    factor = grammar.predilution(text)
    if factor is not None:
        return Cell(Kind.NUMBER, factor, text)
    plain = grammar.cell(text)
    if plain.kind is Kind.MISSING:
        return plain
    expected = f"expected a predilution such as 10, 1 in 10 or 1+9, got {shown(text)}"
    return Cell(Kind.UNREADABLE, math.nan, text, expected, "Correct the export")


def _times_at_once(names: Sequence[str], forms: Sequence[str]) -> dict[str, float]:
    """Read many times of the one declared form quickly; what is not among the answer is read one by one."""
    # zones, and fractions of a second (of which pandas reads more digits), are read one by one
    if len(forms) != 1 or len(names) < MANY_TIMES or any(code in forms[0].lower() for code in ("%z", "%f")):
        return {}
    found = pd.to_datetime(pd.Series(folded(names), dtype="object"), format=forms[0], errors="coerce", exact=True)
    seconds = (found.to_numpy(dtype="datetime64[us]").astype(np.int64) / 1e6).tolist()
    # pandas knows a year 0, which nobody measured in: what lies far off is read one by one as well
    fine = (found.notna() & found.between(*PLAUSIBLE)).tolist()
    return {name: at for name, at, good in zip(names, seconds, fine, strict=True) if good}


def _time(text: str, forms: Sequence[str], grammar: Grammar) -> Cell:
    folded = fold(text)
    for form in forms:
        try:
            moment = datetime.strptime(folded, form)  # noqa: DTZ007 (exports write local time)
        except ValueError:
            continue
        # The wall clock is counted as if it were UTC, so that no zone of this computer slips in.
        return Cell(Kind.NUMBER, moment.replace(tzinfo=UTC).timestamp(), text)
    if folded in grammar.missing:
        return Cell(Kind.MISSING, math.nan, text)
    written = " or ".join(repr(form) for form in forms)
    expected = f"expected a time in the form {written}, got {shown(text)}"
    return Cell(Kind.UNREADABLE, math.nan, text, expected, "Correct the export, or the format in the layout")
