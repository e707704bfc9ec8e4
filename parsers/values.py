"""The values of one field over the rows of a table, from whichever source the layout names.

Cells that give no value are collected with their place; `parsers.judgement` judges them when the roles are known.
Nothing here decides what a row is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from functools import partial
from typing import TYPE_CHECKING

import numpy as np

from parsers import fields
from parsers.cells import Cell, Grammar, Kind, Numbers, converted
from parsers.conversion import in_unit, predilution, quantity, rescaled
from parsers.readings import Problem, Quantities, Texts
from parsers.sidetable import PARTED
from parsers.source import IN_CELL, MAYBE, UNSAID
from parsers.spelling import folded, looked_up, renamed, shown
from parsers.times import read_time, times_at_once
from parsers.told import PAIR, Told, cut, filled, joined, paired

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from parsers.columns import Mapped, Plan
    from parsers.heading import Heading
    from parsers.labels import Understanding
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.sidetable import SideTable
    from parsers.source import Source
    from parsers.table import Frame, Table

#: How constants of a layout are written, whatever marks its exports use.
_LAYOUT_GRAMMAR = Grammar()
#: Most disagreements between sources that are listed.
MOST_DISAGREEMENTS = 100


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
    column
        Index of the column, or None.
    """

    field: str
    header: str
    entry: int | None
    cells: dict[int, Cell]
    optional: bool
    in_table: bool
    column: int | None = None


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
    disagreements: dict[tuple[str, str, str], Problem] = field(default_factory=dict)
    _known: dict[str, Floats] = field(default_factory=dict)
    _looking: list[str] = field(default_factory=list)
    _sides: tuple[SideTable, ...] | None = None

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

    def has_source(self, name: str) -> bool:
        """Tell whether anything may say a field."""
        return bool(
            getattr(self.layout.columns, name)
            or name in self.heading
            or name in self.plan.captured
            or name in self.understood.said
            or any(name in side.lookup.fields for side in self.sides())
        )

    def doubt(self, name: str, header: str, cells: dict[int, Cell]) -> None:
        """Note rows in which a field cannot be made out."""
        self.odd.append(Odd(name, header, None, cells, optional=False, in_table=True))

    def texts(self, name: str) -> Texts:
        """Return a text field: blanks folded, words mapped, absent where the row says nothing."""
        found: Texts | None = None
        header = ""
        for told in self.told(name):
            names = folded(told.texts.names)
            texts = renamed(told.texts, names)
            if found is not None:
                self._compare(name, (header, found), (told.header, texts))
            found, header = (texts, told.header) if found is None else (filled(found, texts), header)
        return Texts.absent(self.rows) if found is None else found

    def numbers(self, name: str, *, entry: int | None = None, column: int | None = None) -> Floats:
        """Return a number field, or one column of it: NaN where the row has none."""
        if column is None and name in self._known:
            return self._known[name]
        at = self._plain_column(name) if column is None else column
        if at is not None:
            numbers = self.table.numbers(at, self.layout.grammar)
            self._keep(name, at, numbers, self.plan.mapped.get(name), entry)
            values = numbers.values
        else:
            values = self._chain(name, lambda text, grammar: (grammar.cell(text), "")).values
        if column is None:
            self._known[name] = values
        return values

    def quantities(self, name: str) -> Quantities:
        """Return a quantity with its unit."""
        at = self._plain_column(name)
        mapped = self.plan.mapped.get(name)
        if at is None or mapped is None or mapped.source.unit == IN_CELL:
            return self._chain(name, quantity)
        return self.quantity_column(name, at, mapped.source, self._units(mapped), None)

    def quantity_column(
        self, name: str, column: int, source: Source | None, units: Texts, entry: int | None
    ) -> Quantities:
        """Return a column of a quantity; a unit may be glued to a number where it is the one that is stated."""
        numbers = self.table.numbers(column, self.layout.grammar)
        values, odd = numbers.values, {}
        glued: dict[int, str] = {}
        for row, cell in numbers.odd.items():
            found, unit = quantity(cell.text, self.layout.grammar) if cell.kind is Kind.UNREADABLE else (cell, "")
            found = in_unit(found, unit, units[row])
            if found.kind is Kind.NUMBER:
                values[row] = found.value
                glued[row] = unit
            else:
                odd[row] = found
        if odd:
            optional = source is not None and source.optional
            self.odd.append(Odd(name, self.table.headers[column], entry, odd, optional, in_table=True, column=column))
        if glued:
            units = Texts.of([glued.get(row, units[row]) or None for row in range(self.rows)])
        return Quantities(values, units)

    def predilution(self) -> Floats:
        """Return the factor from aliquot to sample."""
        return self._chain("predilution", lambda text, grammar: (predilution(text, grammar), "")).values

    def times(self) -> Floats:
        """Return the time of measurement in seconds since 1970-01-01 of the local time that was written."""
        found = self._told_in_layout("measured_at")
        values = np.full(self.rows, np.nan)
        doubts: dict[int, tuple[Told, Cell]] = {}
        for told in found:
            forms, grammar = told.source.format, self.layout.grammar
            known = times_at_once(told.texts.names, forms)
            convert = partial(read_time, forms=forms, grammar=grammar)
            numbers = converted(told.texts, convert, known.get, missing=False)
            self._doubt_unless_known(doubts, told, numbers.odd, values)
            values = np.where(np.isnan(values), numbers.values, values)
        self._note_doubts("measured_at", doubts, values)
        return values

    def told(self, name: str) -> list[Told]:
        """Return everything that may say a field, in the order of precedence."""
        found = self._told_in_layout(name)
        source: Source | None = getattr(self.layout.columns, name)
        if source is None and (name in self.heading or name in self.plan.captured):
            found.append(self._told_heading(name, UNSAID, name))
        explicit = {one.group for one in source.sources} if source is not None else set()
        said = self.understood.said.get(name)
        if said is not None and name not in explicit:
            found.append(Told(looked_up(said, self.label), self.label_header(), UNSAID, in_table=False))
        return found + self._told_beside(name)

    def _told_in_layout(self, name: str) -> list[Told]:
        source: Source | None = getattr(self.layout.columns, name)
        found = []
        for number, one in enumerate(source.sources if source is not None else ()):
            mapped = self.plan.choices.get(name, {}).get(number)
            if one.constant is not None:
                texts = Texts.constant(one.constant, self.rows)
                unit = Texts.constant(one.stated_unit, self.rows) if one.stated_unit else None
                found.append(Told(texts, "constant", one, in_table=True, unit=unit, grammar=_LAYOUT_GRAMMAR))
            elif one.group:
                said = self.understood.said.get(one.group)
                texts = Texts.absent(self.rows) if said is None else looked_up(said, self.label)
                unit = Texts.constant(one.stated_unit, self.rows) if one.stated_unit else None
                found.append(Told(cut(texts, one, name), self.label_header(), one, in_table=False, unit=unit))
            elif mapped is None and one.heading:
                found.append(self._told_heading(one.heading, one, name))
            elif mapped is not None:
                found.append(self._told_column(name, one, mapped))
        return found

    def _told_column(self, name: str, source: Source, mapped: Mapped) -> Told:
        header = self.table.headers[mapped.columns[0]]
        texts = self.table.texts(mapped.columns[0])
        more = {"in_table": True, "unit": self._units(mapped), "column": mapped.columns[0]}
        if source.as_ == "ratio" and len(mapped.columns) == 2:
            ratio = self._ratio(texts, self.table.texts(mapped.columns[1]))
            return Told(ratio, header, source, grammar=_LAYOUT_GRAMMAR, **more)  # type: ignore[arg-type]
        for column in mapped.columns[1:]:
            texts = joined(texts, self.table.texts(column))
        if source.heading:
            texts = joined(self._heading_texts(source.heading), texts)
        said = cut(texts, source, name)
        if name == "signal" and self.layout.columns.signal is source:
            said = filled(said, texts)  # what the pattern does not find is shown as it stands, and is no empty cell
        return Told(said, header, source, **more)  # type: ignore[arg-type]

    def _told_heading(self, heading: str, source: Source, name: str) -> Told:
        column = self.plan.captured.get(heading)
        header = f"heading {heading}"
        at = self.heading[heading].at if heading in self.heading else None
        unit = Texts.constant(source.stated_unit, self.rows) if source.stated_unit else None
        texts = cut(self._heading_texts(heading), source, name)
        return Told(texts, header, source, in_table=column is not None, unit=unit, heading_at=at)

    def _heading_texts(self, heading: str) -> Texts:
        if heading in self.plan.captured:
            return self.table.texts(self.plan.captured[heading])
        if heading in self.heading:
            return Texts.constant(self.heading[heading].value, self.rows)
        return Texts.absent(self.rows)

    def _told_beside(self, name: str) -> list[Told]:
        """Return what side tables say."""
        found: list[Told] = []
        for side in self.sides():
            lookup = side.lookup
            if name not in lookup.fields or set(lookup.by) & set(self._looking):
                continue
            if self.plan.entries and "analyte" in lookup.by and not self.has_source("analyte"):
                continue  # each reading of the row has an analyte of its own: see `quantity_beside`
            self._refuse_unread(side)
            self._looking += lookup.by
            keys = self._keys(lookup.by)
            del self._looking[-len(lookup.by) :]
            source = lookup.columns.get(name, UNSAID)
            texts = cut(looked_up(Texts.of(side.texts(name, keys)), keys), source, name)
            unit = Texts.constant(source.stated_unit, self.rows) if source.stated_unit else None
            decimal = lookup.decimal or (self.layout.decimal if lookup.begin is not None else ".")
            grammar = replace(_LAYOUT_GRAMMAR, decimal=decimal)
            header = f"{lookup.place} by {' and '.join(lookup.by)}"
            in_table = not (lookup.optional or source.optional)
            found.append(Told(texts, header, source, in_table=in_table, unit=unit, grammar=grammar))
        return found

    def sides(self) -> tuple[SideTable, ...]:
        """Return the side tables, with those that lie in the export itself."""
        if self._sides is None:
            lines, separator = self.frame.lines, self.layout.separator
            self._sides = tuple(side.of_export(lines, separator) for side in self.layout.side_tables)
        return self._sides

    def meant_label(self) -> Texts:
        """Return the labels with those that a side table replaces by what they mean."""
        for side in self.sides():
            if side.lookup.by == ("label",) and "label" in side.lookup.fields:
                self._refuse_unread(side)
                names = [
                    meant or name for meant, name in zip(side.texts("label", self.label), self.label.names, strict=True)
                ]
                return renamed(self.label, names)
        return self.label

    def _refuse_unread(self, side: SideTable) -> None:
        if not side.known:
            sentence = f"expected the side table {side.lookup.file!r} (lookup), which was not read"
            raise self.frame.lines.refusal(None, sentence, "Put it beside the layout")

    def quantity_beside(self, name: str, analyte: str) -> Quantities:
        """Return what side tables say of a quantity of one analyte of a wide table."""
        values, units = np.full(self.rows, np.nan), Texts.absent(self.rows)
        for side in self.sides():
            lookup = side.lookup
            if name not in lookup.fields or "analyte" not in lookup.by:
                continue
            self._refuse_unread(side)
            keys = self._keys(lookup.by, analyte)
            source = lookup.columns.get(name, UNSAID)
            unit = Texts.constant(source.stated_unit, self.rows) if source.stated_unit else None
            texts = cut(looked_up(Texts.of(side.texts(name, keys)), keys), source, name)
            grammar = replace(_LAYOUT_GRAMMAR, decimal=lookup.decimal or ".")
            told = Told(texts, f"{lookup.place}", MAYBE, in_table=False, unit=unit, grammar=grammar)
            numbers, stated = self._converted(name, told, quantity)
            if numbers.odd:
                self.odd.append(Odd(name, told.header, None, numbers.odd, optional=True, in_table=False))
            take = np.isnan(values) & np.isfinite(numbers.values)
            values = np.where(take, numbers.values, values)
            units = filled(units, Texts(np.where(take, stated.codes, -1).astype(np.int32), stated.names))
        return Quantities(values, units)

    def _keys(self, by: Sequence[str], analyte: str | None = None) -> Texts:
        """Return what each row is looked up by; a row that lacks a part of it has no key."""
        parts = [
            Texts.constant(analyte, self.rows) if one == "analyte" and analyte is not None else self._key_of(one)
            for one in by
        ]
        if len(parts) == 1:
            return parts[0]
        rows = [[part[row] for part in parts] for row in range(self.rows)]
        return Texts.of([None if None in row else PARTED.join(filter(None, row)) for row in rows])

    def _key_of(self, by: str) -> Texts:
        if by == "label":
            return self.label
        if by != "position":
            return self.texts(by)
        numbers = self.numbers("position").tolist()
        return Texts.of([None if math.isnan(number) else f"{number:g}" for number in numbers])

    def _plain_column(self, name: str) -> int | None:
        """Return the column of a field that has this source only, and whose cells are the values."""
        source: Source | None = getattr(self.layout.columns, name)
        mapped = self.plan.mapped.get(name)
        if mapped is None or len(mapped.columns) != 1 or not (source is None or source.plain):
            return None
        beside = any(name in side.lookup.fields for side in self.sides())
        return None if beside or name in self.understood.said else mapped.columns[0]

    def _units(self, mapped: Mapped) -> Texts:
        if mapped.unit_column is not None:
            return self.table.texts(mapped.unit_column)
        unit = mapped.unit or mapped.source.stated_unit
        return Texts.constant(unit, self.rows) if unit else Texts.absent(self.rows)

    def _ratio(self, taken: Texts, made_up_to: Texts) -> Texts:
        """Return the ratio of two columns as texts, and the cell itself where one of the two is no volume."""
        grammar = self.layout.grammar
        known: dict[tuple[str | None, str | None], str | None] = {}
        ratios = []
        for row in range(self.rows):
            pair = (taken[row], made_up_to[row])
            if pair not in known:
                one, other = (grammar.cell(text or "") for text in pair)
                good = one.kind is other.kind is Kind.NUMBER and one.value > 0
                both = f"{pair[0] or ''} and {pair[1] or ''}"
                known[pair] = repr(other.value / one.value) if good else None if pair == (None, None) else both
            ratios.append(known[pair])
        return Texts.of(ratios)

    def _keep(self, name: str, column: int, numbers: Numbers, mapped: Mapped | None, entry: int | None) -> None:
        if numbers.odd:
            optional = mapped is not None and mapped.source.optional
            header = self.table.headers[column]
            self.odd.append(Odd(name, header, entry, numbers.odd, optional, in_table=True, column=column))

    def _chain(self, name: str, convert: Callable[[str, Grammar], tuple[Cell, str]]) -> Quantities:
        """Return a number from whichever source says it first."""
        values, units = np.full(self.rows, np.nan), Texts.absent(self.rows)
        doubts: dict[int, tuple[Told, Cell]] = {}
        header = ""
        for told in self.told(name):
            found = self._converted(name, told, convert)
            numbers = Quantities(found[0].values, found[1])
            if header:
                self._compare_numbers(name, (header, Quantities(values, units)), (told.header, numbers))
            self._doubt_unless_known(doubts, told, found[0].odd, values)
            take = np.isnan(values) & np.isfinite(numbers.values)
            if take.any():
                units = filled(units, Texts(np.where(take, numbers.units.codes, -1), numbers.units.names))
                values = np.where(take, numbers.values, values)
            header = header or told.header
        self._note_doubts(name, doubts, values)
        return Quantities(values, units)

    def _converted(
        self, name: str, told: Told, convert: Callable[[str, Grammar], tuple[Cell, str]]
    ) -> tuple[Numbers, Texts]:
        """Convert what one source says; return its numbers and their units."""
        grammar, source = told.grammar or self.layout.grammar, told.source
        volume = name in (*fields.VOLUMES, *fields.MASSES)
        texts = told.texts
        if told.unit is not None and told.unit.names:
            # text and unit decide together whether a unit that is glued to the number is the right one
            texts = paired(texts, told.unit)
        known: dict[str, tuple[Cell, str]] = {}
        for text in texts.names:
            written, _, stated = text.partition(PAIR)
            cell, glued = convert(written, grammar)
            cell = in_unit(cell, glued, stated)
            if volume and cell.kind is Kind.NUMBER and not (glued or stated):
                expected = f"expected a volume with its unit, got {shown(written)}"
                cell = Cell(Kind.UNREADABLE, math.nan, written, expected, "Write for instance 5 mL")
            if cell.kind is Kind.NUMBER:
                cell = rescaled(cell, source)
            elif told.heading_at is not None:
                raise self.frame.lines.refusal(told.heading_at, cell.expected, cell.remedy, told.header)
            known[text] = (cell, glued or stated)
        absent = Cell(Kind.MISSING, math.nan, "", "expected a number, got an empty cell", "Complete the export")
        asked = told.in_table and not source.optional
        numbers = converted(texts, lambda text: known[text][0] if text else absent, missing=asked)
        return numbers, renamed(texts, [known[text][1] or None for text in texts.names])

    @staticmethod
    def _doubt_unless_known(
        doubts: dict[int, tuple[Told, Cell]], told: Told, odd: dict[int, Cell], values: Floats
    ) -> None:
        for row, cell in odd.items():
            if cell.kind is not Kind.UNREADABLE and not math.isnan(values[row]):
                continue
            before = doubts.get(row)
            if before is None or (before[1].kind is Kind.MISSING and cell.kind is not Kind.MISSING):
                doubts[row] = (told, cell)

    def _note_doubts(self, name: str, doubts: dict[int, tuple[Told, Cell]], values: Floats) -> None:
        """Keep what could not be read; what another source says is no longer missing."""
        of_source: dict[int, tuple[Told, dict[int, Cell]]] = {}
        for row, (told, cell) in sorted(doubts.items()):
            if cell.kind is Kind.UNREADABLE or math.isnan(values[row]):
                of_source.setdefault(id(told), (told, {}))[1][row] = cell
        for told, cells in of_source.values():
            optional = told.source.optional or not told.in_table
            self.odd.append(Odd(name, told.header, None, cells, optional, told.in_table, told.column))

    def _compare(self, name: str, one: tuple[str, Texts], other: tuple[str, Texts]) -> None:
        pairs = np.stack([one[1].codes, other[1].codes])
        for row in np.flatnonzero((pairs >= 0).all(axis=0)).tolist():
            first, second = one[1][row] or "", other[1][row] or ""
            if first != second:
                self._disagree(name, row, (one[0], first), (other[0], second))

    def _compare_numbers(self, name: str, one: tuple[str, Quantities], other: tuple[str, Quantities]) -> None:
        first, second = one[1], other[1]
        with np.errstate(invalid="ignore"):
            unlike = np.isfinite(first.values) & np.isfinite(second.values) & (first.values != second.values)
        for row in np.flatnonzero(unlike).tolist():
            said = [f"{x.values[row]:g} {x.units[row] or ''}".strip() for x in (first, second)]
            self._disagree(name, row, (one[0], said[0]), (other[0], said[1]))

    def _disagree(self, name: str, row: int, one: tuple[str, str], other: tuple[str, str]) -> None:
        """Report two sources of a field that say unlike things, each pair of values once."""
        if len(self.disagreements) < MOST_DISAGREEMENTS:
            sentence = (
                f"expected one {name}, got {one[1]!r} from {one[0]!r} and {other[1]!r} from {other[0]!r}. The first is "
                f"used. Correct the one that is wrong."
            )
            line = self.table.line_of(row, None)
            self.disagreements.setdefault((name, one[1], other[1]), Problem(line, one[0], sentence))
