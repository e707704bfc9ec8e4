"""A layout is read whole, or every fault of it is named with line, key and remedy."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest
from hypothesis import given
from hypothesis import strategies as st

from parsers.document import DocumentInvalid
from parsers.layout import parse_layout
from parsers.patterns import literal_start

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.layout import Layout

COLUMNS = "{label: Label, analyte: Element, signal: [R1, R2]}"


def test_defaults_are_the_written_ones(make_layout: Callable[..., Layout]) -> None:
    """What a layout leaves out has its stated default."""
    layout = make_layout()

    assert layout.encodings == ("utf-8", "cp1252")
    assert (layout.header, layout.until, layout.finished, layout.skip) == (None, None, None, ())
    assert (layout.decimal, layout.thousands, layout.unmatched) == (".", "", "refuse")
    assert layout.cells.missing == ("",)


@pytest.mark.parametrize(
    ("written", "meant"), [("tab", "\t"), ("blanks", " "), ("','", ","), ("'|'", "|"), ('"\\t"', "\t")]
)
def test_separators_are_characters_or_words(make_layout: Callable[..., Layout], written: str, meant: str) -> None:
    """A separator is one character, or the word for one that cannot be seen."""
    assert make_layout(separator=written).separator == meant


def test_settings_of_a_layout_are_kept_unread_with_their_lines(make_layout: Callable[..., Layout]) -> None:
    """The settings side finds its own keys and where they stand."""
    layout = make_layout(bench="{aliquot: 10 mL}", report="additions")

    assert layout.settings.values == {"bench": {"aliquot": "10 mL"}, "report": "additions"}
    assert layout.settings.line(("report",)) == layout.document.line(("bench",)) + 1


@pytest.mark.parametrize(
    ("parts", "expected"),
    [
        ({"separator": None}, "line 1, separator: the key 'separator' is missing"),
        (
            {"separator": "';;'"},
            "separator: expected one character, 'tab', 'blanks' or 'wide blanks', got ';;'.*single quotes: ';'",
        ),
        ({"separator": "''"}, "separator: expected one character, 'tab', 'blanks' or 'wide blanks', got nothing"),
        ({"sepparator": "';'"}, "sepparator: unknown key 'sepparator'. .*Did you mean 'separator'"),
        ({"widths": "[12, 8]"}, "widths: separator says already where the columns end"),
        ({"claims": "{}"}, "claims: expected 'file', 'text' or both, got neither"),
        ({"encodings": "[utf-9]"}, r"encodings\[1\]: expected the name of an encoding, got 'utf-9'"),
        ({"encodings": "[]"}, "encodings: expected at least 1 entries, got a list"),
        (
            {"header": "'^Label;('"},
            "header: expected a search pattern, got '.Label;.', which breaks at character 8: missing",
        ),
        ({"until": "''"}, "until: expected a search pattern, got nothing"),
        ({"until": "[a]"}, "until: expected a search pattern, got a list"),
        ({"skip": "[{a: b}]"}, r"skip\[1\]: expected a search pattern, got keys and values"),
        ({"decimal": "';'"}, "decimal: expected one of '.', ',', got ';'"),
        ({"decimal": "','", "thousands": "','"}, "thousands: ',' is the decimal mark as well"),
        ({"separator": "blanks", "thousands": "' '"}, "thousands: a blank parts the columns already"),
        ({"unmatched": "ignore"}, "unmatched: expected one of 'refuse', 'set aside', got 'ignore'"),
        (
            {"heading": r"{batch: '^Batch: .*'}"},
            "heading.batch: expected one group in brackets around the value, got 0",
        ),
        ({"heading": "{signal: '^S: (.*)'}"}, "heading.signal: 'signal' cannot be the same for every row"),
        ({"heading": "{analyte: '^E: (.*)'}"}, "heading.analyte: 'analyte' has another source as well"),
        ({"columns": "x"}, "columns: expected keys and values, got 'x'"),
        ({"columns": "{lable: Label}"}, "columns.lable: unknown key 'lable'.*Did you mean 'label'"),
        ({"columns": "{label: Label, analyte: Element}"}, "columns: expected a source for 'signal', got none"),
        (
            {"columns": "{label: Label, signal: R1}"},
            "columns: expected a source for 'analyte', got none.*analyte: {constant: Zn}",
        ),
        ({"columns": "{analyte: E, signal: R}", "labels": None}, "expected a source for 'label' or 'sample', got none"),
        (
            {"columns": "{sample: S, analyte: E, signal: R}"},
            "labels: label rules stand here, but no column is the label",
        ),
        ({"columns": COLUMNS, "labels": None}, "nothing says which vials are unspiked, spiked or standards"),
        (
            {"columns": "{label: '', analyte: E, signal: R}"},
            "columns.label: expected a column name or a list of them, got nothing",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: []}"},
            "columns.signal: expected a column name or a list of them, got a list",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: [R1, {from: R2, a: b}]}"},
            r"columns.signal\[2\].a: unknown key 'a'",
        ),
        (
            {"columns": "{label: L, analyte: {}, signal: R}"},
            "columns.analyte: expected 'from' or 'constant' in it, got neither",
        ),
        (
            {"columns": "{label: L, analyte: {from: E, unti: x}, signal: R}"},
            "columns.analyte.unti: unknown key 'unti'.*'unit'",
        ),
        ({"columns": "{label: L, analyte: {from: E, constant: Zn}, signal: R}"}, "a constant needs no 'from'"),
        (
            {"columns": "{label: L, analyte: {from: E, unit: mL}, signal: R}"},
            "columns.analyte.unit: 'analyte' has no unit",
        ),
        (
            {"columns": "{label: L, analyte: {from: E, format: x}, signal: R}"},
            "columns.analyte.format: 'analyte' is no time",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: {from: R, map: {a: b}}}"},
            "columns.signal.map: 'signal' is no text",
        ),
        (
            {"columns": "{label: L, analyte: {constant: ' '}, signal: R}"},
            "columns.analyte.constant: expected a text, got nothing",
        ),
        ({"columns": "{label: {constant: x}, analyte: E, signal: R}"}, "'label' cannot be the same for every row"),
        (
            {"columns": "{label: L, analyte: E, signal: R, aliquot: V}"},
            "columns.aliquot: a volume without unit.*aliquot: {from: 'V', unit: mL}",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, aliquot: {constant: 10}}"},
            "a volume without unit.*for instance unit: mL",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, aliquot: {constant: ten, unit: mL}}"},
            "expected a number with decimal point, got 'ten'",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, predilution: {constant: 1 to 10}}"},
            "expected a predilution such as 10",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, role: {constant: spike}}"},
            "got 'spike'.*Did you mean 'spiked'",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, role: {from: T, map: {S: spike}}}"},
            "columns.role.map.S: .*got 'spike'",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, measured_at: T}"},
            "expected the form of the time under 'format', got none",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, measured_at: {from: T, format: '%H:%M'}}"},
            "expected a form with day, month and year",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, measured_at: {from: T, format: '%Q'}}"},
            "expected a form with day, month and year",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: R, measured_at: {constant: x}}"},
            "a time cannot be the same for every row",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: [R1, R2], signal_sd: S}"},
            "'signal_sd' belongs to a mean, but signal maps 2 readings",
        ),
        (
            {"columns": "{label: L, analyte: E, signal: M, signal_sd: S, signal_rsd: R}"},
            "signal_sd and signal_rsd say the same",
        ),
        ({"columns": "{label: L, analyte: E, signal: R, level: V}"}, r"labels\[4\]: {level} has a column as well"),
        ({"unfold": "{pattern: '^(?P<analyte>Zn)$'}"}, "columns.analyte: 'analyte' comes from unfold as well"),
        ({"unfold": "{pattern: '^(?P<analyte>Zn)$'}"}, "columns.signal: 'signal' comes from unfold as well"),
        (
            {"labels": "[{like: '{smple}'}]"},
            r"labels\[1\]: 'smple' is no field that a label can say.*Did you mean 'sample'",
        ),
        ({"labels": "[{like: 'X*', role: spiked}]"}, r"labels\[1\]: the rule 'X\*' says spiked, but not which sample"),
        ({"labels": "[{like: 'X*', role: spikd}]"}, r"labels\[1\].role: .*got 'spikd'.*Did you mean 'spiked'"),
        ({"labels": "[{like: 'X*', pattern: X}]"}, "expected either 'like' or 'pattern'"),
        (
            {"columns": "{label: L, analyte: E, signal: R, added: A}", "labels": None, "unmatched": "refuse"},
            "no label rules stand in this layout",
        ),
    ],
)
def test_each_fault_is_named_with_line_key_and_remedy(
    layout_text: Callable[..., str], parts: dict[str, str], expected: str
) -> None:
    """A layout with a fault is refused with file, line and key, in plain words."""
    with pytest.raises(DocumentInvalid, match=r"layouts/flame.yaml, line \d+, ") as invalid:
        parse_layout(layout_text(**parts), "layouts/flame.yaml")

    assert re.search(expected, str(invalid.value))
    assert "No export can be read with this layout." in str(invalid.value)


@pytest.mark.parametrize(
    ("unfold", "expected"),
    [
        ("{pattern: '^(?P<analyt>Zn)$'}", "'analyt' is no group that a header can say.*Did you mean 'analyte'"),
        (
            "{pattern: '^(?P<analyte>Zn) (?P<field>.+)$'}",
            "the pattern has a group 'field', but no word of it is explained",
        ),
        ("{pattern: '^(?P<analyte>Zn)$', fields: {Mean: signal}}", "the pattern has no group 'field'"),
        ("{pattern: '^(?P<analyte>Zn) (?P<field>.+)$', fields: {SD: signal_sd}}", "no word means signal"),
        (
            "{pattern: '^(?P<analyte>Zn) (?P<field>.+)$', fields: {M: signal, S: signal_sd, R: signal_rsd}}",
            "say the same",
        ),
        ("{pattern: '^(?P<analyte>Zn) (?P<field>.+)$', fields: {Mean: signl}}", "Did you mean 'signal'"),
        ("{fields: {Mean: signal}}", "the key 'pattern' is missing"),
        ("{pattern: '^(?P<analyte>Zn)$', excpt: x}", "unknown key 'excpt'.*Did you mean 'except'"),
    ],
)
def test_faults_of_unfold(layout_text: Callable[..., str], unfold: str, expected: str) -> None:
    """The groups of the pattern and the words of the fields must fit together."""
    with pytest.raises(DocumentInvalid, match=expected):
        parse_layout(layout_text(columns="{label: Label}", unfold=unfold), "layouts/wide.yaml")


def test_faults_of_unlike_kinds_come_at_once(layout_text: Callable[..., str]) -> None:
    """A wrong pattern, an unknown key and a wrong word are one report, in the order of the lines."""
    text = layout_text(header="'('", untill="x", unmatched="ignore", columns="{lable: Label}")

    with pytest.raises(DocumentInvalid) as invalid:
        parse_layout(text, "layouts/flame.yaml")

    keys = {fault.key for fault in invalid.value.faults}
    assert keys == {"header", "untill", "unmatched", "columns.lable"}
    assert [fault.line for fault in invalid.value.faults] == sorted(fault.line for fault in invalid.value.faults)


@given(
    st.text(alphabet="Pa ;.*+?\\d^$[]()|{2}", max_size=8).map(lambda rest: f"^{rest}"),
    st.text(alphabet="Pa ;.d2^", max_size=6),
)
def test_a_line_that_a_pattern_matches_begins_with_its_literal_start(pattern: str, line: str) -> None:
    """The literal beginning of a pattern is necessary, or leaving lines out by it would lose some."""
    try:
        compiled = re.compile(pattern)
    except (re.error, OverflowError, FutureWarning):
        return
    if compiled.search(line):
        assert line.startswith(literal_start(compiled))
