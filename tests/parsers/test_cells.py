"""A cell is a number under the declared grammar, or something explained, or unreadable: never a guess."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from parsers.cells import Grammar, Kind
from parsers.readings import Texts

POINT = Grammar()
COMMA = Grammar(decimal=",")


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1.5", 1.5), ("  1.5 ", 1.5), ("1.5\xa0", 1.5), ("-0.02", -0.02), ("−5", -5.0), ("+3", 3.0), ("007", 7.0),
        (".5", 0.5), ("5.", 5.0), ("1.2E+003", 1200.0), ("1.2e3", 1200.0), ("1.2D+03", 1200.0), ("2d−1", 0.2),
        ("1.234", 1.234), ("1e-400", 0.0),
    ],
)  # fmt: skip
def test_numbers_with_decimal_point(text: str, value: float) -> None:
    """Signs, exponents of both languages, and blanks around are read; the value is exactly Python's."""
    cell = POINT.cell(text)

    assert (cell.kind, cell.value) == (Kind.NUMBER, value)


@pytest.mark.parametrize(
    "text",
    ["1,234", "1.234,5", "1.2.3", "1 234", "1_000", "１２", "inf", "-Infinity", "NaN", "nan", "1e400",
     "0x1A", "<0.5", "1e", ".",
     "-", "--1", "True", "12 mg/L", "5 %", "1'000", "٣"],
)  # fmt: skip
def test_what_looks_like_a_number_is_unreadable_unless_declared(text: str) -> None:
    """Thousands marks, other digits, infinities and words are no numbers, and the text is kept for the person."""
    cell = POINT.cell(text)

    assert cell.kind is Kind.UNREADABLE
    assert math.isnan(cell.value)
    assert repr(text) in cell.expected


def test_a_point_is_ambiguous_where_the_mark_is_a_comma() -> None:
    """With a decimal comma and no thousands mark, 1.234 may be two numbers: it is refused with that reason."""
    cell = COMMA.cell("1.234")

    assert cell.kind is Kind.UNREADABLE
    assert cell.expected == "expected a number with decimal comma, got '1.234', which may mean two numbers"
    assert cell.remedy == "Correct the export or set decimal or thousands in the layout"


def test_a_declared_thousands_mark_stands_in_its_places_only() -> None:
    """Groups of three are read; a mark anywhere else is no number."""
    grammar = Grammar(decimal=",", thousands=".")

    assert grammar.cell("1.234.567,5").value == 1234567.5
    assert grammar.cell("1234,5").value == 1234.5
    assert grammar.cell("1.2.3").kind is Kind.UNREADABLE
    assert grammar.cell("12.34,5").kind is Kind.UNREADABLE
    assert Grammar(thousands=" ").cell("1\u202f234.5").value == 1234.5


def test_explained_cells_are_kept_apart() -> None:
    """Missing, below, above and flags are what the layout says they are."""
    grammar = Grammar.of(
        ".", "", ("n.a.", "-999"), re.compile(r"^<\s*(?P<limit>[\d.]+)$"), ("OVR",), re.compile("[*!]")
    )

    kinds = {
        text: grammar.cell(text).kind for text in ("", " ", "n.a.", "-999", "< 0.02", "OVR", "*", "1.5*", "OVR!", ">15")
    }

    assert kinds == {
        "": Kind.MISSING, " ": Kind.MISSING, "n.a.": Kind.MISSING, "-999": Kind.MISSING, "< 0.02": Kind.BELOW,
        "OVR": Kind.ABOVE, "*": Kind.MISSING, "1.5*": Kind.NUMBER, "OVR!": Kind.ABOVE, ">15": Kind.UNREADABLE,
    }  # fmt: skip
    assert grammar.cell("1.5*").value == 1.5
    assert "explain such cells in the layout" in Grammar().cell(">15").remedy.lower()


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_every_finite_number_is_read_as_it_was_written(value: float) -> None:
    """What Python writes is read back exactly, with either mark."""
    assert POINT.cell(repr(value)).value == value
    assert COMMA.cell(repr(value).replace(".", ",")).value == value


@given(st.text(max_size=12))
def test_any_text_has_one_kind_and_only_numbers_have_a_value(text: str) -> None:
    """No text raises, and a value is finite exactly where the cell is a number."""
    cell = POINT.cell(text)

    assert math.isfinite(cell.value) == (cell.kind is Kind.NUMBER)
    if cell.kind is Kind.NUMBER:
        assert re.fullmatch(r"[0-9.eEdD+\-−]+", cell.text)


@given(st.lists(st.sampled_from(["1.5", "", "x", "<1", "2"]), max_size=20))
def test_a_column_is_its_cells(texts: list[str]) -> None:
    """Converting distinct texts once gives what converting each cell gives."""
    numbers = POINT.column(Texts.of([text or None for text in texts]))
    cells = [POINT.cell(text) for text in texts]

    np.testing.assert_array_equal(numbers.values, [cell.value for cell in cells])
    # as texts: their values are NaN, which equals nothing
    expected = {row: repr(cell) for row, cell in enumerate(cells) if cell.kind is not Kind.NUMBER}
    assert {row: repr(cell) for row, cell in numbers.odd.items()} == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2.5 mg/L", (2.5, "mg/L")), ("10mL", (10.0, "mL")), ("0.5", (0.5, "")), ("5 %", (5.0, "%")),
        ("1 234 mg/L", None), ("2,5 mg/L", None), ("1.2.3 mg/L", None), ("mg/L", None), ("1e400 mg/L", None),
        ("2023-04-01", None),
    ],
)  # fmt: skip
def test_a_quantity_is_a_number_with_a_glued_unit(text: str, expected: tuple[float, str] | None) -> None:
    """Number and unit are parted; what would part a number in two is refused."""
    assert POINT.quantity(text) == expected


@pytest.mark.parametrize(
    ("text", "factor"),
    [("10", 10), ("1 in 10", 10), ("1:10", 10), ("1 : 10", 10),
     ("1+9", 10), ("1 + 9", 10), ("2 in 5", 2.5), ("1 in 2.5", 2.5),
     ("2+3", 2.5), ("0", None), ("-2", None),
     ("1 in 0", None), ("0 in 5", None), ("1/10", None), ("ten", None), ("", None),
     ("1+-9", None), ("1e400", None)],
)  # fmt: skip
def test_predilutions_in_the_ways_people_write_them(text: str, factor: float | None) -> None:
    """A factor, parts in a whole, and parts plus parts are told apart; anything else is none."""
    assert POINT.predilution(text) == factor
