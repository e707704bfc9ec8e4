"""The table is found, split and counted; every line that is no row has its reason."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

import pytest

from parsers import fates
from parsers.errors import ExportRefused
from parsers.table import find_table, read_rows
from parsers.text import decode

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.layout import Layout
    from parsers.table import RowTable

HEADER = "Label;Element;R1;R2"


def table_of(text: str, layout: Layout) -> RowTable:
    """Read the table of an export written as text."""
    return read_rows(find_table(decode(text.encode(), layout.encodings, "FL-0412.csv"), layout), layout)


def fates_of(table: RowTable) -> list[tuple[int, str]]:
    """Return the line and the reason of every line that is no row."""
    return [(aside.line, aside.reason) for aside in table.set_aside]


def test_the_header_is_the_first_line_that_is_not_blank(make_layout: Callable[..., Layout]) -> None:
    """Blank lines and a spreadsheet's note of the separator stand before it."""
    table = table_of(f"sep=;\n\n{HEADER}\nSED-12;Zn;1;2\n", make_layout())

    assert table.headers == ("Label", "Element", "R1", "R2")
    assert table.line.tolist() == [4]
    assert fates_of(table) == [(1, fates.BEFORE), (2, fates.BLANK), (3, fates.HEADER)]


def test_the_header_is_found_by_its_pattern(make_layout: Callable[..., Layout]) -> None:
    """A preamble of any length may stand before it; lines to skip are no header."""
    text = f"{HEADER} (page 1)\nBatch: B-7\n{'x' + chr(10)}{HEADER}\nSED-12;Zn;1;2\n"

    table = table_of(text, make_layout(header="'^Label;'", skip="['page \\d']"))

    assert table.line.tolist() == [5]


def test_a_header_far_down_is_found(make_layout: Callable[..., Layout]) -> None:
    """A long log before the table does not hide it."""
    table = table_of("log\n" * 1000 + f"{HEADER}\nSED-12;Zn;1;2\n", make_layout(header="'^Label;'"))

    assert table.line.tolist() == [1002]


@pytest.mark.parametrize(
    ("text", "parts", "expected"),
    [
        ("a\nb\n", {"header": "'^Label;'"}, "expected a header line that matches '^Label;', got none in 2 lines"),
        ("\n \n", {}, "expected a header line, got blank lines only"),
        (f"{HEADER}\nSED-12;Zn;1\n", {}, "line 2: expected 4 fields as in the header, got 3 in 'SED-12;Zn;1'"),
        (f"{HEADER}\nSED-12;Zn;1;2;3\n", {}, "line 2: expected 4 fields as in the header, got 5"),
        (
            f'{HEADER}\nSED-12;"Zn;1;2\nSED-13;Zn;1;2\n',
            {},
            "line 2: a quote is opened here and not closed within 20 lines",
        ),
        (f'{HEADER}\n\nSED-12;"Zn"x;1;2\n', {}, "line 3: a quote stands where none belongs"),
        (
            f"{HEADER}\nSED-12;Zn;1;2\nLabel;Element;R2;R1\n",
            {"header": "'^Label;'"},
            "line 3: expected rows under the header of line 1, got another header",
        ),
        (f"{HEADER}\nSED-12;Zn;1;2\nSum;3\n", {}, "line 3: expected 4 fields as in the header, got 2 in 'Sum;3'"),
    ],
)
def test_a_broken_structure_refuses_the_export(
    make_layout: Callable[..., Layout], text: str, parts: dict[str, str], expected: str
) -> None:
    """Short and long rows, open quotes, other headers and missing ones are refused with line and row."""
    with pytest.raises(ExportRefused, match=re.escape(expected)) as refused:
        table_of(text, make_layout(**parts))

    assert "Nothing of this export is read." in str(refused.value)


