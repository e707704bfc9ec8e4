"""Reading a large table at once gives exactly what reading record after record gives."""

from __future__ import annotations

import itertools
from dataclasses import fields
from io import BytesIO
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from parsers import read as reading
from parsers.block import read_block
from parsers.cells import Grammar, Kind
from parsers.columns import resolve
from parsers.errors import ExportRefused
from parsers.readings import Quantities, Readings, Texts
from parsers.table import find_table
from parsers.text import decode

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.block import BlockTable
    from parsers.layout import Layout

TRICKY = [
    "nan", "NaN", "inf", "-inf", "Infinity", "1e400", "-1e400", "0x1A", "1_000", "True", "False", "TRUE", "", " ",
    " 1.5", "1.5 ", "1.5\t", "1,5", "1.234,5", "1.2.3", "1 234", "−5", "<0.5", ">15", "OVR", "１２", "1e5", "1E+05",
    "1d5", "2.5D-3", "+1.5", "-0", ".5", "5.", ".", "+", "-", "e5", "1e", "--1", "007", "1" * 40,
    "0." + "0" * 350 + "1",
    "12.3*", "*", "n.a.", "-999", "0", "1", "NA", "None", "null", "1#2", "'1'", "1\xa0", "\ufeff1", "1e-400",
]  # fmt: skip
LABELS = ["SED-12", "SED-12 +A1", "BLK 1", "STD 0.5", "STD x", "007", "1E5", "NA", "None", "TRUE", "", "  ", " SED-7 ",
          "BRN-3  +A2", "RIV-17\xa0+A1", "Caf\u00e9-1", "Cafe\u0301-1", "\ufeffROOF-7", "S#1"]  # fmt: skip

plain_numbers = st.floats(allow_nan=False, allow_infinity=False, width=64).map(repr) | st.decimals(
    min_value=-1000, max_value=1000, places=3
).map(str)
cells = plain_numbers | st.sampled_from(TRICKY)
rows = st.tuples(st.sampled_from(LABELS), st.sampled_from(["Zn", "Na", "NA", "", "Cu"]), cells, cells)
CELL_KEYS = [
    None,
    "{missing: ['', n.a., '-999'], below: '^<', above: [OVR, '15'], flags: '[*!]'}",
    "{missing: ['0', '-'], above: '^>', flags: '[*]+'}",
    "{below: '^-', flags: 'e.*$'}",
]


def as_plain(record: Readings) -> dict[str, object]:
    """Return readings in a form that compares NaN with NaN and texts by what they say."""

    def plain(value: object) -> object:
        if isinstance(value, Texts):
            return [value[row] for row in range(len(value.codes))]
        if isinstance(value, Quantities):
            return plain(value.values), plain(value.units)
        if isinstance(value, np.ndarray):
            return [repr(item) for item in value.ravel().tolist()], value.shape, value.dtype.str
        return value

    return {field.name: plain(getattr(record, field.name)) for field in fields(record)}


def outcome(data: bytes, layout: Layout) -> object:
    """Return what reading gives: plain readings, or the text of the refusal."""
    try:
        return as_plain(reading.read(data, layout, "FL-0412.csv"))
    except ExportRefused as refused:
        return str(refused)


@pytest.fixture
def both_ways(monkeypatch: pytest.MonkeyPatch) -> Callable[[bytes, Layout], tuple[object, object]]:
    """Read an export at once wherever that is possible, and record after record."""

    def read_twice(data: bytes, layout: Layout) -> tuple[object, object]:
        with monkeypatch.context() as patch:
            patch.setattr(reading, "read_block", lambda *found: read_block(*found, fewest_rows=1))
            at_once = outcome(data, layout)
            patch.setattr(reading, "read_block", lambda *_: None)
            return at_once, outcome(data, layout)

    return read_twice


def block_of(text: str, layout: Layout) -> BlockTable | None:
    """Read a table at once, if it qualifies."""
    lines = decode(text.encode(), layout.encodings, "FL-0412.csv")
    frame = find_table(lines, layout)
    return read_block(frame, layout, resolve(frame, layout), fewest_rows=1)


@given(
    table=st.lists(rows, min_size=1, max_size=12),
    cell_key=st.sampled_from(CELL_KEYS),
    decimal=st.sampled_from([None, "','"]),
    newline=st.sampled_from(["\n", "\r\n"]),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16"]),
    blank=st.booleans(),
)
@example([("SED-12", "Zn", "True", "1"), ("SED-12 +A1", "Zn", "False", "0")], None, None, "\n", "utf-8", False)
@example([("SED-12", "Zn", "\ufeff1", "1")], None, None, "\n", "utf-8", False)
@settings(max_examples=400, deadline=None)
def test_both_ways_agree_on_any_cells(
    make_layout, table, cell_key, decimal, newline, encoding, blank
):  # fmt: skip
    """Whatever stands in the cells, the two ways of reading give the same readings, faults and refusals."""
    layout = make_layout(cells=cell_key, decimal=decimal, unmatched="set aside", encodings="[utf-8, utf-16]")
    text = newline.join(["Label;Element;R1;R2", *(";".join(row) for row in table), *([""] if blank else []), ""])
    data = text.encode(encoding)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(reading, "read_block", lambda *found: read_block(*found, fewest_rows=1))
        at_once = outcome(data, layout)
        patch.setattr(reading, "read_block", lambda *_: None)
        one_by_one = outcome(data, layout)

    assert at_once == one_by_one


