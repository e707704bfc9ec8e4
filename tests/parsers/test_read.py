"""Exports of many kinds become readings; what cannot be used is named, and nothing vanishes."""

from __future__ import annotations

import math
import re
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from parsers.errors import ExportRefused
from parsers.layout import parse_layout
from parsers.read import claims, is_finished, read
from parsers.readings import Readings, Role, Texts

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.layout import Layout

HEADER = "Label;Element;R1;R2"
FAILS = "Its series is not evaluated."
SET_DECIMAL = "Correct the export or set decimal or thousands in the layout."
COMPLETE = "The row belongs to no result. Complete the export."


def texts(column: Texts) -> list[str | None]:
    """Return a column of texts, row by row."""
    return [column[row] for row in range(len(column.codes))]


def faults(readings: Readings) -> list[str]:
    """Return the faults as people see them."""
    return [str(fault) for fault in readings.faults]


# --- claims and end marks -------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("wanted", "name", "data", "expected"),
    [
        ("{file: 'FL-*.csv'}", "fl-0412.CSV", b"x", True),
        ("{file: 'FL-*.csv'}", "day 3/FL-0412.csv", b"x", True),
        ("{file: 'FL-*.csv'}", "day 3\\FL-0412.csv", b"x", True),
        ("{file: 'FL-*.csv'}", "FL-0412.txt", b"x", False),
        ("{text: '^Emission log'}", "a.csv", b"\nEmission log 7\n", True),
        ("{text: '^Emission log'}", "a.csv", b"An Emission log\n", False),
        ("{file: 'FL-*', text: '^Emission'}", "FL-1", b"x", False),
        ("{file: 'FL-*', text: '^Emission'}", "XX-1", b"Emission", False),
        ("{file: 'FL-*', text: '^Emission'}", "FL-1", b"a\0b", True),
        ("{text: '^Emission'}", "FL-1", b"a\0b", False),
    ],
)
def test_a_layout_claims_by_name_and_text(
    make_layout: Callable[..., Layout], wanted: str, name: str, data: bytes, expected: bool
) -> None:
    """Both must hold where both are given; one that cannot be decoded is claimed by its name, to be refused aloud."""
    assert claims(make_layout(claims=wanted), name, data) is expected


@pytest.mark.parametrize(
    ("pattern", "data", "expected"),
    [
        (None, b"x", True),
        ("'^End of log'", b"a\nEnd of log\n", True),
        ("'^End of log'", b"a\nEnd of lo", False),
        ("'^End of log'", b"a\0", True),
    ],
)
def test_an_export_is_finished_by_its_end_mark(
    make_layout: Callable[..., Layout], pattern: str | None, data: bytes, expected: bool
) -> None:
    """Without a mark every export counts as finished, and so does one that cannot be decoded."""
    assert is_finished(make_layout(finished=pattern), data) is expected


# --- the way through ------------------------------------------------------------------------------------------------


def test_a_bench_export_from_end_to_end(read_text: Callable[..., Readings]) -> None:
    """Labels, roles, levels, nominals, replicate readings and times come out with their lines."""
    text = (
        f"{HEADER};Date;Time\n"
        "BLK 1;Zn;0.01;0.02;01.02.2026;10:00:00\n"
        "STD 0.5 mg/L;Zn;0.5;0.51;01.02.2026;10:01:00\n"
        "CHK 2;Zn;2.0;2.1;01.02.2026;10:02:00\n"
        " SED-12 ;Zn;1.0;1.1;01.02.2026;10:03:00\n"
        "SED-12  +A1;Zn;2.0;-0.1;01.02.2026;10:04:00\n"
    )
    columns = """{label: Label, analyte: Element, signal: [R1, R2],
      measured_at: {from: [Date, Time], format: '%d.%m.%Y %H:%M:%S'}}"""

    readings = read_text(text, columns=columns)

    assert readings.line.tolist() == [2, 3, 4, 5, 6]
    assert texts(readings.label) == ["BLK 1", "STD 0.5 mg/L", "CHK 2", "SED-12", "SED-12  +A1"]
    assert texts(readings.sample) == ["BLK 1", "STD 0.5 mg/L", "CHK 2", "SED-12", "SED-12"]
    assert [Role(code) for code in readings.role] == [
        Role.BLANK, Role.STANDARD, Role.CHECK_STANDARD, Role.UNSPIKED, Role.SPIKED,
    ]  # fmt: skip
    assert texts(readings.level) == [None, None, None, None, "A1"]
    assert readings.nominal.values[1:3].tolist() == [0.5, 2.0]
    assert [readings.nominal.units[row] for row in (1, 2)] == ["mg/L", None]
    assert readings.signals.tolist()[3:] == [[1.0, 1.1], [2.0, -0.1]]
    assert datetime.fromtimestamp(readings.measured_at[4], UTC).isoformat() == "2026-02-01T10:04:00+00:00"
    assert (readings.faults, readings.problems, readings.lines) == ((), (), 6)


