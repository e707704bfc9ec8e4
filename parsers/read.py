"""START HERE: the bytes of an export and a layout become readings.

    decode        bytes → lines                         parsers.text
    find_table    lines → header and rows               parsers.table, parsers.block
    resolve       header + layout → columns of fields   parsers.columns
    assemble      rows → readings                       parsers.assembly

What breaks the structure raises `ExportRefused`; a cell that cannot be used is a fault of its row, and the rest is
read. Nothing here opens a file.
"""

from __future__ import annotations

import re
from fnmatch import fnmatchcase
from typing import TYPE_CHECKING

from parsers.assembly import assemble
from parsers.block import read_block
from parsers.columns import resolve
from parsers.errors import ExportRefused, ParsersError
from parsers.heading import read_heading
from parsers.table import find_table, read_rows
from parsers.text import decode

if TYPE_CHECKING:
    from parsers.layout import Layout
    from parsers.readings import Readings

#: Lines in which the text of a claim is looked for before the whole export is split.
_LIKELY_HEAD = 200

__all__ = ["ExportRefused", "ParsersError", "claims", "is_finished", "read"]


def claims(layout: Layout, name: str, data: bytes) -> bool:
    """Tell whether a layout is for an export.

    Parameters
    ----------
    layout
        The layout; its file pattern and its text must both hold where given.
    name
        Name of the export; folders before it are left out of account, and so is the case.
    data
        The whole export. One that cannot be decoded is claimed by its name alone, so that reading it says why.
    """
    wanted = layout.claims
    file = re.split(r"[/\\]", name)[-1]
    if wanted.file and not fnmatchcase(file.casefold(), wanted.file.casefold()):
        return False
    if wanted.text is None:
        return True
    try:
        lines = decode(data, layout.encodings, name)
    except ExportRefused:
        return bool(wanted.file)
    return any(wanted.text.search(line) for count in (_LIKELY_HEAD, len(lines)) for line in lines.head(count))


def is_finished(layout: Layout, data: bytes) -> bool:
    """Tell whether the end mark of a layout stands in an export; true where the layout has none.

    An export that cannot be decoded counts as finished: waiting does not mend it, and reading it says why.
    """
    if layout.finished is None:
        return True
    try:
        lines = decode(data, layout.encodings, "")
    except ExportRefused:
        return True
    return any(layout.finished.search(line) for line in reversed(lines.lines))


def read(data: bytes, layout: Layout, name: str) -> Readings:
    """Read an export.

    Parameters
    ----------
    data
        The whole export.
    layout
        What it looks like.
    name
        How to name it in errors.

    Returns
    -------
    Readings
        In the order of the file. Every line is the line of a reading or stands in `set_aside`.

    Raises
    ------
    ExportRefused
        If its structure is broken: encoding, header, number of fields, quotes, labels without rule, no rows.
    """
    lines = decode(data, layout.encodings, name)
    frame = find_table(lines, layout)
    heading = read_heading(frame, layout)
    plan = resolve(frame, layout)
    table = read_block(frame, layout, plan) or read_rows(frame, layout)
    if not len(table.line):
        raise lines.refusal(frame.header_at, "expected rows under the header, got none", "Export again with its runs")
    return assemble(frame, layout, plan, table, heading)