LINES = ["SED-12;Zn;1.5;1.6", "SED-12 +A1;Zn;2.5;2.6", "", "  ", "Page 3", "Page 3;Zn;1;2", "Label;Element;R1;R2",
         "Label;Element;R2;R1", "Averages", "Averages;;;", "End of log", "SED-12;Zn;1.5", "SED-12;Zn;1;2;3", ";;;",
         'SED-12;Zn;"1.5";1.6', 'SED-12;"Zn;1.5;1.6', "BLK;Zn;;0.1", "\x0c", "Label"]  # fmt: skip


@given(
    lines=st.lists(st.sampled_from(LINES), max_size=10),
    header=st.sampled_from([None, "'^Label;'", "'Label'"]),
    until=st.sampled_from([None, "'^Averages'", "'verages'"]),
    skip=st.sampled_from([None, "['^Page \\d+']", "['age', '^Q']"]),
    final=st.booleans(),
)
@settings(max_examples=400, deadline=None)
def test_both_ways_agree_on_any_lines(make_layout, lines, header, until, skip, final):
    """Whatever lines stand between the rows, the two ways of reading agree on every one of them."""
    layout = make_layout(header=header, until=until, skip=skip, finished="'^End of log'")
    text = "\n".join(["Label;Element;R1;R2", "SED-12;Zn;1;2", *lines]) + ("\n" if final else "")
    data = text.encode()

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(reading, "read_block", lambda *found: read_block(*found, fewest_rows=1))
        at_once = outcome(data, layout)
        patch.setattr(reading, "read_block", lambda *_: None)
        one_by_one = outcome(data, layout)

    assert at_once == one_by_one


def test_a_clean_table_is_read_at_once(make_layout: Callable[..., Layout]) -> None:
    """The quick way is taken for a clean table, or the comparison of the two ways would prove nothing."""
    block = block_of("Label;Element;R1;R2\nSED-12;Zn;1.5;n.a.\nSED-12 +A1;Zn;2.5;2.6\n", make_layout())

    assert block is not None
    np.testing.assert_array_equal(block.numbers(2, Grammar()).values, [1.5, 2.5])
    assert block.numbers(3, Grammar()).odd[0].kind is Kind.UNREADABLE


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        ('Label;Element;R1;R2\nSED-12;"Zn";1;2\n', {}),
        ("Label;Element;R1;R2\nSED-12;Zn;1\n", {}),
        ("Label;Element;R1;R2\nSED-12;Zn;1;2.5\n", {"cells": "{below: '\\d\\.5'}"}),
        ("Label;Element;R1;R2\nSED-12;Zn;1;--2\n", {}),
        ("Label Element R1 R2\nSED-12 Zn 1 2\n", {"separator": "blanks"}),
    ],
    ids=["quotes", "short row", "pattern that finds numbers", "no number", "blanks"],
)
def test_a_table_in_doubt_is_left_to_the_reference(
    make_layout: Callable[..., Layout], text: str, parts: dict[str, str]
) -> None:
    """A table with quotes, uneven rows, or cells that the C parser cannot judge is not read at once."""
    assert block_of(text, make_layout(**parts)) is None


def test_long_exports_take_the_quick_way_and_agree(
    make_layout: Callable[..., Layout], both_ways: Callable[[bytes, Layout], tuple[object, object]]
) -> None:
    """An export of thousands of rows, with preamble, odd cells and a footer, is read alike both ways."""
    random = np.random.default_rng(20)
    body = [f"SED-{row % 40} +A{row % 3};Zn;{random.normal(5, 2):.4f};{random.normal(5, 2):.3e}" for row in range(3000)]
    body[700] = "SED-1 +A1;Zn;<0.02;2.5"
    body[900] = ";Zn;1;2"
    text = "\n".join(["Emission log", "Batch: B-7", "Label;Element;R1;R2", *body, "Averages", "1;2;3", "End of log"])
    layout = make_layout(header="'^Label;'", until="'^Averages'", heading=r"{batch: '^Batch:\s*(.+)$'}")

    at_once, one_by_one = both_ways(text.encode(), layout)

    assert at_once == one_by_one
    assert isinstance(at_once, dict)
    assert len(at_once["line"][0]) == 2999  # type: ignore[index]


def test_the_c_parser_takes_nothing_that_the_grammar_refuses() -> None:
    """Of all short texts, the C parser takes for finite numbers only what the grammar reads as the same number."""
    grammar = Grammar()
    texts = ["".join(text) for length in (1, 2, 3) for text in itertools.product("019.eE+-xX_ dnaif\tl", repeat=length)]
    line = ";".join(texts)
    frame = pd.read_csv(
        BytesIO(f"{line}\n".encode()), sep=";", header=None, names=list(range(len(texts))), keep_default_na=False,
        na_filter=False, index_col=False, quoting=3, skip_blank_lines=False, lineterminator="\n",
    )  # fmt: skip

    taken = {text: value for text, value in zip(texts, frame.iloc[0], strict=True) if not isinstance(value, str)}
    finite = {text: float(value) for text, value in taken.items() if np.isfinite(float(value))}

    assert len(finite) > 100
    assert finite == {text: grammar.cell(text).value for text in finite}