def test_how_every_label_was_understood_is_told(read_text: Callable[..., Readings]) -> None:
    """Each distinct label has its rule, role, sample, level and number of rows."""
    text = f"{HEADER}\nSED-12;Zn;1;2\nSED-12 +A1;Zn;1;2\nSED-12;Cu;1;2\nwhat;Zn;1;2\n"

    uses = read_text(text, unmatched="set aside").labels

    assert [(use.label, use.rule, use.role, use.sample, use.level, use.rows) for use in uses] == [
        ("SED-12", r"^(?P<sample>[A-Z]+-\d+)$", "unspiked", "SED-12", "", 2),
        ("SED-12 +A1", "{sample} +{level}", "spiked", "SED-12", "A1", 1),
        ("what", "", "", "", "", 1),
    ]


@pytest.mark.parametrize(
    "label", ["007", "1E5", "NA", "None", "null", "TRUE", "1.10", "1" * 25, "#1", "nan", "'x", "-"]
)
def test_ids_stay_texts(read_text: Callable[..., Readings], label: str) -> None:
    """Whatever an ID looks like, it is the text that was written; so is an element called Na."""
    readings = read_text(f"{HEADER}\n{label};Na;1;2\n", labels="[{like: '{sample}', role: unspiked}]")

    assert (readings.label[0], readings.sample[0], readings.analyte[0]) == (label, label, "Na")


def test_one_sample_however_its_letters_are_composed(read_text: Callable[..., Readings]) -> None:
    """Blanks of any kind and letters with accents compare as people see them; case does not fold."""
    text = f"{HEADER}\nCafé  1;Zn;1;2\nCafe\u0301\xa01;Zn;1;2\ncafé 1;Zn;1;2\n"

    readings = read_text(text, labels="[{like: '{sample}', role: unspiked}]")

    assert texts(readings.sample) == ["Café 1", "Café 1", "café 1"]


# --- cells ----------------------------------------------------------------------------------------------------------


def test_a_cell_that_cannot_be_read_is_a_fault_of_its_row(read_text: Callable[..., Readings]) -> None:
    """The fault says line, column, expected, got, what follows and what to do; the other rows are read."""
    readings = read_text(f"{HEADER}\nSED-12;Zn;1;0,41\nSED-13;Zn;;2\nSED-14;Zn;3;4\n")

    assert faults(readings) == [
        f"line 2, column 'R2': expected a number with decimal point, got '0,41'. {FAILS} {SET_DECIMAL}",
        "line 3, column 'R1': expected a number, got an empty cell. Its series is not evaluated. Complete the export.",
    ]
    assert [(fault.row, fault.cell, fault.field) for fault in readings.faults] == [
        (0, "0,41", "signal"),
        (1, "", "signal"),
    ]
    assert math.isnan(readings.signals[0, 1])
    assert readings.signals[2].tolist() == [3.0, 4.0]


