"""Fields find their columns by exact name, or the export is refused with the names that there are."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest

from parsers.errors import ExportRefused

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.readings import Readings

ROW = "SED-12;Zn;1;2"
WIDE = r"""{pattern: '^(?P<analyte>[A-Z][a-z]?) (?P<channel>\d+\.\d+) (?P<field>Mean|SD)$',
  fields: {Mean: signal, SD: signal_sd}, except: '^In'}"""


@pytest.mark.parametrize(
    ("header", "columns", "expected"),
    [
        ("Lable;Element;R1;R2", None, "line 1: expected the columns 'Label' (for label), and the header does not have"),
        (
            "Lable;Element;R1;R2",
            None,
            "it holds 'Lable', 'Element', 'R1', 'R2'. Nothing of this export is read. Did you",
        ),
        ("label;Element;R1;R2", None, "expected the columns 'Label' (for label)"),
        ("Label;Element;R1;X", None, "expected the columns 'R2' (for signal)"),
        ("A;B;C;D", None, "'Label' (for label), 'Element' (for analyte), 'R1' (for signal), 'R2'"),
        (
            "Label;Element;R1;R1",
            "{label: Label, analyte: Element, signal: R1}",
            "line 1, column 'R1': expected one column of this name for signal, got 2",
        ),
        (
            "Label;X;R1;R2",
            "{label: Label, analyte: [Element, Analyte], signal: R1}",
            "'Element or Analyte' (for analyte)",
        ),
        (
            "Label;Element;X;Y",
            "{label: Label, analyte: Element, signal: {from: [R1, R2], optional: true}}",
            "'R1' (for signal)",
        ),
    ],
)
def test_missing_and_ambiguous_columns_refuse_the_export(
    read_text: Callable[..., Readings], header: str, columns: str | None, expected: str
) -> None:
    """All missing columns are named at once, with the header and a close name."""
    parts = {"columns": columns} if columns else {}

    with pytest.raises(ExportRefused, match=re.escape(expected)):
        read_text(f"{header}\n{ROW}\n", **parts)


def test_equal_names_are_fine_where_nobody_uses_them(read_text: Callable[..., Readings]) -> None:
    """Nine columns of one name hurt only the layout that maps it."""
    assert len(read_text(f"Label;Element;R1;R2;x;x;;\n{ROW};;;;\n")) == 1


def test_the_first_alternative_that_is_there_is_taken(read_text: Callable[..., Readings]) -> None:
    """A list of names for a field other than the signal holds alternatives."""
    columns = "{label: [Name, Label], analyte: [Analyte, Element, Label], signal: R1}"

    assert read_text(f"Label;Element;R1;R2\n{ROW}\n", columns=columns).analyte[0] == "Zn"


def test_names_are_compared_with_folded_blanks(read_text: Callable[..., Readings]) -> None:
    """Two blanks in the export and one in the layout are the same name."""
    readings = read_text(
        f" Sample\xa0 ID ;Element;R1;R2\n{ROW}\n", columns="{label: 'Sample ID', analyte: Element, signal: R1}"
    )

    assert readings.columns[0].header == "Sample ID"


def test_every_column_says_what_became_of_it(read_text: Callable[..., Readings]) -> None:
    """Columns that feed fields name them; the others feed none."""
    columns = "{label: Label, sample: Label, analyte: Element, signal: R1}"
    readings = read_text(f"Label;Element;R1;R2;Note\n{ROW};x\n", columns=columns,
                         labels="[{like: '*', role: unspiked}]")  # fmt: skip

    assert [(use.header, use.fields) for use in readings.columns] == [
        ("Label", ("label", "sample")), ("Element", ("analyte",)), ("R1", ("signal",)), ("R2", ()), ("Note", ()),
    ]  # fmt: skip


def test_optional_columns_may_be_absent(read_text: Callable[..., Readings]) -> None:
    """An optional column that is not there leaves its field empty; half a time is no time."""
    columns = """{label: Label, analyte: Element, signal: {from: [R1, R2, R3], optional: true},
      comment: {from: Note, optional: true}, measured_at: {from: [R1, Time], format: '%d.%m.%Y', optional: true}}"""

    readings = read_text(f"Label;Element;R1;R2\n{ROW}\n", columns=columns)

    assert readings.signals.tolist() == [[1.0, 2.0]]
    assert readings.comment[0] is None
    assert str(readings.measured_at[0]) == "nan"


def test_a_wide_table_becomes_rows(read_text: Callable[..., Readings]) -> None:
    """Headers that match become analyte, channel and field; each row gives one reading for each of them."""
    text = "Label;Zn 213.8 Mean;Zn 213.8 SD;Cu 324.7 Mean;In 451.9 Mean\nSED-12;1;0.1;2;9\nSED-12 +A1;3;0.3;4;9\n"

    readings = read_text(text, columns="{label: Label}", unfold=WIDE)

    rows = [
        (
            readings.line[row],
            readings.label[row],
            readings.analyte[row],
            readings.channel[row],
            readings.signals[row, 0],
        )
        for row in range(len(readings))
    ]
    assert rows == [
        (2, "SED-12", "Zn", "213.8", 1.0), (2, "SED-12", "Cu", "324.7", 2.0),
        (3, "SED-12 +A1", "Zn", "213.8", 3.0), (3, "SED-12 +A1", "Cu", "324.7", 4.0),
    ]  # fmt: skip
    assert [str(sd) for sd in readings.signal_sd.tolist()] == ["0.1", "nan", "0.3", "nan"]
    assert readings.columns[2].fields == ("signal_sd", "analyte", "channel")
    assert readings.columns[4].fields == ()


@pytest.mark.parametrize(
    ("header", "unfold", "expected"),
    [
        (
            "Label;A;B",
            "{pattern: '^(?P<analyte>Zn)$'}",
            "no column matches unfold.pattern '^(?P<analyte>Zn)$'; the header holds",
        ),
        (
            "Label;Zn Mean;Zn Max",
            "{pattern: '^(?P<analyte>Zn) (?P<field>.+)$', fields: {Mean: signal}}",
            "column 'Zn Max': expected one of 'Mean' as field, got 'Max'",
        ),
        (
            "Label;Zn 1;Zn 2",
            "{pattern: '^(?P<analyte>Zn)'}",
            "column 'Zn 2': the column 'Zn 1' is the signal of the same analyte",
        ),
        (
            "Label;Zn SD;x",
            "{pattern: '^(?P<analyte>Zn) (?P<field>.+)$', fields: {Mean: signal, SD: signal_sd}}",
            "column 'Zn SD': no column holds the signal that belongs to it",
        ),
        ("Label;Zn;x", "{pattern: '^(?P<analyte>Zn)?'}", "column 'x': unfold.pattern finds no analyte in this header"),
    ],
)
def test_wide_tables_that_do_not_unfold_are_refused(
    read_text: Callable[..., Readings], header: str, unfold: str, expected: str
) -> None:
    """Unexplained words, equal columns, statistics without signal are never merged or dropped in silence."""
    with pytest.raises(ExportRefused, match=re.escape(expected)):
        read_text(f"{header}\nSED-12;1;2\n", columns="{label: Label}", unfold=unfold)


def test_analyte_of_a_wide_table_may_come_from_elsewhere(read_text: Callable[..., Readings]) -> None:
    """Where headers say only the channel, the analyte comes from its own column."""
    readings = read_text("Label;Element;213.8;206.2\nSED-12;Zn;1;2\n", columns="{label: Label, analyte: Element}",
                         unfold="{pattern: '^(?P<channel>\\d+\\.\\d)$'}")  # fmt: skip

    assert [(readings.analyte[row], readings.channel[row]) for row in (0, 1)] == [("Zn", "213.8"), ("Zn", "206.2")]


def test_headings_feed_fields_or_are_kept(read_text: Callable[..., Readings]) -> None:
    """A value above the table is carried to every row; one that is no field is kept by its name."""
    above = "Batch:  B-7 \nTray: 4\nDilution: 1+9\nAliquot: 10 mL\nBatch: B-8\n"
    text = f"{above}Label;Element;R1;R2\nSED-12;Zn;1;2\nSED-13;Zn;1;2\n"
    heading = (
        r"{batch: '^Batch:(.+)$', tray: '^Tray: (\d+)', predilution: '^Dilution: (.+)', aliquot: '^Aliquot: (.+)'}"
    )

    readings = read_text(text, header="'^Label'", heading=heading)

    assert readings.heading == {"batch": "B-7", "tray": "4", "predilution": "1+9", "aliquot": "10 mL"}
    assert [readings.batch[row] for row in (0, 1)] == ["B-7", "B-7"]
    assert readings.predilution.tolist() == [10.0, 10.0]
    assert (readings.aliquot.values.tolist(), readings.aliquot.units[1]) == ([10.0, 10.0], "mL")


@pytest.mark.parametrize(
    ("preamble", "heading", "expected"),
    [
        ("x", r"{batch: '^Batch: (.+)$'}", "expected the heading batch ('^Batch: (.+)$') outside the table, got none"),
        ("Batch:  ", r"{batch: '^Batch:(.*)$'}", "expected the heading batch"),
        (
            "Dilution: 1 to 9",
            "{predilution: '^Dilution: (.+)$'}",
            "line 1, column 'heading predilution': expected a predilution",
        ),
        (
            "Aliquot: 10",
            "{aliquot: '^Aliquot: (.+)$'}",
            "line 1, column 'heading aliquot': expected a volume with its unit, got '10'",
        ),
    ],
)
def test_headings_that_are_missing_or_unreadable_refuse_the_export(
    read_text: Callable[..., Readings], preamble: str, heading: str, expected: str
) -> None:
    """What would hold for all rows must be there and be readable."""
    with pytest.raises(ExportRefused, match=re.escape(expected)):
        read_text(
            f"{preamble}\nLabel;Element;R1;R2\nBatch: late\n{ROW}\n",
            header="'^Label'",
            heading=heading,
            skip="'^Batch: late'",
        )
