"""Exports of every shape: what breaks them is said with line, column, cell and remedy, and nothing is guessed."""

from __future__ import annotations

import re
import time
from typing import TYPE_CHECKING

import numpy as np
import pytest

from parsers.document import DocumentInvalid
from parsers.errors import ExportRefused
from parsers.examples import differences, written, written_csv
from parsers.layout import parse_layout
from parsers.read import read

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.readings import Readings

BASE = """
layout: shapes
claims: {file: '*'}
separator: ';'
labels:
  - {like: '{sample} +{level}', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
PLAIN = "columns: {label: Label, analyte: {constant: Zn}, signal: R}\n"


def _read(text: str, more: str, name: str = "X-1.csv", tables: dict[str, str] | None = None) -> Readings:
    return read(text.encode(), parse_layout(BASE + more, "shapes.yaml", tables), name)


def _values(readings: Readings, *names: str) -> list[tuple[str, ...]]:
    return [tuple(row[name] for name in names) for row in written(readings)]


def test_an_error_in_line_47_says_everything() -> None:
    """Line, column, cell, what was expected and what to do, also inside a block."""
    rows = "".join(f"SED-{number};{number}.5\n" for number in range(43))
    text = f"Report\n\nBlock A\nLabel;R\n{rows.replace('42.5', '4,25')}"

    readings = _read(text, PLAIN + "header: '^Label'\nblocks: {begin: '^Block'}\n")

    assert str(readings.faults[0]) == (
        "line 47, column 'R': expected a number with decimal point, got '4,25'. Its series is not evaluated. Correct "
        "the export or set decimal or thousands in the layout."
    )


def test_a_fault_in_line_47_of_a_layout_says_everything() -> None:
    """Line, key, what was expected and got, and what to do."""
    text = BASE + "\n" * 38 + PLAIN + "decimal: ';'\n"

    with pytest.raises(
        DocumentInvalid,
        match=r"shapes.yaml, line 47, decimal: expected one of '\.', ',', got ';'\..*Write one of these",
    ):
        parse_layout(text, "shapes.yaml")


@pytest.mark.parametrize(
    ("cell", "decimal", "value"),
    [("1.234", ".", 1.234), ("1,234", ",", 1.234), ("1E5", ".", 1e5), ("1,2D+03", ",", 1200.0), ("-.5", ".", -0.5)],
)
def test_numbers_are_read_under_the_declared_mark(cell: str, decimal: str, value: float) -> None:
    """The decimal mark is the declared one, whatever the number looks like."""
    assert _read(f"Label;R\nA;{cell}\n", f"{PLAIN}decimal: '{decimal}'\n").signals.tolist() == [[value]]


@pytest.mark.parametrize(("cell", "decimal"), [("1.234", ","), ("1,234", "."), ("1 234", "."), ("1'234", ".")])
def test_an_ambiguous_number_is_a_fault(cell: str, decimal: str) -> None:
    """A mark that is not declared is never taken for a thousands mark."""
    readings = _read(f"Label;R\nA;{cell}\n", f"{PLAIN}decimal: '{decimal}'\n")

    assert np.isnan(readings.signals).all()
    assert [(fault.line, fault.column, fault.cell) for fault in readings.faults] == [(2, "R", cell)]


@pytest.mark.parametrize("label", ["007", "1E5", "NA", "None", "TRUE", "nan", "-", "1.0", "0x10"])
def test_labels_are_texts_whatever_they_look_like(label: str) -> None:
    """A label is never a number, a truth value or a missing one."""
    assert _values(_read(f"Label;R\n{label};1\n", PLAIN), "label", "sample") == [(label, label)]


def test_sodium_is_an_element() -> None:
    """Na is no missing word, as a cell and in a header."""
    wide = "columns: {label: Label}\nunfold: {pattern: '^(?P<analyte>Na|K)$'}\n"

    assert _values(_read("Label;E;R\nA;Na;1\n", PLAIN.replace("{constant: Zn}", "E")), "analyte") == [("Na",)]
    assert _values(_read("Label;Na;K\nA;1;2\n", wide), "analyte") == [("Na",), ("K",)]


@pytest.mark.parametrize(
    ("text", "more", "expected"),
    [
        ("Label;R\nA;1\n", f"{PLAIN}blocks: {{begin: '^Block'}}\n", "expected a line that begins a block"),
        ("Block\nLabel;R\nA;1\nBlock\n", f"{PLAIN}blocks: {{begin: '^Block'}}\n", "line 5: expected a header line"),
        (
            "Block\nLabel;R\nA;1\nBlock\nLabel;S\nA;1\n",
            f"{PLAIN}blocks: {{begin: '^Block'}}\n",
            "line 5: expected the columns 'R'",
        ),
        (
            "Block\nLabel;R\nA;1\n",
            f"{PLAIN}blocks: {{begin: '^Block', heading: {{batch: '^Batch (.+)'}}}}\n",
            "line 1: expected the heading batch .* in its block, got none",
        ),
        ("Label;R\n", f"{PLAIN}header_lines: 2\n", "line 1: expected 2 header lines, got the end after 1"),
        ("Label;R;R\nA;1;2\n", PLAIN, "line 1, column 'R': expected one column of this name for signal, got 2"),
        (
            "Label;R\nA;1\n",
            "columns: {label: Label, analyte: {constant: Zn}, signal: {from: R, occurrence: 2}}\n",
            "line 1, column 'R': expected this column at least 2 times for signal, got 1",
        ),
        (
            "Label;R\nA;1\n",
            "columns: {label: Label, analyte: {constant: Zn}, signal: {number: 3}}\n",
            "expected the columns 'number 3'",
        ),
        (
            "Label;R\nSD;1\nA;1\n",
            f"{PLAIN}rows: [{{where: {{Label: '^SD$'}}, are: sd}}]\n",
            "line 2: expected a row above this one, which is its sd",
        ),
        (
            "Label;R\nA;1\n",
            f"{PLAIN}rows: [{{where: {{Kind: 'SD'}}, are: sd}}]\n",
            "line 1, column 'Kind': expected one column 'Kind' for rows.where, got none",
        ),
        ("Label;R\nA;1\n", f"{PLAIN}fill_down: Batch\n", "expected one column 'Batch' for fill_down, got none"),
        ("Label;R\nA;1\n", f"{PLAIN}file_name: '^(?P<batch>B-\\d+)'\n", "expected a file name that matches"),
        ("Vial\nR\n", f"{PLAIN.replace('Label', 'Vial')}table: transposed\n", "expected columns beside the names"),
        (
            "Title\nLabel;R\nA;1\n",
            PLAIN,
            r"expected the columns .* write there which line is the header \(header: '\^…'\): without it line 1 was",
        ),
        (
            "Label;R\nA;1\nSum of all;1\n",
            PLAIN.replace("columns", "unmatched: refuse\ncolumns") + "labels: [{pattern: '^[A-Z]$', role: blank}]\n",
            r"line 3, column 'Label': expected every label to match a rule, got 'Sum of all' .* with until",
        ),
        (
            "Label;R (ppb)\nA;1\n",
            (
                "columns: {label: Label, analyte: {constant: Zn}, signal: 'R (ppb)', "
                "concentration: {from: 'R (ppb)', unit: {header: '\\[(.+)\\]'}}}\n"
            ),
            "expected the unit of concentration in the header",
        ),
    ],
)
def test_a_broken_shape_refuses_the_export(text: str, more: str, expected: str) -> None:
    """What does not have the described shape is refused with its place and a remedy."""
    base = BASE if "labels:" not in more else BASE[: BASE.index("labels:")]
    with pytest.raises(ExportRefused, match=expected) as refused:
        read(text.encode(), parse_layout(base + more, "shapes.yaml"), "X-1.csv")

    assert "Nothing of this export is read." in str(refused.value)
    assert refused.value.remedy


@pytest.mark.parametrize(
    ("line", "expected"),
    [
        ("A     0.1234", "line 2: expected a column to end at character 10, got a number that goes on"),
        ("A     0.12   more", "line 2: expected at most 10 characters as in widths, got 'more' behind them"),
    ],
)
def test_fixed_columns_cut_no_number_in_two(line: str, expected: str) -> None:
    """Widths that do not fit the line refuse the export."""
    layout = BASE.replace("separator: ';'", "widths: [6, 4]" if "more" in line else "widths: [6, 4, 4]") + PLAIN

    with pytest.raises(ExportRefused, match=expected):
        read(f"Label R\n{line}\n".encode(), parse_layout(layout, "shapes.yaml"), "X-1.csv")


@pytest.mark.parametrize(
    ("more", "expected"),
    [
        (f"{PLAIN}repeat_right: [2]\n", r"repeat_right\[1\]: expected a header line from 1 to 1, got 2"),
        (f"{PLAIN}header: none\nheader_lines: 2\n", "header: there is no header, but its lines are described"),
        (f"{PLAIN}rows: [{{are: left out}}, {{are: mean}}]\n", r"rows\[1\]: a rule without condition takes every row"),
        (f"{PLAIN}rows: [{{are: median}}]\n", r"rows\[1\].are: expected one of .* got 'median'"),
        (f"{PLAIN}file_name: 'B'\n", "file_name: the pattern has no named group"),
        (f"{PLAIN}blocks: {{begin: 'x', end: 'x'}}\n", "blocks.end: the same pattern begins a block"),
        (f"{PLAIN}blocks: {{begin: 'x', heading: {{batch: 'y'}}}}\n", "blocks.heading.batch: expected one group"),
        (f"{PLAIN}heading: {{measured_at: '(.+)'}}\n", "heading.measured_at: a time needs its form"),
        (
            "columns: {label: Label, analyte: {heading: elment}, signal: R}\nheading: {element: '^E: (.+)'}\n",
            "columns.analyte.heading: no heading is named 'elment'.*Did you mean 'element'",
        ),
        (
            "columns: {label: Label, analyte: {group: analyt}, signal: R}\n",
            "columns.analyte.group: no label rule has a word 'analyt'",
        ),
        (
            "columns: {label: Label, analyte: E, signal: {from: R, as: inverse}}\n",
            "columns.signal.as: only a predilution is said as inverse",
        ),
        (
            "columns: {label: Label, analyte: E, signal: R, predilution: {from: V, as: ratio}}\n",
            "columns.predilution: expected two columns for a ratio, got 1",
        ),
        (
            "columns: {label: Label, analyte: {from: E, scale: 2}, signal: R}\n",
            "columns.analyte.scale: 'analyte' is no number",
        ),
        (
            "columns: {label: Label, analyte: [{from: E}, {from: F, unit: x}], signal: R}\n",
            r"columns.analyte\[2\].unit: 'analyte' has no unit",
        ),
        (
            "columns:\n  - {label: Label, analyte: E, signal: R}\n  - {label: Label, analyte: E}\n",
            r"line 10, columns\[2\]: expected a source for 'signal', got none",
        ),
        (f"{PLAIN}lookup: [{{by: label}}]\n", r"lookup\[1\]: expected either 'file', 'begin' or 'values'"),
        (
            f"{PLAIN}lookup: [{{by: label, values: {{A: {{signal: 1}}}}}}]\n",
            r"lookup\[1\]: 'signal' is no field that can be looked up by label",
        ),
        (
            f"{PLAIN}lookup: [{{by: label, file: b.csv, columns: {{batch: B}}}}]\n",
            r"lookup\[1\].file: expected the side table 'b.csv', got no such file",
        ),
        (
            f"{PLAIN}lookup: [{{by: label, file: a.csv, columns: {{batch: Lot}}}}]\n",
            r"lookup\[1\].file: a.csv: expected the column 'Lot', and the header holds 'Name', 'Batch'",
        ),
        (
            f"{PLAIN}lookup: [{{by: label, file: twice.csv, columns: {{batch: Batch}}}}]\n",
            r"twice.csv, line 3: 'A' stands here again, first in line 2",
        ),
        (
            f"{PLAIN}lookup: [{{by: label, file: short.csv, columns: {{batch: Batch}}}}]\n",
            r"short.csv, line 2: expected 2 fields as in the header, got 1",
        ),
        (
            "columns: {label: Label}\nunfold: {pattern: '^(?P<analyte>.)', nominal: 'x'}\n",
            "unfold.nominal: expected one",
        ),
        (
            "columns: {label: L, analyte: E, signal: R}\nunfold: {pattern: '^(?P<channel>.)$', map: {a: b}}\n",
            "unfold.map: the pattern has no group 'analyte'",
        ),
    ],
)
def test_each_fault_of_a_shape_is_named(more: str, expected: str) -> None:
    """A layout that contradicts itself is refused with line and key, in plain words."""
    tables = {"a.csv": "Name,Batch\nA,1\n", "twice.csv": "Name,Batch\nA,1\nA,2\n", "short.csv": "Name,Batch\nA\n"}

    with pytest.raises(DocumentInvalid, match=r"shapes.yaml, line \d+, ") as invalid:
        parse_layout(BASE + more, "shapes.yaml", tables)

    assert re.search(expected, str(invalid.value))


def test_sources_that_disagree_are_reported_and_the_first_counts() -> None:
    """Two sources of one field are compared; what they disagree on is a problem with its line."""
    more = (
        "columns: {label: Label, analyte: {constant: Zn}, signal: R, "
        "predilution: [{from: Dil}, {from: Dil 2, optional: yes}]}\n"
    )

    readings = _read("Label;R;Dil;Dil 2\nA;1;10;10\nB;1;10;\nC;1;10;20\n", more)

    assert readings.predilution.tolist() == [10.0, 10.0, 10.0]
    assert [str(problem) for problem in readings.problems] == [
        (
            "line 4, column 'Dil': expected one predilution, got '10' from 'Dil' and '20' from 'Dil 2'. The first is "
            "used. Correct the one that is wrong."
        )
    ]


def test_a_glued_unit_must_be_the_stated_one() -> None:
    """A number in another unit than the layout states is a fault, and never converted in silence."""
    more = "columns: {label: Label, analyte: {constant: Zn}, signal: R, aliquot: {from: V, unit: mL}}\n"

    readings = _read("Label;R;V\nA;1;5 mL\nB;1;5\nC;1;5 µL\n", more)

    assert readings.aliquot.values[:2].tolist() == [5.0, 5.0]
    assert [fault.sentence.split(". ")[0] for fault in readings.faults] == ["expected a number in mL, got '5 µL'"]


def test_a_signal_that_its_pattern_does_not_find_is_shown_as_it_stands() -> None:
    """A cell that is no reading of the described form is a fault with its text, and never counts as empty."""
    more = "columns: {label: Label, analyte: {constant: Zn}, signal: {from: R, pattern: '^([0-9.]+) cps$'}}\n"

    readings = _read("Label;R\nA;1.5 cps\nB;[12.3]\n", more)

    assert readings.signals[0].tolist() == [1.5]
    assert [(fault.line, fault.column, fault.cell) for fault in readings.faults] == [(3, "R", "[12.3]")]


def test_parts_of_an_export_that_are_wrong_refuse_it() -> None:
    """A part that a lookup needs is refused with the place where it begins."""
    more = (
        PLAIN + "blocks: {begin: '^Data'}\nlookup: [{by: label, begin: '^Names', end: '^Data', columns: {batch: B}}]\n"
    )

    assert _values(_read("Names\nN;B\nA;7\nData\nLabel;R\nA;1\n", more), "batch") == [("7",)]
    with pytest.raises(ExportRefused, match=r"expected a line that matches '\^Names' \(lookup\), got none"):
        _read("Data\nLabel;R\nA;1\n", more)
    with pytest.raises(
        ExportRefused, match=r"line 1: the part behind '\^Names', line 4: 'A' stands here again, first in line 3"
    ):
        _read("Names\nN;B\nA;7\nA;8\nData\nLabel;R\nA;1\n", more)


def test_batches_with_other_analytes_miss_nothing() -> None:
    """A wide table whose block does not have a column has no reading there, and no fault; an empty cell is one."""
    more = (
        "columns: {label: Label}\nunfold: {pattern: '^(?P<analyte>Zn|Cd|Cu)$'}\n"
        "header: '^Label'\nblocks: {begin: '^Label'}\n"
    )

    readings = _read("Label;Zn;Cd\nA;1;2\nLabel;Cu;Zn\nB;3;4\nC;;5\n", more)

    assert _values(readings, "label", "analyte", "signal") == [
        ("A", "Zn", "1"), ("A", "Cd", "2"), ("B", "Zn", "4"), ("B", "Cu", "3"), ("C", "Zn", "5"), ("C", "Cu", ""),
    ]  # fmt: skip
    assert [(fault.line, fault.column) for fault in readings.faults] == [(5, "Cu")]


def test_several_fields_make_one_key() -> None:
    """A table by level and analyte says another nominal concentration of each; a part that is missing has no key."""
    values = "{'L1 | Zn': {nominal: 10 mg/L}, 'L1 | Cu': {nominal: 2 mg/L}}"
    more = (
        "columns: {label: Label, analyte: E, "
        "level: [{from: Lev, optional: yes}, {group: level}], signal: R}\n"
        f"lookup: [{{by: [level, analyte], optional: yes, values: {values}}}]\n"
    )

    readings = _read("Label;E;Lev;R\nS;Zn;L1;1\nS;Cu;L1;2\nB;Cu;;3\n", more)

    assert _values(readings, "nominal") == [("10 mg/L",), ("2 mg/L",), ("",)]


def test_a_word_that_says_neither_yes_nor_no_excludes_nothing() -> None:
    """An unknown word in a flag column is a fault of its row."""
    more = "columns: {label: Label, analyte: {constant: Zn}, signal: R, excluded: Out}\n"

    readings = _read("Label;R;Out\nA;1;no\nB;1;yes\nC;1;perhaps\n", more)

    assert [(fault.line, fault.cell) for fault in readings.faults] == [(4, "perhaps")]
    assert [(one.line, one.reason) for one in readings.set_aside][1:] == [(3, "excluded by the export")]


def test_a_statistic_of_a_row_that_is_left_out_joins_no_other() -> None:
    """The RSD below an excluded reading is not given to the reading before it."""
    rules = "rows: [{where: {X: 'x'}, are: excluded}, {where: {Label: '^RSD$'}, are: rsd}]\n"

    readings = _read("Label;R;X\nA;1;\nB;2;x\nRSD;9;\nC;3;\nRSD;1.5;\n", PLAIN + rules)

    assert _values(readings, "label", "signal_rsd") == [("A", ""), ("C", "1.5")]


def test_several_readings_of_a_row_keep_the_order_and_the_faults() -> None:
    """Maps of one row are read each by itself; faults point at their own reading."""
    more = (
        "columns:\n  - {label: Label, analyte: {constant: Zn}, signal: Z}\n"
        "  - {label: Label, analyte: {constant: Cu}, signal: [C1, C2]}\n"
    )

    readings = _read("Label;Z;C1;C2\nA;1;2;3\nB;x;5;y\n", more)

    assert _values(readings, "line", "analyte", "signal") == [
        ("2", "Zn", "1"), ("2", "Cu", "2 3"), ("3", "Zn", ""), ("3", "Cu", "5"),
    ]  # fmt: skip
    assert [(fault.row, fault.cell) for fault in readings.faults] == [(2, "x"), (3, "y")]


@pytest.mark.parametrize("more", ["", "short_rows: fill\nheader: '^Label'\n"])
def test_long_tables_with_several_sources_agree_with_short_ones(more: str) -> None:
    """Where a table is read at once, columns with another source beside them say the same as row by row."""
    layout = (
        "columns: {label: Label, position: No, analyte: {constant: Zn}, signal: R, aliquot: [{from: V, unit: mL}, "
        "{constant: 7, unit: mL}]}\nlookup: [{by: position, optional: yes, values: {'3': {batch: B3}}}]\n"
    )
    rows = [f"A;{number};1.5;{number % 3 or ''}" for number in range(1, 2001)]

    whole = _read("\n".join(["Label;No;R;V", *rows]), layout + more)
    parts = [_read("\n".join(["Label;No;R;V", *rows[at : at + 500]]), layout + more) for at in range(0, 2000, 500)]

    assert whole.aliquot.values.tolist() == [value for part in parts for value in part.aliquot.values.tolist()]
    assert [row["batch"] for row in written(whole)][:4] == ["", "", "B3", ""]


def test_hostile_exports_are_bounded(make_layout: Callable[..., object]) -> None:
    """A million columns, control characters and formulas are refused or read as what they are, in a moment."""
    start = time.monotonic()

    with pytest.raises(ExportRefused, match="expected at most 50000 characters in a line, got 2000000"):
        _read(";" * 2_000_000 + "\n", PLAIN)
    with pytest.raises(ExportRefused, match="expected at most 20000 columns, got 40001"):
        _read(";" * 40_000 + "\nA;1\n", PLAIN)
    readings = _read("Label;R\n=1+1;=2\n\x1b[31m;1\x07\n", PLAIN)

    assert _values(readings, "label") == [("=1+1",), ("\x1b[31m",)]
    assert [fault.cell for fault in readings.faults] == ["=2", "1\x07"]
    assert time.monotonic() - start < 20


def test_examples_say_where_readings_differ() -> None:
    """A changed value, a missing reading and an unknown column are named with their place."""
    readings = _read("Label;R\nA;1\nB;2\n", PLAIN)

    assert list(differences(readings, written_csv(readings))) == []
    assert list(differences(readings, "label,signal\nA,1.0\nB,3\n", "e.csv")) == [
        "e.csv, reading 2 (line 3 of the export), signal: expected '3', got '2'. Correct the layout or the table."
    ]
    assert list(differences(readings, "label\nA\n", "e.csv")) == [
        "e.csv: expected 1 readings, got 2. Correct the layout or the table."
    ]
    assert "Did you mean 'label'" in next(differences(readings, "lable\nA\nB\n", "e.csv"))