@pytest.mark.parametrize(
    "cell", ["1,234", "1.2.3", "1 234", "<0.5", "1e400", "inf", "NaN", "1_000", "１２", "12 mg/L", "OVR", "####"]
)
def test_an_unexplained_cell_never_becomes_a_number(read_text: Callable[..., Readings], cell: str) -> None:
    """What the layout does not explain is a fault with the text as it stands, and never a value."""
    readings = read_text(f"{HEADER}\nSED-12;Zn;{cell};2\n")

    assert [fault.cell for fault in readings.faults] == [cell]
    assert math.isnan(readings.signals[0, 0])


def test_explained_cells_of_a_signal_are_faults_with_their_reason(read_text: Callable[..., Readings]) -> None:
    """Below and above the range there is no number to compute with; flags leave the number."""
    cells = r"{missing: ['', n.a.], below: '^<\s*(?P<limit>[\d.]+)$', above: [OVR], flags: '[*!]'}"
    readings = read_text(f"{HEADER}\nSED-12;Zn;< 0.02;1*\nSED-13;Zn;OVR;n.a.\n", cells=cells)

    assert [fault.sentence.split(". Its")[0] for fault in readings.faults] == [
        "expected a number, got '< 0.02', which means below 0.02",
        "expected a number, got 'OVR', which means above the instrument's range",
        "expected a number, got 'n.a.', which means missing",
    ]
    assert readings.signals[0, 1] == 1.0


def test_optional_replicates_may_be_empty_but_not_all_of_them(read_text: Callable[..., Readings]) -> None:
    """A solution read twice instead of three times is fine where the layout says so; one never read is a fault."""
    columns = "{label: Label, analyte: Element, signal: {from: [R1, R2], optional: true}}"

    readings = read_text(f"{HEADER}\nSED-12;Zn;1;\nSED-13;Zn;;\nSED-14;Zn;x;\n", columns=columns)

    assert [(fault.line, fault.sentence.split(". ")[0]) for fault in readings.faults] == [
        (3, "expected at least one reading, got empty cells"),
        (4, "expected a number with decimal point, got 'x'"),
    ]


def test_a_mean_with_its_statistics(read_text: Callable[..., Readings]) -> None:
    """A statistic that says nothing, or cannot be read, does not spoil the signal beside it."""
    text = "Label;Element;Mean;SD;n\nSED-12;Zn;1;0.1;3\nSED-13;Zn;1;;3\nSED-14;Zn;1;<0.01;3\nSED-15;Zn;1;high;3\n"
    columns = "{label: Label, analyte: Element, signal: Mean, signal_sd: SD, readings: n}"

    readings = read_text(text, columns=columns, cells="{below: '^<'}")

    assert readings.signal_sd.tolist()[:1] == [0.1]
    assert readings.readings.tolist() == [3.0] * 4
    assert np.isnan(readings.signal_sd[1:]).all()
    assert readings.faults == ()


def test_decimal_commas(read_text: Callable[..., Readings]) -> None:
    """With a declared decimal comma a point is a fault, not a thousands mark."""
    readings = read_text(f"{HEADER}\nSTD 0,5;Zn;1,5;1.234\n", decimal="','")

    assert readings.signals[0, 0] == 1.5
    assert readings.nominal.values.tolist() == [0.5]
    assert "got '1.234', which may mean two numbers" in faults(readings)[0]


@pytest.mark.parametrize(
    ("forms", "cell", "expected"),
    [
        ("'%d.%m.%Y %H:%M'", "03.04.2026 14:05", "2026-04-03T14:05:00"),
        ("['%m/%d/%Y %I:%M:%S %p', '%d.%m.%Y']", "4/3/2026  2:05:06 PM", "2026-04-03T14:05:06"),
        ("['%m/%d/%Y %I:%M:%S %p', '%d.%m.%Y']", "03.04.2026", "2026-04-03T00:00:00"),
        ("'%Y-%m-%dT%H:%M:%S'", "2026-04-03T14:05:06", "2026-04-03T14:05:06"),
    ],
)
def test_times_in_their_declared_forms(
    read_text: Callable[..., Readings], forms: str, cell: str, expected: str
) -> None:
    """A time is read by the first form that fits, as the wall clock that was written."""
    columns = f"{{label: Label, analyte: Element, signal: R1, measured_at: {{from: T, format: {forms}}}}}"

    readings = read_text(f"Label;Element;R1;T\nSED-12;Zn;1;{cell}\n", columns=columns)

    assert datetime.fromtimestamp(readings.measured_at[0], UTC).replace(tzinfo=None).isoformat() == expected