def test_a_long_row_is_shown_shortened(make_layout: Callable[..., Layout]) -> None:
    """An error quotes the beginning of a long row."""
    with pytest.raises(ExportRefused, match=r"got 3 in 'x{79}…'"):
        table_of(f"{HEADER}\n{'x' * 300};1;2\n", make_layout())


def test_every_line_that_is_no_row_has_its_reason(make_layout: Callable[..., Layout]) -> None:
    """Blank lines, page headers, repeated headers, end marks and what follows are told apart."""
    text = f"Log\n{HEADER}\nSED-12;Zn;1;2\n\nPage 2\n{HEADER}\nSED-13;Zn;1;2\nEnd of log\nAverages;1\n\nmore;1\n"
    layout = make_layout(header="'^Label;'", skip="'^Page'", finished="'^End of log'", until="'^Averages'")

    table = table_of(text, layout)

    assert table.line.tolist() == [3, 7]
    assert fates_of(table) == [
        (1, fates.BEFORE), (2, fates.HEADER), (4, fates.BLANK), (5, fates.SKIPPED), (6, fates.HEADER_AGAIN),
        (8, fates.FINISHED), (9, fates.UNTIL), (10, fates.BLANK), (11, fates.AFTER),
    ]  # fmt: skip


def test_one_line_may_end_the_table_and_the_export(make_layout: Callable[..., Layout]) -> None:
    """A line that matches until and finished ends the table."""
    table = table_of(f"{HEADER}\nSED-12;Zn;1;2\nEnd\nx\n", make_layout(until="'^End'", finished="'^End'"))

    assert fates_of(table)[1:] == [(3, fates.UNTIL), (4, fates.AFTER)]


def test_quoted_cells_hold_separators_quotes_and_line_breaks(make_layout: Callable[..., Layout]) -> None:
    """A quoted cell is one cell; the lines that it runs over belong to its row, whatever they look like."""
    text = 'Label;"Element\n(line)";R1;R2\n"SED;12 ""b""";Zn;"1\nPage 3";2\nSED-13;Z"n;1;2\n'

    table = table_of(text, make_layout(skip="'^Page'"))

    assert table.headers == ("Label", "Element (line)", "R1", "R2")
    assert [list(row) for row in table.rows] == [['SED;12 "b"', "Zn", "1\nPage 3", "2"], ["SED-13", 'Z"n', "1", "2"]]
    assert table.line.tolist() == [3, 5]
    assert fates_of(table) == [(1, fates.HEADER), (2, fates.HEADER), (4, fates.CONTINUED)]


@pytest.mark.parametrize(
    ("separator", "text"),
    [
        ("','", "Label,Element,R1,R2\nSED-12,Zn,1,2\n"),
        ("tab", "Label\tElement\tR1\tR2\nSED-12\tZn\t1\t2\n"),
        ("blanks", "  Label   Element R1\tR2\n SED-12 Zn  1 2  \n"),
        ("'|'", "Label|Element|R1|R2\nSED-12|Zn|1|2\n"),
    ],
)
def test_separators(make_layout: Callable[..., Layout], separator: str, text: str) -> None:
    """A character, a tab, or runs of blanks part the cells."""
    table = table_of(text, make_layout(separator=separator))

    assert table.headers == ("Label", "Element", "R1", "R2")
    assert [table.texts(column)[0] for column in range(4)] == ["SED-12", "Zn", "1", "2"]


def test_empty_columns_at_the_end_of_all_rows_are_fine(make_layout: Callable[..., Layout]) -> None:
    """Separators at the end of the header and of every row are columns without name."""
    table = table_of(f"{HEADER};;\nSED-12;Zn;1;2;;\n", make_layout())

    assert table.headers == ("Label", "Element", "R1", "R2", "", "")


def test_headers_have_folded_blanks(make_layout: Callable[..., Layout]) -> None:
    """Blanks around and within header names are folded, non-breaking ones included."""
    assert table_of(" Label ;Element\xa0 name;R1;R2\n", make_layout()).headers[:2] == ("Label", "Element name")
