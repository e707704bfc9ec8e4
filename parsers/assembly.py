"""Rows of a table become readings: labels understood, roles settled, odd cells judged, columns put together.

A row that belongs to no sample is set aside and named; a cell that cannot be used is a fault of its row. Nothing here
splits lines or converts cells.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers import fields, roles
from parsers.cells import Cell, Kind
from parsers.labels import understand
from parsers.readings import (
    ROLE_WORDS,
    Fault,
    LabelUse,
    Problem,
    Quantities,
    Readings,
    Role,
    SetAside,
    Texts,
    line_ranges,
)
from parsers.spelling import folded, listed, looked_up, renamed, shown
from parsers.values import Odd, Values

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.columns import Plan
    from parsers.heading import Heading
    from parsers.layout import Layout
    from parsers.readings import Floats
    from parsers.table import Frame, Table

#: Most labels that one error names.
MOST_NAMED = 100
EMPTY_ROW = "no cell is filled"
NO_SAMPLE = "row without sample ID"
NO_ANALYTE = "row without analyte"
UNMATCHED = "label matches no rule"
_ROLES = [role.word for role in Role]
_FOLLOWS = "Its series is not evaluated."


def assemble(frame: Frame, layout: Layout, plan: Plan, table: Table, heading: dict[str, Heading]) -> Readings:
    """Put the readings of an export together.

    Raises
    ------
    ExportRefused
        If labels match no rule and the layout does not set them aside, or no reading remains.
    """
    label = _label(layout, plan, table, heading)
    understood = understand(folded(label.names), layout.labels)
    values = Values(frame, layout, plan, table, heading, label, understood)
    return _Assembly(values, keep=np.ones(len(table.line), dtype=bool)).readings()


def _label(layout: Layout, plan: Plan, table: Table, heading: dict[str, Heading]) -> Texts:
    """Return the label of each row as written; the sample ID where no column is the label or a cell of it is empty."""
    mapped = plan.mapped.get("label")
    sample = plan.mapped.get("sample")
    if mapped is None and sample is None:
        return Texts.constant(heading["sample"].value, len(table.line))
    if mapped is None or (sample is not None and not layout.labels):
        named = table.texts(sample.columns[0]) if sample is not None else Texts.absent(len(table.line))
        return named if mapped is None else filled(table.texts(mapped.columns[0]), named)
    return table.texts(mapped.columns[0])


def filled(texts: Texts, other: Texts) -> Texts:
    """Return a column with its gaps filled from another one."""
    gaps = texts.codes < 0
    if not gaps.any():
        return texts
    together = Texts.of([*texts.names, *other.names])
    codes = np.where(gaps & (other.codes >= 0), other.codes + np.int32(len(texts.names)), texts.codes)
    return looked_up(together, Texts(codes, (*texts.names, *other.names)))


@dataclass(slots=True)
class _Assembly:
    values: Values
    keep: NDArray[np.bool_]
    set_aside: list[SetAside] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)
    doubts: list[Odd] = field(default_factory=list)

    def readings(self) -> Readings:
        values, table = self.values, self.values.table
        self.leave_out(values.label.codes < 0, NO_SAMPLE)
        self.unmatched()
        added, nominal = values.quantities("added"), values.quantities("nominal")
        spike_volume, level = values.quantities("spike_volume"), values.texts("level")
        role = self.role(added, spike_volume, level, nominal)
        sample = self.sample(role)
        analyte = self.analyte()
        signals = self.signals()
        statistics = {name: self.statistic(name) for name in fields.STATISTICS}
        per_row: dict[str, Any] = {
            "line": table.line, "label": values.label, "sample": sample, "role": role, "level": level,
            "added": added, "nominal": nominal, "spike_volume": spike_volume,
            "aliquot": values.quantities("aliquot"), "made_up_to": values.quantities("made_up_to"),
            "replicate": values.numbers("replicate"), "position": values.numbers("position"),
            "measured_at": values.times(), "predilution": values.predilution(),
            **{name: values.texts(name) for name in ("stock", "batch", "analyst", "instrument", "comment")},
        }  # fmt: skip
        present = self.present(role)
        if not present.any():
            raise self.nothing_left()
        row, entry = np.nonzero(present)
        everything = bool(present.all()) and len(values.plan.entries) <= 1
        columns = {name: column if everything else _take(column, row) for name, column in per_row.items()}
        per_reading = {"analyte": analyte[0], "channel": analyte[1], **statistics}
        flat = row * present.shape[1] + entry
        columns |= {name: column if everything else _take(column, flat) for name, column in per_reading.items()}
        columns["signals"] = signals if everything else signals[flat]
        return Readings(
            **columns,
            faults=self.faults(present, role),
            set_aside=tuple(sorted([*table.set_aside, *self.set_aside], key=lambda aside: aside.line)),
            problems=tuple(sorted(self.problems, key=lambda problem: problem.line)),
            labels=self.label_uses(role, sample),
            columns=values.plan.uses,
            heading={name: found.value for name, found in values.heading.items()},
            lines=len(values.frame.lines),
        )

    # --- rows that are no readings ---------------------------------------------------------------------------------

    def leave_out(self, rows: NDArray[np.bool_], reason: str) -> None:
        """Set rows aside; one that says something and belongs to no sample or analyte is a problem as well."""
        for row in np.flatnonzero(rows & self.keep).tolist():
            line = int(self.values.table.line[row])
            text = self.values.frame.lines.lines[line - 1]
            empty = not text.replace(self.values.layout.separator, "").replace('"', "").strip()
            self.set_aside.append(SetAside(line, EMPTY_ROW if empty else reason, text))
            if not empty and reason in (NO_SAMPLE, NO_ANALYTE):
                what = "sample ID" if reason == NO_SAMPLE else "analyte"
                sentence = f"expected a {what}, got an empty cell in {shown(text)}. The row belongs to no result. "
                header = self.header_of("analyte") if reason == NO_ANALYTE else self.values.label_header()
                self.problems.append(Problem(line, header, f"{sentence}Complete the export."))
        self.keep &= ~rows

    def header_of(self, name: str) -> str:
        mapped = self.values.plan.mapped.get(name)
        return self.values.table.headers[mapped.columns[0]] if mapped else self.values.label_header()

    def unmatched(self) -> None:
        layout, label = self.values.layout, self.values.label
        unmatched = self.values.understood.rule < 0
        if not layout.labels or not unmatched.any():
            return
        rows = np.append(unmatched, False)[label.codes]  # noqa: FBT003 (a row without label is another matter)
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
            "Correct the labels, add rules to labels in the layout, or write unmatched: set aside",
            self.values.label_header(),
        )

    def nothing_left(self) -> Exception:
        sentence = "expected readings, got only rows that were set aside"
        todo = f"Look at the labels ({', '.join(sorted({aside.reason for aside in self.set_aside}))})"
        return self.values.frame.lines.refusal(self.values.frame.header_at, sentence, todo)

    # --- what a row is ---------------------------------------------------------------------------------------------

    def role(self, added: Quantities, spike_volume: Quantities, level: Texts, nominal: Quantities) -> NDArray[np.int8]:
        values = self.values
        by_label = np.append(values.understood.role, np.int8(roles.UNKNOWN))[values.label.codes]
        said = values.texts("role")
        by_word = np.array([ROLE_WORDS.get(word, roles.UNKNOWN) for word in (*said.names, "")], dtype=np.int8)
        by_column = by_word[said.codes]
        strange = (said.codes >= 0) & (by_column == roles.UNKNOWN) & (by_label == roles.UNKNOWN)
        role = roles.settle(
            by_label, by_column, (added.values, spike_volume.values), level.codes >= 0, np.isfinite(nominal.values)
        )
        self.doubtful_words(strange, said)
        self.unsettled((role == roles.UNKNOWN) & ~strange)
        # Whatever is in doubt counts as spiked: its addition is unknown, and must never be taken for none.
        return np.where(strange | (role == roles.UNKNOWN), np.int8(Role.SPIKED), role).astype(np.int8)

    def doubtful_words(self, rows: NDArray[np.bool_], said: Texts) -> None:
        cells = {}
        for row in np.flatnonzero(rows).tolist():
            word = said[row] or ""
            expected = f"expected a role ({listed(ROLE_WORDS)}), got {shown(word)}"
            cells[row] = Cell(
                Kind.UNREADABLE, np.nan, word, expected, "Explain the word in the layout: columns.role.map"
            )
        self.doubt("role", self.header_of("role"), cells)

    def unsettled(self, rows: NDArray[np.bool_]) -> None:
        known = {row for odd in self.values.odd for row, cell in odd.cells.items() if cell.kind is not Kind.MISSING}
        names = [name for name in ("added", "spike_volume") if name in self.values.plan.mapped]
        header = self.header_of(names[0]) if names else self.values.label_header()
        what = "expected an addition, got an empty cell, and nothing else says" if names else "nothing says"
        expected = f"{what} whether this is unspiked, spiked or a standard"
        cells = {}
        for row in set(np.flatnonzero(rows).tolist()) - known:
            text = "" if names else self.values.label[row] or ""
            cells[row] = Cell(
                Kind.UNREADABLE, np.nan, text, expected, "Complete the export, or add a label rule to the layout"
            )
        self.doubt("role", header, cells)

    def doubt(self, name: str, header: str, cells: dict[int, Cell]) -> None:
        if cells:
            self.doubts.append(Odd(name, header, None, cells, optional=False, in_table=True))

    def sample(self, role: NDArray[np.int8]) -> Texts:
        """Return what groups spiked with unspiked; standards, blanks and checks may go by their label."""
        values = self.values
        by_rule = "sample" in values.understood.said
        if values.layout.columns.sample is None and "sample" not in values.heading and not by_rule:
            return renamed(values.label, folded(values.label.names))
        sample = values.texts("sample")
        gaps = sample.codes < 0
        if (gaps & ~_is_sample(role)).any():
            label = renamed(values.label, folded(values.label.names))
            sample = filled(sample, Texts(np.where(_is_sample(role), np.int32(-1), label.codes), label.names))
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

    # --- what was measured -----------------------------------------------------------------------------------------

    def signals(self) -> Floats:
        """Return the signals of each reading, before rows are left out."""
        values, plan = self.values, self.values.plan
        if plan.entries:
            columns = [
                values.numbers("signal", entry=number, column=entry.columns["signal"])
                for number, entry in enumerate(plan.entries)
            ]
            return np.stack(columns, axis=1).reshape(-1, 1)
        mapped = plan.mapped["signal"]
        signals = np.stack([values.numbers("signal", column=column) for column in mapped.columns], axis=1)
        if mapped.source.optional:
            self.signalless(np.isnan(signals).all(axis=1))
        return signals

    def signalless(self, rows: NDArray[np.bool_]) -> None:
        odd = {row for odd in self.values.odd for row, cell in odd.cells.items() if cell.kind is not Kind.MISSING}
        cell = Cell(
            Kind.UNREADABLE, np.nan, "", "expected at least one reading, got empty cells", "Complete the export"
        )
        self.doubt(
            "signal", self.header_of("signal"), {row: cell for row in np.flatnonzero(rows).tolist() if row not in odd}
        )

    def statistic(self, name: str) -> Floats:
        """Return a statistic of each reading, before rows are left out."""
        values, entries = self.values, self.values.plan.entries
        if not any(name in entry.columns for entry in entries):
            return np.repeat(values.numbers(name), max(len(entries), 1))
        columns = [
            values.numbers(name, entry=number, column=entry.columns[name])
            if name in entry.columns
            else np.full(values.rows, np.nan)
            for number, entry in enumerate(entries)
        ]
        return np.stack(columns, axis=1).ravel()

    def present(self, role: NDArray[np.int8]) -> NDArray[np.bool_]:
        """Return bool[rows, entries]: which readings there are. A standard need not hold every analyte of a wide table."""
        entries = max(len(self.values.plan.entries), 1)
        present = np.repeat(self.keep[:, np.newaxis], entries, axis=1)
        is_sample = _is_sample(role)
        for odd in self.values.odd:
            if odd.field != "signal" or odd.entry is None:
                continue
            for row, cell in odd.cells.items():
                if cell.kind is Kind.MISSING and not is_sample[row] and self.keep[row]:
                    present[row, odd.entry] = False
                    reason = f"no reading in column {odd.header!r}: the {Role(role[row]).word} does not hold it"
                    text = self.values.label[row] or ""
                    self.set_aside.append(SetAside(int(self.values.table.line[row]), reason, text))
        return present

    def faults(self, present: NDArray[np.bool_], role: NDArray[np.int8]) -> tuple[Fault, ...]:
        """Return the faults of the readings that remain, in the order of the rows."""
        number = (np.cumsum(present.ravel()) - 1).reshape(present.shape)
        is_sample = _is_sample(role)
        faults = []
        for odd in [*self.values.odd, *self.doubts]:
            for row, cell in odd.cells.items():
                if not _fails(odd, cell, is_sample=bool(is_sample[row])):
                    continue
                sentence = f"{cell.expected}. {_FOLLOWS} {cell.remedy}."
                line = int(self.values.table.line[row])
                for entry in range(present.shape[1]) if odd.entry is None else (odd.entry,):
                    if present[row, entry]:
                        at = int(number[row, entry])
                        faults.append(Fault(at, line, odd.header, cell.text, odd.field, sentence))
        return tuple(sorted(faults, key=lambda fault: fault.row))

    def label_uses(self, role: NDArray[np.int8], sample: Texts) -> tuple[LabelUse, ...]:
        """Return how each distinct label was understood."""
        values, label = self.values, self.values.label
        rows = np.flatnonzero(label.codes >= 0)
        counts = np.bincount(label.codes[rows], minlength=len(label.names)).tolist()
        first = np.zeros(len(label.names), dtype=np.int64)
        first[label.codes[rows][::-1]] = rows[::-1]
        differs = rows[(role[rows] != role[first[label.codes[rows]]])]
        mixed = set(label.codes[differs].tolist())
        words = [_ROLES[code] for code in role[first].tolist()]
        for code in mixed:
            words[code] = "by row"
        number = values.understood.rule.tolist()
        rules = [*(rule.written for rule in values.layout.labels), ""]  # the index -1 of no rule picks the last one
        written = [rules[at] for at in number]
        levels = values.understood.said.get("level", Texts.absent(len(number)))
        level = [*levels.names, ""]
        name = [*sample.names, ""]
        samples = [name[code] for code in sample.codes[first].tolist()]
        if values.layout.labels and -1 in number:
            words = ["" if at < 0 else word for at, word in zip(number, words, strict=True)]
            samples = ["" if at < 0 else text for at, text in zip(number, samples, strict=True)]
        return tuple(
            map(LabelUse, label.names, written, words, samples, [level[code] for code in levels.codes.tolist()], counts)
        )


def _is_sample(role: NDArray[np.int8]) -> NDArray[np.bool_]:
    return (role == Role.UNSPIKED) | (role == Role.SPIKED)


def _fails(odd: Odd, cell: Cell, *, is_sample: bool) -> bool:
    """Tell whether a cell that gave no value spoils its series."""
    if cell.kind is Kind.UNREADABLE:
        return True
    if cell.kind is not Kind.MISSING:
        return odd.field not in fields.STATISTICS
    if odd.optional or not odd.in_table:
        return False
    return odd.field == "signal" or (odd.field in fields.NEEDED_ON_SAMPLES and is_sample)


def _take(column: Any, rows: NDArray[np.int64]) -> Any:
    return column.take(rows) if isinstance(column, (Texts, Quantities)) else column[rows]