def test_a_time_that_fits_no_form_is_a_fault_and_a_missing_one_is_absent(read_text: Callable[..., Readings]) -> None:
    """The thirteenth month is named with the forms that were tried; half a joined time is a fault as well."""
    columns = "{label: Label, analyte: Element, signal: R1, measured_at: {from: [D, T], format: '%d.%m.%Y %H:%M'}}"
    text = "Label;Element;R1;D;T\nSED-12;Zn;1;03.13.2026;10:00\nSED-13;Zn;1;;\nSED-14;Zn;1;03.04.2026;\n"

    readings = read_text(text, columns=columns)

    assert [(fault.line, fault.cell) for fault in readings.faults] == [(2, "03.13.2026 10:00"), (4, "03.04.2026")]
    assert "expected a time in the form '%d.%m.%Y %H:%M', got '03.13.2026 10:00'" in faults(readings)[0]
    assert [str(moment) for moment in readings.measured_at.tolist()] == ["nan"] * 3


# --- roles and quantities -------------------------------------------------------------------------------------------

ADDED = "Label;Element;R1;Std\n"
BY_ADDITION = "{label: Label, analyte: Element, signal: R1, spike_volume: {from: Std, unit: mL}}"


def test_the_addition_tells_spiked_from_unspiked(read_text: Callable[..., Readings]) -> None:
    """Without label rules the label is the sample; zero is unspiked, more is spiked, and the unit is kept."""
    text = f"{ADDED}RIV-17;Zn;1;0\nRIV-17;Zn;2;5.0\n"

    readings = read_text(text, columns=BY_ADDITION, labels=None)

    assert [Role(code) for code in readings.role] == [Role.UNSPIKED, Role.SPIKED]
    assert texts(readings.sample) == ["RIV-17", "RIV-17"]
    assert (readings.spike_volume.values.tolist(), readings.spike_volume.units[1]) == ([0.0, 5.0], "mL")
    assert [use.role for use in readings.labels] == ["by row"]


def test_a_missing_addition_is_never_zero(read_text: Callable[..., Readings]) -> None:
    """A row without addition is a fault of its row, and never an unspiked solution; one unreadable has one fault."""
    text = f"{ADDED}RIV-17;Zn;1;0\nRIV-17;Zn;2;\nRIV-18;Zn;2;much\n"

    readings = read_text(text, columns=BY_ADDITION, labels=None)

    assert [(fault.line, fault.column, fault.field) for fault in readings.faults] == [
        (3, "Std", "role"),
        (4, "Std", "spike_volume"),
    ]
    assert "expected an addition, got an empty cell" in faults(readings)[0]
    assert [Role(code) for code in readings.role[1:]] == [Role.SPIKED, Role.SPIKED]


def test_a_role_column_with_words_and_codes(read_text: Callable[..., Readings]) -> None:
    """Codes are mapped to roles; an unknown word is a fault; an empty cell leaves it to the addition."""
    columns = """{label: Label, analyte: Element, signal: R1, added: Std,
      role: {from: T, map: {S: standard, '0': unspiked, B: blank}}}"""
    rows = ["x;Zn;1;;S", "SED-1;Zn;1;;0", "SED-1;Zn;1;;spiked", "SED-1;Zn;1;;Q", "SED-1;Zn;1;2;", "y;Zn;1;;B"]
    text = "\n".join(["Label;Element;R1;Std;T", *rows])

    readings = read_text(text, columns=columns, labels=None)

    assert [Role(code).word for code in readings.role] == [
        "standard",
        "unspiked",
        "spiked",
        "spiked",
        "spiked",
        "blank",
    ]
    assert [(fault.line, fault.cell) for fault in readings.faults] == [(5, "Q")]
    assert "Explain the word in layouts/flame.yaml, line 5: columns.role.map" in faults(readings)[0]


