"""START HERE: the bytes of an export and a layout become readings.

    decode        bytes → lines                         parsers.text
    find_table    lines → header and rows               parsers.table, parsers.block
    resolve       header + layout → columns of fields   parsers.columns
    assemble      rows → readings                       parsers.assembly

An export that is more than one plain table is first put together as one (`parsers.shaping`).

What breaks the structure raises `ExportRefused`; a cell that cannot be used is a fault of its row, and the rest is
read. Nothing here opens a file.
"""

from __future__ import annotations

import re
from dataclasses import replace
from fnmatch import fnmatchcase
from typing import TYPE_CHECKING

from parsers import fates
from parsers.assembly import assemble
from parsers.block import read_block
from parsers.columns import resolve
from parsers.errors import ExportRefused, ParsersError
from parsers.heading import read_heading, read_name
from parsers.joining import joined
from parsers.shaping import shape
from parsers.table import find_table, read_rows
from parsers.text import decode

if TYPE_CHECKING:
    from parsers.layout import Layout
    from parsers.readings import Readings
    from parsers.table import Frame, Table
    from parsers.text import Lines

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
    return _read_plain(lines, layout) if layout.plain else _read_shaped(lines, layout)


def _read_plain(lines: Lines, layout: Layout) -> Readings:
    frame = find_table(lines, layout)
    singles = layout.singles()
    plans = [resolve(frame, single) for single in singles]  # first, so that a wrong header is not said of a heading
    block = read_block(frame, layout, plans[0]) if len(plans) == 1 else None
    table = block or read_rows(frame, layout)
    _refuse_empty(lines, frame, table)
    around = sorted((one.line - 1, one.text) for one in table.set_aside if one.reason in fates.OUTSIDE_TABLE)
    heading = read_name(lines, layout) | read_heading(lines, layout.heading, around, "outside the table", None)
    return joined([assemble(frame, one, plan, table, heading) for one, plan in zip(singles, plans, strict=True)])


def _read_shaped(lines: Lines, layout: Layout) -> Readings:
    shaped = shape(lines, layout)
    frame, table = shaped.frame, shaped.table
    _refuse_empty(lines, frame, table)
    found = []
    for single in layout.singles():
        plan = replace(resolve(frame, single), captured=shaped.captured).with_statistics(shaped.beside)
        if shaped.replicate is not None:
            plan = plan.with_column("replicate", shaped.replicate)
        found.append(assemble(frame, single, plan, table, shaped.heading))
    return joined(found)


def _refuse_empty(lines: Lines, frame: Frame, table: Table) -> None:
    if not len(table.line):
        raise lines.refusal(frame.header_at, "expected rows under the header, got none", "Export again with its runs")
