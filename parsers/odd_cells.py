"""Every distinct cell of a column of numbers that is no plain number, with what is made of it: for `explain`.

Reads the table once more, so that long exports pay for it only where somebody asks. Nothing here judges a cell.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.cells import Kind
from parsers.columns import resolve
from parsers.shaping import shape
from parsers.spelling import fold
from parsers.table import find_table, read_rows
from parsers.text import decode

if TYPE_CHECKING:
    from collections.abc import Container, Iterator

    from parsers.layout import Layout
    from parsers.table import Frame, Table

TREATMENTS = {
    Kind.NUMBER: "a number, what stands beside it left out",
    Kind.MISSING: "missing",
    Kind.BELOW: "below the instrument's range",
    Kind.ABOVE: "above the instrument's range",
    Kind.UNREADABLE: "cannot be read",
}


@dataclass(frozen=True, slots=True)
class OddCell:
    """One distinct text of a column of numbers.

    Attributes
    ----------
    text
        As written, trimmed; empty for an empty cell.
    column
        Header of the column.
    treatment
        One of `TREATMENTS`.
    lines
        Lines of the export on which it stands.
    """

    text: str
    column: str
    treatment: str
    lines: tuple[int, ...]


def odd_cells(data: bytes, layout: Layout, name: str, lines: Container[int]) -> list[OddCell]:
    """Find the odd cells of an export that was read.

    Parameters
    ----------
    data, layout, name
        The export, as `parsers.read.read` took it.
    lines
        The lines that gave readings; others are told by their own reason.
    """
    frame, table = _table(data, layout, name)
    columns = sorted({at for single in layout.singles() for at in resolve(frame, single).number_columns})
    read = np.array([line in lines for line in table.line.tolist()], dtype=bool)

    def found() -> Iterator[OddCell]:
        for column in columns:
            texts = table.texts(column)
            for code, text in enumerate((*texts.names, "")):
                if layout.grammar.number.fullmatch(fold(text)):
                    continue
                wanted = code if code < len(texts.names) else -1
                at = table.line[(texts.codes == wanted) & read].tolist()
                if at:
                    yield OddCell(text, frame.headers[column], TREATMENTS[layout.grammar.cell(text).kind], tuple(at))

    return list(found())


def _table(data: bytes, layout: Layout, name: str) -> tuple[Frame, Table]:
    lines = decode(data, layout.encodings, name)
    if not layout.plain:
        shaped = shape(lines, layout)
        return shaped.frame, shaped.table
    frame = find_table(lines, layout)
    return frame, read_rows(frame, layout)