def test_a_label_rule_overrules_the_role_column(read_text: Callable[..., Readings]) -> None:
    """What the label says goes before what the column says, whatever the column says."""
    columns = "{label: Label, analyte: Element, signal: R1, role: T}"

    readings = read_text("Label;Element;R1;T\nBLK 1;Zn;1;spiked\nBLK 2;Zn;1;?\n", columns=columns)

    assert [Role(code) for code in readings.role] == [Role.BLANK, Role.BLANK]
    assert readings.faults == ()


def test_level_and_nominal_say_the_role_where_nothing_else_does(read_text: Callable[..., Readings]) -> None:
    """A rule without role means spiked where it captures a level, and standard where it captures a nominal."""
    labels = "[{like: 'STD {nominal}'}, {like: '{sample} +{level}'}, {like: '{sample}'}]"

    readings = read_text(f"{HEADER}\nSTD 1;Zn;1;2\nSED-1 +A1;Zn;1;2\nSED-1;Zn;1;2\n", labels=labels)

    assert [Role(code) for code in readings.role] == [Role.STANDARD, Role.SPIKED, Role.SPIKED]
    assert "line 4, column 'Label': nothing says whether this is unspiked, spiked or a standard." in faults(readings)[0]


def test_quantities_in_labels_carry_their_units(read_text: Callable[..., Readings]) -> None:
    """Number and unit of a label are parted; a volume without unit and a word are faults of their rows."""
    labels = "[{like: '{sample} +{spike_volume}', role: spiked}, {like: 'STD {nominal}', role: standard}]"
    text = f"{HEADER}\nSED-1 +5 mL;Zn;1;2\nSED-1 +5;Zn;1;2\nSTD high;Zn;1;2\n"

    readings = read_text(text, labels=labels)

    assert (readings.spike_volume.values[0], readings.spike_volume.units[0]) == (5.0, "mL")
    assert [(fault.line, fault.cell, fault.field) for fault in readings.faults] == [
        (3, "5", "spike_volume"), (4, "high", "nominal"),
    ]  # fmt: skip


def test_other_fields_from_columns_and_constants(read_text: Callable[..., Readings]) -> None:
    """Numbers, texts, words mapped, predilutions and constants each find their place."""
    text = "Label;Line;R1;Dil;Pos;Rep;By\nSED-12;Zn206;1;1+9;3;2;A. Bee\nSTD 1;Zn213;1;;4;1;\n"
    columns = """{label: Label, analyte: {from: Line, map: {Zn206: Zn}}, channel: Line, signal: R1, predilution: Dil,
      position: Pos, replicate: Rep, analyst: By, aliquot: {constant: 10, unit: mL}, readings: {constant: 3},
      stock: {constant: ZN-5}}"""

    readings = read_text(text, columns=columns)

    assert texts(readings.analyte) == ["Zn", "Zn213"]
    assert texts(readings.channel) == ["Zn206", "Zn213"]
    assert readings.predilution.tolist()[0] == 10.0
    assert (readings.position.tolist(), readings.replicate.tolist()) == ([3.0, 4.0], [2.0, 1.0])
    assert texts(readings.analyst) == ["A. Bee", None]
    assert (readings.aliquot.values.tolist(), readings.aliquot.units[0]) == ([10.0, 10.0], "mL")
    assert readings.readings.tolist() == [3.0, 3.0]
    assert texts(readings.stock) == ["ZN-5", "ZN-5"]
    assert readings.faults == ()


