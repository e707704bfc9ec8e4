"""Rows of a table become readings: labels understood, roles settled, odd cells judged, columns put together.

A row that belongs to no sample is set aside and named; a cell that cannot be used is a fault of its row. Nothing here
splits lines or converts cells.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers import fates, fields
from parsers.cells import Cell, Kind
from parsers.judgement import find_faults, label_uses
from parsers.labels import understand
from parsers.readings import Problem, Quantities, Readings, Role, SetAside, Texts, line_ranges
from parsers.roles import find_roles, is_sample
from parsers.spelling import fold, folded, renamed, shown
from parsers.table import RowTable
from parsers.told import filled
from parsers.values import Odd, Values

if TYPE_CHECKING:
    import re

    from numpy.typing import NDArray

    from parsers.columns import Entry, Plan
    from parsers.heading import Heading
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.table import Frame, Table

#: Most labels that one error names.
MOST_NAMED = 100
EMPTY_ROW = "no cell is filled"
#: Words that say whether a row is excluded.
_YES_NO = dict.fromkeys(("yes", "true", "1"), True) | dict.fromkeys(("no", "false", "0"), False)
NO_SAMPLE = "row without sample ID"
NO_ANALYTE = "row without analyte"
UNMATCHED = "label matches no rule"


def assemble(frame: Frame, layout: Layout, plan: Plan, table: Table, heading: dict[str, Heading]) -> Readings:
    """Put the readings of an export together.

    Raises
    ------
    ExportRefused
        If labels match no rule and the layout does not set them aside, or no reading remains.
    """
    nobody = Texts.absent(len(table.line))
    values = Values(frame, layout, plan, table, heading, nobody, understand((), ()))
    values.label = _label(values)
    values.understood = understand(folded(values.label.names), layout.labels)
    return _Assembly(values, keep=np.ones(len(table.line), dtype=bool)).readings()


def _label(values: Values) -> Texts:
    """Return the label of each row as written; the sample ID where nothing is the label or a cell of it is empty."""
    label = _as_written(values, "label")
    if label is not None:
        values.label = label
        label = values.meant_label()
        if values.layout.labels or not values.has_source("sample"):
            return label
    sample = _as_written(values, "sample")
    if label is None:
        return sample if sample is not None else Texts.absent(values.rows)
    return label if sample is None else filled(label, sample)


def _as_written(values: Values, name: str) -> Texts | None:
    """Return a text field with the blanks inside it as they are, where it comes from one column."""
    source = getattr(values.layout.columns, name)
    mapped = values.plan.mapped.get(name)
    if source is not None and source.plain and mapped is not None:
        return values.table.texts(mapped.columns[0])
    if source is None and name not in values.heading and name not in values.plan.captured:
        return None
    return values.texts(name)


@dataclass(slots=True)
class _Assembly:
    values: Values
    keep: NDArray[np.bool_]
    set_aside: list[SetAside] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)

    def readings(self) -> Readings:
        values, table = self.values, self.values.table
        self.excluded()
        self.leave_out(values.label.codes < 0, NO_SAMPLE)
        self.unmatched()
        added, nominal = values.quantities("added"), values.quantities("nominal")
        spike_volume, level = values.quantities("spike_volume"), values.texts("level")
        of_entries = self.nominals()
        role = find_roles(values, added, spike_volume, level, self.any_nominal(nominal, of_entries))
        sample = self.sample(role)
        if values.layout.sample_case == "ignore":
            sample = renamed(sample, [name.upper() for name in sample.names])
        analyte = self.analyte()
        signals = self.signals()
        statistics: dict[str, Any] = {name: self.statistic(name) for name in fields.STATISTICS}
        statistics |= {name: self.quantity(name) for name in fields.OF_READINGS}
        per_row: dict[str, Any] = {
            "line": table.line, "label": values.label, "sample": sample, "role": role, "level": level,
            "added": added, "nominal": nominal, "spike_volume": spike_volume,
            "aliquot": values.quantities("aliquot"), "made_up_to": values.quantities("made_up_to"),
            "mass": values.quantities("mass"), "digest_volume": values.quantities("digest_volume"),
            "replicate": values.numbers("replicate"), "position": values.numbers("position"),
            "measured_at": values.times(), "predilution": values.predilution(),
            **{name: values.texts(name) for name in ("stock", "batch", "analyst", "instrument", "duplicate_of")},
            "origin": Texts.absent(len(table.line)),
        }  # fmt: skip
        present = self.present(role)
        if not present.any():
            raise self.nothing_left()
        row, entry = np.nonzero(present)
        everything = bool(present.all()) and len(values.plan.entries) <= 1
        columns = {name: column if everything else _take(column, row) for name, column in per_row.items()}
        if of_entries is not None:
            del per_row["nominal"], columns["nominal"]
            rows = np.repeat(np.arange(values.rows), len(values.plan.entries))
            statistics["nominal"] = _first(of_entries, nominal.take(rows))
        per_reading = {"analyte": analyte[0], "channel": analyte[1], "comment": self.comment(), **statistics}
        flat = row * present.shape[1] + entry
        columns |= {name: column if everything else _take(column, flat) for name, column in per_reading.items()}
        columns["signals"] = signals if everything else signals[flat]
        if isinstance(table, RowTable) and table.across:
            columns["line"] = np.array(list(map(self.line_of_signal, row.tolist(), entry.tolist())), dtype=np.int64)
            read = set(columns["line"].tolist())
            table.set_aside = [one for one in table.set_aside if one.reason != fates.ACROSS or one.line not in read]
        return Readings(
            **{name: self.in_unit_words(column) for name, column in columns.items()},
            faults=find_faults(values, present, role),
            set_aside=tuple(sorted([*table.set_aside, *self.set_aside], key=lambda aside: aside.line)),
            problems=tuple(sorted([*self.problems, *values.disagreements.values()], key=lambda problem: problem.line)),
            labels=label_uses(values, role, sample),
            columns=values.plan.uses,
            heading={name: found.value for name, found in values.heading.items()},
            lines=len(values.frame.lines),
        )

    def in_unit_words(self, column: Any) -> Any:
        """Return a quantity with the units that its words mean; any other column as it is."""
        words = self.values.layout.unit_words
        if not words or not isinstance(column, Quantities):
            return column
        meant = {fold(word): unit for word, unit in words.items()}
        return replace(
            column, units=renamed(column.units, [meant.get(fold(name), name) for name in column.units.names])
        )

    def comment(self) -> Texts:
        """Return the comment of each reading, with the flags that stood beside its signal, before rows are left out."""
        values, entries, pattern = self.values, self.values.plan.entries, self.values.layout.cells.flags
        of_rows = values.texts("comment")
        comment = Texts(np.repeat(of_rows.codes, max(len(entries), 1)), of_rows.names)
        mapped = values.plan.mapped.get("signal")
        signals = [entry.columns["signal"] for entry in entries] or [mapped.columns if mapped is not None else ()]
        if pattern is None or not pattern.search(values.frame.lines.text):
            return comment
        of_entries = [[_flags(values.table.texts(at), pattern) for at in columns] for columns in signals]
        rows = [
            " ".join(filter(None, [of_rows[row], *(flags[row] for flags in of_entry)])) or None
            for row in range(values.rows)
            for of_entry in of_entries
        ]
        return Texts.of(rows)

    def leave_out(self, rows: NDArray[np.bool_], reason: str) -> None:
        """Set rows aside; one that says something and belongs to no sample or analyte is a problem as well."""
        for row in np.flatnonzero(rows & self.keep).tolist():
            line = int(self.values.table.line[row])
            text = self.values.frame.lines.lines[line - 1]
            empty = not text.replace(self.values.layout.separator, "").replace('"', "").strip()
            self.set_aside.append(SetAside(line, EMPTY_ROW if empty else reason, text))
            if not empty and reason in (NO_SAMPLE, NO_ANALYTE):
                what = "a sample ID" if reason == NO_SAMPLE else "an analyte"
                sentence = f"expected {what}, got an empty cell in {shown(text)}. The row belongs to no result. "
                header = self.values.header_of("analyte") if reason == NO_ANALYTE else self.values.label_header()
                self.problems.append(Problem(line, header, f"{sentence}Complete the export."))
        self.keep &= ~rows

    def unmatched(self) -> None:
        layout, label = self.values.layout, self.values.label
        unmatched = self.values.understood.rule < 0
        if not layout.labels or not unmatched.any():
            return
        rows = np.append(unmatched, False)[label.codes]  # a row without label is another matter
        if layout.unmatched == "set aside":
            self.leave_out(rows, UNMATCHED)
            return
        lines: dict[str, list[int]] = {}
        for row in np.flatnonzero(rows).tolist():
            lines.setdefault(label[row] or "", []).append(int(self.values.table.line[row]))
        named = [f"{text!r} (line {line_ranges(at)})" for text, at in list(lines.items())[:MOST_NAMED]]
        more = f" and {len(lines) - MOST_NAMED} more" if len(lines) > MOST_NAMED else ""
        first = min(at[0] for at in lines.values()) - 1
        raise self.values.frame.lines.refusal(
            first,
            f"expected every label to match a rule, got {', '.join(named)}{more}",
            "Correct the labels, add rules to labels in the layout, end the table above them with until, "
            "or write unmatched: set aside",
            self.values.label_header(),
        )

    def nothing_left(self) -> Exception:
        sentence = "expected readings, got only rows that were set aside"
        todo = f"Look at the labels ({', '.join(sorted({aside.reason for aside in self.set_aside}))})"
        return self.values.frame.lines.refusal(self.values.frame.header_at, sentence, todo)

    def sample(self, role: NDArray[np.int8]) -> Texts:
        """Return what groups spiked with unspiked; standards, blanks and checks may go by their label."""
        values = self.values
        if not values.has_source("sample"):
            return renamed(values.label, folded(values.label.names))
        sample = values.texts("sample")
        gaps = sample.codes < 0
        if (gaps & ~is_sample(role)).any():
            label = renamed(values.label, folded(values.label.names))
            sample = filled(sample, Texts(np.where(is_sample(role), np.int32(-1), label.codes), label.names))
        self.leave_out(sample.codes < 0, NO_SAMPLE)
        return sample

    def analyte(self) -> tuple[Texts, Texts]:
        """Return analyte and channel of each reading, after setting rows without analyte aside."""
        entries, rows = self.values.plan.entries, self.values.rows
        found = []
        for name in ("analyte", "channel"):
            if any(getattr(entry, name) is not None for entry in entries):
                of_entries = Texts.of([getattr(entry, name) for entry in entries])
                found.append(Texts(np.tile(of_entries.codes, rows), of_entries.names))
                continue
            texts = self.values.texts(name)
            if name == "analyte":
                self.leave_out(texts.codes < 0, NO_ANALYTE)
            found.append(Texts(np.repeat(texts.codes, max(len(entries), 1)), texts.names))
        return found[0], found[1]

    def signals(self) -> Floats:
        """Return the signals of each reading, before rows are left out."""
        values, plan = self.values, self.values.plan
        if plan.entries:
            of_entries = [self.signals_of(number, entry.columns["signal"]) for number, entry in enumerate(plan.entries)]
            width = max(signals.shape[1] for signals in of_entries)
            cube = np.full((values.rows, len(of_entries), width), np.nan)
            for number, signals in enumerate(of_entries):
                cube[:, number, : signals.shape[1]] = signals
            return cube.reshape(-1, width)
        mapped = plan.mapped.get("signal")
        source = values.layout.columns.signal
        if mapped is None or source is None or not source.plain:
            return values.numbers("signal").reshape(-1, 1)
        signals = np.stack([values.numbers("signal", column=column) for column in mapped.columns], axis=1)
        if mapped.source.optional:
            self.signalless(np.all(np.isnan(signals), axis=1))
        return signals

    def signals_of(self, entry: int, columns: tuple[int, ...]) -> Floats:
        """Return the replicate readings of one analyte; where all of them are empty, the reading is missing."""
        values = self.values
        if len(columns) == 1:
            return values.numbers("signal", entry=entry, column=columns[0]).reshape(-1, 1)
        before = len(values.odd)
        signals = np.stack([values.numbers("signal", entry=entry, column=column) for column in columns], axis=1)
        noted, values.odd[before:] = values.odd[before:], []
        odd: set[int] = set()
        for one in noted:
            cells = {row: cell for row, cell in one.cells.items() if cell.kind is not Kind.MISSING}
            odd |= cells.keys()
            if cells:
                values.odd.append(replace(one, cells=cells))
        empty = set(np.flatnonzero(np.all(np.isnan(signals), axis=1)).tolist()) - odd
        if empty:
            cells = dict.fromkeys(sorted(empty), values.layout.grammar.cell(""))
            header = values.table.headers[columns[0]]
            values.odd.append(Odd("signal", header, entry, cells, optional=False, in_table=True, column=columns[0]))
        return signals

    def line_of_signal(self, row: int, entry: int) -> int:
        """Return the line on which the signal of a reading stands."""
        plan = self.values.plan
        if plan.entries:
            return self.values.table.line_of(row, plan.entries[entry].columns["signal"][0])
        mapped = plan.mapped.get("signal")
        return self.values.table.line_of(row, mapped.columns[0] if mapped else None)

    def excluded(self) -> None:
        """Set rows aside that the export itself excludes; a word that says neither yes nor no is a fault."""
        said = self.values.texts("excluded")
        words = [_YES_NO.get(name.casefold()) for name in said.names]
        self.leave_out(np.array([*(word is True for word in words), False])[said.codes], fates.EXCLUDED)
        strange = np.array([*(word is None for word in words), False])[said.codes]
        if strange.any():
            todo = "Explain the word in the layout: columns.excluded.map"
            cells = {
                row: Cell(Kind.UNREADABLE, np.nan, said[row] or "", f"expected yes or no, got {said[row]!r}", todo)
                for row in np.flatnonzero(strange).tolist()
            }
            self.values.doubt("excluded", self.values.header_of("excluded"), cells)

    def signalless(self, rows: NDArray[np.bool_]) -> None:
        """Note rows whose optional replicates are all empty."""
        odd = {row for odd in self.values.odd for row, cell in odd.cells.items() if cell.kind is not Kind.MISSING}
        expected = "expected at least one reading, got empty cells"
        cell = Cell(Kind.UNREADABLE, np.nan, "", expected, "Complete the export")
        empty = [row for row in np.flatnonzero(rows).tolist() if row not in odd]
        self.values.doubt("signal", self.values.header_of("signal"), dict.fromkeys(empty, cell))

    def statistic(self, name: str) -> Floats:
        """Return a statistic of each reading, before rows are left out."""
        values, entries = self.values, self.values.plan.entries
        if not any(name in entry.columns for entry in entries):
            return np.repeat(values.numbers(name), max(len(entries), 1))
        columns = [
            values.numbers(name, entry=number, column=entry.columns[name][0])
            if name in entry.columns
            else np.full(values.rows, np.nan)
            for number, entry in enumerate(entries)
        ]
        return np.stack(columns, axis=1).ravel()

    def quantity(self, name: str) -> Quantities:
        """Return a quantity of each reading, before rows are left out."""
        values, entries = self.values, self.values.plan.entries
        if not any(name in entry.columns for entry in entries):
            everywhere = values.quantities(name)
            return everywhere if len(entries) <= 1 else everywhere.take(np.repeat(np.arange(values.rows), len(entries)))
        found = [
            values.quantity_column(name, entry.columns[name][0], None, self.unit_of(entry, name), number)
            if name in entry.columns
            else Quantities.absent(values.rows)
            for number, entry in enumerate(entries)
        ]
        units = [one.units[row] for row in range(values.rows) for one in found]
        return Quantities(np.stack([one.values for one in found], axis=1).ravel(), Texts.of(units))

    def nominals(self) -> Quantities | None:
        """Return the nominal concentration that a wide table says of each reading; None where it says none."""
        values, unfold = self.values, self.values.layout.unfold
        entries = values.plan.entries
        if unfold is None:
            return None
        if unfold.nominal is None and any("nominal" in entry.columns for entry in entries):
            return self.quantity("nominal")
        if unfold.nominal is None:
            return self.nominals_beside()
        found = []
        for entry in entries:
            place = "concentration" if "concentration" in entry.columns else "signal"
            texts = values.table.texts(entry.columns[place][0])
            cells = [self.bracketed(unfold.nominal, text) for text in (*texts.names, "")]
            units = self.unit_of(entry, place) if place == "concentration" else Texts.absent(values.rows)
            found.append(Quantities(np.array(cells)[texts.codes], units))
        units_of = [one.units[row] for row in range(values.rows) for one in found]
        return Quantities(np.stack([one.values for one in found], axis=1).ravel(), Texts.of(units_of))

    def nominals_beside(self) -> Quantities | None:
        """Return the nominal concentrations that side tables say of each analyte of a wide table."""
        values, entries = self.values, self.values.plan.entries
        sides = [side.lookup for side in values.sides() if "nominal" in side.lookup.fields]
        if not any("analyte" in lookup.by for lookup in sides) or any(entry.analyte is None for entry in entries):
            return None
        found = [values.quantity_beside("nominal", entry.analyte or "") for entry in entries]
        units = [one.units[row] for row in range(values.rows) for one in found]
        return Quantities(np.stack([one.values for one in found], axis=1).ravel(), Texts.of(units))

    def bracketed(self, pattern: re.Pattern[str], text: str) -> float:
        """Return the number that a pattern finds in a cell, NaN where it finds none."""
        match = pattern.search(text)
        return math.nan if match is None else self.values.layout.grammar.cell(match[1] or "").value

    def any_nominal(self, of_rows: Quantities, of_entries: Quantities | None) -> Quantities:
        """Return for each row whether any of its readings has a nominal concentration."""
        if of_entries is None:
            return of_rows
        cube = of_entries.values.reshape(self.values.rows, -1)
        any_of_row = np.where(np.isfinite(cube).any(axis=1), 1.0, np.nan)
        return Quantities(np.where(np.isfinite(of_rows.values), of_rows.values, any_of_row), of_rows.units)

    def unit_of(self, entry: Entry, name: str) -> Texts:
        """Return the unit that the header of a wide table says."""
        unit = entry.units.get(name)
        return Texts.constant(unit, self.values.rows) if unit else Texts.absent(self.values.rows)

    def present(self, role: NDArray[np.int8]) -> NDArray[np.bool_]:
        """Return bool[rows, entries]: which readings there are.

        A standard, blank or check standard of a wide table need not hold every analyte; a sample must.
        """
        entries = max(len(self.values.plan.entries), 1)
        present = np.repeat(self.keep[:, np.newaxis], entries, axis=1)
        unfold = self.values.layout.unfold
        samples = is_sample(role) & (unfold is None or not unfold.optional)
        nominal = unfold.nominal if unfold is not None else None
        self._leave_out_clean_blanks(role, present)
        for odd in self.values.odd:
            if odd.field != "signal" or odd.entry is None:
                continue
            for row, cell in odd.cells.items():
                bracketed = nominal is not None and cell.kind is Kind.UNREADABLE and nominal.search(cell.text)
                empty = cell.kind is Kind.MISSING or bracketed
                if empty and not self.values.table.holds(row, odd.column):
                    present[row, odd.entry] = False  # another batch, which did not measure this analyte
                    continue
                if empty and not samples[row] and self.keep[row]:
                    present[row, odd.entry] = False
                    reason = f"no reading in column {odd.header!r}: the {Role(role[row]).word} does not hold it"
                    text = self.values.label[row] or ""
                    self.set_aside.append(SetAside(int(self.values.table.line[row]), reason, text))
        return present

    def _leave_out_clean_blanks(self, role: NDArray[np.int8], present: NDArray[np.bool_]) -> None:
        """Set blanks aside in which the instrument found nothing: that is what a blank is for, and no fault."""
        below: dict[tuple[int, int | None], int] = {}
        for odd in self.values.odd:
            if odd.field == "signal":
                for row, cell in odd.cells.items():
                    if cell.kind is Kind.BELOW and role[row] == Role.BLANK and self.keep[row]:
                        below[row, odd.entry] = below.get((row, odd.entry), 0) + 1
        mapped = self.values.plan.mapped.get("signal")
        replicates = len(mapped.columns) if mapped is not None else 1
        for (row, entry), count in below.items():
            if entry is None and count < replicates:
                continue  # some replicates are numbers: what the others hid stays a fault
            present[row, slice(None) if entry is None else entry] = False
            reason = "blank below the instrument's range: nothing was found"
            self.set_aside.append(SetAside(int(self.values.table.line[row]), reason, self.values.label[row] or ""))


def _flags(texts: Texts, pattern: re.Pattern[str]) -> Texts:
    """Return what a pattern finds in each text."""
    return renamed(
        texts, [" ".join(match[0].strip() for match in pattern.finditer(name)) or None for name in texts.names]
    )


def _first(one: Quantities, other: Quantities) -> Quantities:
    """Return the first of two columns where it has a number, else the second."""
    known = np.isfinite(one.values)
    units = filled(Texts(np.where(known, one.units.codes, -1).astype(np.int32), one.units.names), other.units)
    return Quantities(np.where(known, one.values, other.values), units)


def _take(column: Any, rows: NDArray[np.int64]) -> Any:
    return column.take(rows) if isinstance(column, (Texts, Quantities)) else column[rows]
