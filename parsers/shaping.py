"""Exports that are more than one plain table: blocks, forms and kinds of rows put together as one table.

The table has the columns of all blocks by name; behind them lie the statistic rows of each row, the number of its
replicate, and the values that hold in its block. `parsers.table` reads the plain case. Nothing here knows a field.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from parsers.blocks import Block, cut
from parsers.columns import resolve
from parsers.forms import Sheet, read_sheet
from parsers.heading import Heading, read_heading, read_name
from parsers.kinds import sort_rows
from parsers.table import Frame, RowTable

if TYPE_CHECKING:
    from collections.abc import Sequence

    from parsers.layout import Layout
    from parsers.readings import SetAside
    from parsers.text import Lines

_Key = tuple[tuple[str, ...], int]


@dataclass(slots=True)
class _Columns:
    """The columns of all blocks: by name, and of equal names by their order."""

    headers: list[str] = field(default_factory=list)
    parts: list[tuple[str, ...]] = field(default_factory=list)
    places: dict[_Key, int] = field(default_factory=dict)

    def of(self, sheet: Sheet) -> list[int]:
        """Return the place of each column of a block, after adding those that are new."""
        seen: Counter[tuple[str, ...]] = Counter()
        places = []
        for at, header in enumerate(sheet.headers):
            name = sheet.parts[at] if sheet.parts else (header,)
            key = (name, seen[name])
            seen[name] += 1
            if key not in self.places:
                self.places[key] = len(self.headers)
                self.headers.append(header)
                self.parts.append(name)
            places.append(self.places[key])
        return places


@dataclass(frozen=True, slots=True)
class Shaped:
    """An export as one table.

    Attributes
    ----------
    frame, table
        The columns of the export, and its rows with further columns behind them.
    heading
        Values that hold for all rows.
    captured
        Name to column of the values that hold in a block.
    beside
        Where the cells of ``signal_sd`` and ``signal_rsd`` rows lie: how many columns behind those of the row.
    replicate
        The column of the replicate numbers that were counted, or None.
    """

    frame: Frame
    table: RowTable
    heading: dict[str, Heading]
    captured: dict[str, int]
    beside: dict[str, int]
    replicate: int | None


def shape(lines: Lines, layout: Layout) -> Shaped:
    """Read an export block by block.

    Raises
    ------
    ExportRefused
        If its structure is broken.
    """
    pieces = cut(lines, layout.blocks)
    columns = _Columns()
    sheets: list[tuple[Sheet, list[int], dict[str, Heading]]] = []
    headers: set[tuple[str, ...]] = set()
    for block in pieces.blocks:
        sheet, heading = _read(lines, layout, block, headers)
        sheets.append((sheet, columns.of(sheet), heading))
    first = sheets[0][0]
    aside = [*pieces.set_aside, *(one for sheet, _, _ in sheets for one in sheet.set_aside)]
    outside = pieces.outside if layout.blocks else [(one.line - 1, one.text) for one in aside]
    where = "outside the blocks" if layout.blocks else "outside the table"
    everywhere = read_name(lines, layout) | read_heading(lines, layout.heading, outside, where, None)
    parts = tuple(columns.parts) if layout.header_lines > 1 else ()
    frame = Frame(lines, tuple(columns.headers), "", first.header_at, 0, 0, (), len(lines), parts)
    return _together(frame, layout, sheets, aside, everywhere)


def _read(
    lines: Lines, layout: Layout, block: Block, headers: set[tuple[str, ...]]
) -> tuple[Sheet, dict[str, Heading]]:
    """Read one block; each new header must hold the columns of the layout by itself."""
    sheet = read_sheet(lines, layout, block.first, block.end, begun=layout.blocks is not None)
    frame = Frame(lines, sheet.headers, "", sheet.header_at, 0, 0, (), block.end, sheet.parts)
    if sheet.headers not in headers:
        headers.add(sheet.headers)
        for single in layout.singles():
            resolve(frame, single)
    sort_rows(sheet, frame, layout)
    around = sorted((one.line - 1, one.text) for one in sheet.set_aside)
    own = read_heading(lines, block.wanted, around, "in its block", block.first)
    return sheet, block.heading | own


def _together(
    frame: Frame,
    layout: Layout,
    sheets: Sequence[tuple[Sheet, list[int], dict[str, Heading]]],
    aside: list[SetAside],
    everywhere: dict[str, Heading],
) -> Shaped:
    width = len(frame.headers)
    names = sorted(set(layout.blocks.headings())) if layout.blocks else []
    kinds = {rule.are for rule in layout.rows}
    beside = {f"signal_{kind}": 0 for kind in ("sd", "rsd") if kind in kinds}
    total = width
    for name in beside:
        beside[name] = total
        total += width
    counted = total if "replicate" in kinds else None
    total += counted is not None
    captured = {name: total + number for number, name in enumerate(names)}
    rows: list[list[str]] = []
    across: list[Sequence[int] | None] = []
    numbers: list[int] = []
    lacking: list[frozenset[int]] = []
    for sheet, places, heading in sheets:
        in_place = places == list(range(width))
        said = [heading[name].value if name in heading else "" for name in names]
        for at, cells in enumerate(sheet.rows):
            row = list(cells) if in_place else _placed(cells, places, width)
            for name in beside:
                statistic = (sheet.sd if name == "signal_sd" else sheet.rsd)[at]
                row += _placed(statistic or [""] * len(places), places, width)
            if counted is not None:
                row.append(str(sheet.replicate[at] or ""))
            rows.append(row + said)
        numbers += sheet.lines
        lacking += [frozenset(range(width)) - set(places)] * len(sheet.rows)
        across += [None if one is None else _lines_of(one, places, width) for one in sheet.across]
    headers = [*frame.headers]
    for name in beside:
        headers += [f"{header} ({name} row)" for header in frame.headers]
    headers += ["replicate"] if counted is not None else []
    headers += [f"heading {name}" for name in names]
    table = RowTable(
        tuple(headers),
        np.asarray(numbers, dtype=np.int64),
        aside,
        rows,
        across if any(across) else (),
        lacking if any(lacking) else (),
    )
    return Shaped(frame, table, everywhere, captured, beside, counted)


def _placed(cells: Sequence[str], places: Sequence[int], width: int) -> list[str]:
    row = [""] * width
    for place, cell in zip(places, cells, strict=True):
        row[place] = cell
    return row


def _lines_of(numbers: Sequence[int], places: Sequence[int], width: int) -> list[int]:
    lines = [numbers[0]] * width
    for place, line in zip(places, numbers, strict=True):
        lines[place] = line
    return lines