def test_a_missing_volume_of_a_sample_is_a_fault_of_a_standard_not(read_text: Callable[..., Readings]) -> None:
    """A silent default would change a sample's result, so its empty aliquot or predilution is named."""
    text = "Label;Element;R1;V;Dil\nSED-12;Zn;1;;\nSTD 1;Zn;1;;\nSED-13;Zn;1;10;1 to 2\n"
    columns = """{label: Label, analyte: Element, signal: R1, aliquot: {from: V, unit: mL}, predilution: %s}"""

    named = read_text(text, columns=columns % "Dil").faults
    optional = read_text(text, columns=columns % "{from: Dil, optional: true}").faults

    assert [(fault.line, fault.field) for fault in named] == [(2, "aliquot"), (2, "predilution"), (4, "predilution")]
    assert [(fault.line, fault.field) for fault in optional] == [(2, "aliquot"), (4, "predilution")]


def test_an_analyte_that_the_label_says(read_text: Callable[..., Readings]) -> None:
    """A group of every rule may be the analyte; a label without it is a row without analyte."""
    labels = r"[{pattern: '^(?P<analyte>Zn|Cu)? ?(?P<sample>SED-\d+)$', role: unspiked}]"

    readings = read_text("Label;R1\nZn SED-1;5\nSED-2;6\n", columns="{label: Label, signal: R1}", labels=labels)

    assert texts(readings.analyte) == ["Zn"]
    assert [str(problem) for problem in readings.problems] == [
        f"line 3, column 'Label': expected an analyte, got an empty cell in 'SED-2;6'. {COMPLETE}"
    ]


# --- rows that belong to nothing ------------------------------------------------------------------------------------


def test_a_row_without_sample_id_is_named_and_never_dropped(read_text: Callable[..., Readings]) -> None:
    """A blank label is a problem with its row; a row in which nothing is filled is only set aside."""
    readings = read_text(f"{HEADER}\n;Zn;1;2\nSED-12;Zn;1;2\n ; ;;\n")

    assert readings.line.tolist() == [3]
    assert [str(problem) for problem in readings.problems] == [
        f"line 2, column 'Label': expected a sample ID, got an empty cell in ';Zn;1;2'. {COMPLETE}"
    ]
    assert [(aside.line, aside.reason) for aside in readings.set_aside[1:]] == [
        (2, "row without sample ID"), (4, "no cell is filled"),
    ]  # fmt: skip


def test_a_blank_sample_is_a_problem_for_samples_only(read_text: Callable[..., Readings]) -> None:
    """Where the sample has its own column, blanks and standards may leave it empty and go by their label."""
    columns = "{label: Label, sample: ID, analyte: Element, signal: R1}"
    labels = "[{like: 'BLK*', role: blank}, {like: 'spiked*', role: spiked}, {like: '*', role: unspiked}]"
    text = "Label;ID;Element;R1\nBLK 1;;Zn;1\nplain;SED-1;Zn;1\nspiked;;Zn;2\n"

    readings = read_text(text, columns=columns, labels=labels)

    assert texts(readings.sample) == ["BLK 1", "SED-1"]
    assert [problem.line for problem in readings.problems] == [4]


def test_labels_without_rule_refuse_the_export_all_at_once(read_text: Callable[..., Readings]) -> None:
    """Every label that no rule explains is named with its lines."""
    text = f"{HEADER}\nSED-12;Zn;1;2\nwhat;Zn;1;2\nwho;Zn;1;2\nwhat;Zn;1;2\nwhat;Zn;1;2\n"

    with pytest.raises(
        ExportRefused,
        match=re.escape("FL-0412.csv, line 3, column 'Label': expected every label to match a rule, got "
                        "'what' (line 3, 5-6), 'who' (line 4). Nothing of this export is read."),
    ):  # fmt: skip
        read_text(text)


def test_very_many_labels_without_rule_are_counted(read_text: Callable[..., Readings]) -> None:
    """An error names a hundred labels and says how many more there are."""
    text = f"{HEADER}\n" + "".join(f"what {number};Zn;1;2\n" for number in range(130))

    with pytest.raises(ExportRefused, match=r"'what 99' \(line 101\) and 30 more"):
        read_text(text)


