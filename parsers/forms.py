"""Tables of another form than one row to a line: samples as columns, plates, ``name = value`` lines.

Each becomes rows with named columns, and every cell keeps its line. Nothing here knows what a column means.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from parsers import fates
from parsers.readings import SetAside
from parsers.spelling import fold, shown
from parsers.table import composed, find_table, read_rows

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from parsers.layout import Layout
    from parsers.table import Frame, RowTable
    from parsers.text import Lines

#: Columns of a grid.
WELL = ("well", "row", "column", "value")


@dataclass(slots=True)
class Sheet:
    """The table of one block.

    Attributes
    ----------
    headers, parts
        Names of the columns, and their names on each of several header lines.
    header_at
        Index of the line to name where a column is missing.
    rows, lines
        The cells, and the line of each row.
    across
        For each row the lines of its cells, or None where they stand on one line.
    set_aside
        The lines that are no rows.
    sd, rsd
        For each row the cells of a statistic row below it, or None.
    replicate
        For each row the number of the replicate that it is, or None.
    """

    headers: tuple[str, ...]
    parts: tuple[tuple[str, ...], ...]
    header_at: int
    rows: list[list[str]]
    lines: list[int]
    across: list[Sequence[int] | None]
    set_aside: list[SetAside]
    sd: list[list[str] | None] = field(default_factory=list)
    rsd: list[list[str] | None] = field(default_factory=list)
    replicate: list[int | None] = field(default_factory=list)


def read_sheet(lines: Lines, layout: Layout, first: int, end: int, *, begun: bool) -> Sheet:
    """Read the table in a part of an export.

    Parameters
    ----------
    lines, layout
        The export and its layout.
    first, end
        Index of the first line, and of the line behind the last.
    begun
        Whether the first line begins a block: it is a header only if it matches its pattern.

    Raises
    ------
    ExportRefused
        If there is no table, or its structure is broken.
    """
    if layout.table == "pairs":
        return _pairs(lines, layout, first, end)
    start = first + (begun and layout.header_pattern is None)
    headed = layout.table != "transposed" and layout.header != "none"
    frame = find_table(lines, layout, start, end, headed=headed)
    table = read_rows(frame, layout)
    if start > first:
        table.set_aside += fates.outside(lines.lines[first:start], first, fates.HEADING)
    return _FORMS[layout.table](frame, table, layout)


def _as_rows(frame: Frame, table: RowTable, layout: Layout) -> Sheet:  # noqa: ARG001 (one of several forms)
    rows = [list(row) for row in table.rows]
    return Sheet(
        frame.headers, frame.parts, frame.header_at, rows, table.line.tolist(), [None] * len(rows), table.set_aside
    )


def _transposed(frame: Frame, table: RowTable, layout: Layout) -> Sheet:
    """Turn lines into columns; the first cells of each line are its names."""
    numbers = table.line.tolist()
    columns = list(zip(*table.rows, strict=True))
    names, cells = columns[: layout.header_lines], columns[layout.header_lines :]
    if not cells:
        todo = "Correct the separator or header_lines in the layout"
        raise frame.lines.refusal(frame.header_at, "expected columns beside the names, got none", todo)
    headers, parts = composed(names, layout)
    rows = [list(column) for column in cells if any(map(str.strip, column))]
    aside = [SetAside(line, fates.ACROSS, frame.lines.lines[line - 1]) for line in numbers]
    return Sheet(
        headers, parts, frame.header_at, rows, numbers[:1] * len(rows), [numbers] * len(rows), table.set_aside + aside
    )


def _grid(frame: Frame, table: RowTable, layout: Layout) -> Sheet:  # noqa: ARG001 (one of several forms)
    """Turn each filled cell of a plate into a row that knows its well."""
    sheet = Sheet(WELL, (), frame.header_at, [], [], [], table.set_aside)
    for line, row in zip(table.line.tolist(), table.rows, strict=True):
        letter = fold(row[0])
        filled = [(name, cell) for name, cell in zip(frame.headers[1:], row[1:], strict=True) if cell.strip()]
        for name, cell in filled:
            if not name or not letter:
                sentence = f"expected a row letter and a column number for each well, got none for {shown(cell)}"
                todo = "Correct header in the layout, or end the grid with until"
                raise frame.lines.refusal(line - 1, sentence, todo)
            sheet.rows.append([letter + name, letter, name, cell])
            sheet.lines.append(line)
            sheet.across.append(None)
        if not filled:
            sheet.set_aside.append(SetAside(line, "no well is filled", frame.lines.lines[line - 1]))
    return sheet


def _pairs(lines: Lines, layout: Layout, first: int, end: int) -> Sheet:
    """Read ``name = value`` lines as one row."""
    names: list[str] = []
    values: list[str] = []
    numbers: list[int] = []
    aside: list[SetAside] = []
    at, over = first, False
    for at in range(first, end):
        line = lines.lines[at]
        name, mark, value = line.partition(layout.separator)
        reason = fates.AFTER if over else _no_pair(line, layout)
        if reason is None and mark and name.strip():
            names.append(fold(name))
            values.append(value)
            numbers.append(at + 1)
        over = over or reason == fates.UNTIL
        aside.append(SetAside(at + 1, reason or (fates.ACROSS if mark else fates.OUTSIDE), line))
    rows = [values] if names else []
    return Sheet(tuple(names), (), first, rows, numbers[:1], [numbers] if names else [], aside)


def _no_pair(line: str, layout: Layout) -> str | None:
    if not line.strip():
        return fates.BLANK
    if layout.until is not None and layout.until.search(line):
        return fates.UNTIL
    if layout.finished is not None and layout.finished.search(line):
        return fates.FINISHED
    return fates.SKIPPED if any(pattern.search(line) for pattern in layout.skip) else None


_FORMS: dict[str, Callable[[Frame, RowTable, Layout], Sheet]] = {
    "rows": _as_rows,
    "transposed": _transposed,
    "grid": _grid,
}