def test_labels_without_rule_may_be_set_aside(read_text: Callable[..., Readings]) -> None:
    """Where the layout says so, such rows are set aside with their reason; if no row remains, the export is refused."""
    readings = read_text(f"{HEADER}\nSED-12;Zn;1;2\nwhat;Zn;1;2\n", unmatched="set aside")

    assert [(aside.line, aside.reason) for aside in readings.set_aside[1:]] == [(3, "label matches no rule")]
    with pytest.raises(
        ExportRefused, match=r"expected readings, got only rows that were set aside.*label matches no rule"
    ):
        read_text(f"{HEADER}\nwhat;Zn;1;2\n", unmatched="set aside")


@pytest.mark.parametrize("text", [f"{HEADER}\n", f"{HEADER}\n\n", f"{HEADER}\nEnd\nSED-12;Zn;1;2\n"])
def test_an_export_without_rows_is_no_success(read_text: Callable[..., Readings], text: str) -> None:
    """A header alone is refused."""
    with pytest.raises(ExportRefused, match="expected rows under the header, got none"):
        read_text(text, until="'^End'")


def test_the_sample_may_be_the_only_name(read_text: Callable[..., Readings]) -> None:
    """Without a label column the sample ID is the label; without either, a heading names the sample of all rows."""
    by_column = read_text(
        "ID;R1;A\nSED-1;5;0\n", columns="{sample: ID, analyte: {constant: Zn}, signal: R1, added: A}", labels=None
    )
    by_heading = read_text(
        "Sample: RIV-17\nR1;A\n5;0\n6;1\n",
        columns="{analyte: {constant: Zn}, signal: R1, added: A}", labels=None, header="'^R1'",
        heading="{sample: '^Sample: (.+)$'}",
    )  # fmt: skip
    either = read_text("Label;ID;R1;A\n;SED-1;5;0\nx;SED-1;6;1\n", labels=None,
                       columns="{label: Label, sample: ID, analyte: {constant: Zn}, signal: R1, added: A}")  # fmt: skip

    assert (texts(by_column.label), texts(by_column.sample)) == (["SED-1"], ["SED-1"])
    assert (texts(by_heading.label), texts(by_heading.sample)) == (["RIV-17"] * 2, ["RIV-17"] * 2)
    assert (texts(either.label), texts(either.sample)) == (["SED-1", "x"], ["SED-1", "SED-1"])


# --- wide tables ----------------------------------------------------------------------------------------------------


def test_a_standard_of_a_wide_table_need_not_hold_every_analyte(read_text: Callable[..., Readings]) -> None:
    """A missing cell of a standard is no reading of it; of a sample it is a fault; both are named."""
    text = "Label;Zn;Cu\nSTD 1;0.5;\nSED-12;;2\nBLK;;\nSED-12 +A1;x;3\n"

    readings = read_text(text, columns="{label: Label}", unfold="{pattern: '^(?P<analyte>[A-Z][a-z]?)$'}")

    assert list(zip(readings.line.tolist(), texts(readings.analyte), strict=True)) == [
        (2, "Zn"), (3, "Zn"), (3, "Cu"), (5, "Zn"), (5, "Cu"),
    ]  # fmt: skip
    assert [(fault.row, fault.line, fault.column, fault.cell) for fault in readings.faults] == [
        (1, 3, "Zn", ""), (3, 5, "Zn", "x"),
    ]  # fmt: skip
    assert [(aside.line, aside.reason) for aside in readings.set_aside if aside.line in (2, 4)] == [
        (2, "no reading in column 'Cu': the standard does not hold it"),
        (4, "no reading in column 'Zn': the blank does not hold it"),
        (4, "no reading in column 'Cu': the blank does not hold it"),
    ]


def test_a_fault_of_a_wide_row_is_one_of_each_of_its_readings(read_text: Callable[..., Readings]) -> None:
    """An aliquot that cannot be read spoils every analyte of its vial."""
    readings = read_text("Label;V;Zn;Cu\nSED-12;ten;1;2\n", columns="{label: Label, aliquot: {from: V, unit: mL}}",
                         unfold="{pattern: '^(?P<analyte>Zn|Cu)$'}")  # fmt: skip

    assert [(fault.row, fault.field) for fault in readings.faults] == [(0, "aliquot"), (1, "aliquot")]


# --- nothing vanishes -----------------------------------------------------------------------------------------------

LINES = ["SED-12;Zn;1.5;1.6", "SED-12 +A1;Zn;x;", "STD 1;Zn;;1", "what;Zn;1;2", ";Zn;1;2", ";;;", "", "Page 3", HEADER,
         "End of log", 'SED-12;"Z\nn";1;2', 'BLK;"Zn";"1\n\n2";3', "Averages", "SED-13;;1;2"]  # fmt: skip


def reading_of(data: bytes, layout: Layout) -> Readings | str:
    """Return the readings of an export, or why it is refused."""
    try:
        return read(data, layout, "FL-0412.csv")
    except ExportRefused as refused:
        return str(refused)


@given(st.lists(st.sampled_from(LINES), max_size=12), st.sampled_from(["\n", "\r\n", "\r"]), st.booleans())
@settings(max_examples=300, deadline=None)
def test_every_line_is_read_or_set_aside(
    make_layout: Callable[..., Layout], lines: list[str], newline: str, wide: bool
) -> None:
    """Each physical line is the first line of a reading, or stands in `set_aside` with a reason."""
    text = "\n".join(["Log", HEADER, *lines, "SED-99;Zn;1;2"])
    parts = {
        "header": "'^Label;'",
        "skip": "'^Page'",
        "finished": "'^End'",
        "until": "'^Averages'",
        "unmatched": "set aside",
    }
    if wide:
        parts |= {"columns": "{label: Label, analyte: Element}", "unfold": r"{pattern: '^(?P<channel>R\d)$'}"}

    readings = reading_of(text.replace("\n", newline).encode(), make_layout(**parts))
    if isinstance(readings, str):
        assert re.search("expected (rows|readings)", readings)
        return

    read_lines = set(readings.line.tolist())
    aside = [entry.line for entry in readings.set_aside]
    assert read_lines | set(aside) == set(range(1, text.count("\n") + 2))
    assert all(entry.reason for entry in readings.set_aside)
    assert wide or (not read_lines & set(aside) and len(set(aside)) == len(aside))
    assert {problem.line for problem in readings.problems} <= set(aside)


CENSORED = """\
layout: censored
claims: {file: '*'}
separator: ';'
columns: {label: Label, analyte: {constant: Zn}, signal: %s}
labels:
  - {like: 'BLK*', role: blank}
  - {like: '{sample}', role: unspiked}
cells: {below: '^<'}
"""


def test_a_blank_in_which_nothing_was_found_is_no_fault():
    """A blank below the instrument's range is set aside with its reason; a sample below it fails its series as ever."""
    layout = parse_layout(CENSORED % "R1", "censored.yaml")

    found = read(b"Label;R1\nBLK 1;<0.02\nBLK 2;0.03\nSED-12;<0.02\n", layout, "X-1.csv")

    assert [(aside.line, aside.reason) for aside in found.set_aside if aside.line > 1] == [
        (2, "blank below the instrument's range: nothing was found")
    ]
    assert [fault.line for fault in found.faults] == [4]
    assert found.line.tolist() == [3, 4]


def test_a_blank_of_which_one_replicate_was_lost_stays_a_fault():
    """Where a replicate of a blank is a number and another is below the range, the blank is not thrown away."""
    layout = parse_layout(CENSORED % "[R1, R2]", "censored.yaml")

    found = read(b"Label;R1;R2\nBLK 1;<0.02;0.5\nBLK 2;<0.02;<0.02\nSED-12;1;1\n", layout, "X-1.csv")

    assert [fault.line for fault in found.faults] == [2]
    assert found.line.tolist() == [2, 4]
