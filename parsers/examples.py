"""Whether an export is read as its layout's example says: readings written as a table and compared with it.

The columns of an expected table are fields; ``signal`` holds all replicate readings with a blank between them. Only the
columns that stand there are compared. Nothing here opens a file.
"""

from __future__ import annotations

import csv
import math
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from parsers import fields
from parsers.readings import Quantities, Readings, Role, Texts
from parsers.spelling import listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterator

_FIRST = ("line", "label", "sample", "role", "analyte", "channel", "signal")
#: Columns that an expected table may have, in the order in which they are written.
COLUMNS = (*_FIRST, *(name for name in fields.ALL if name not in (*_FIRST, "excluded")))


def written(readings: Readings) -> list[dict[str, str]]:
    """Return each reading as texts, field by field; what it does not say is empty."""
    return [{name: _text(readings, name, row) for name in COLUMNS} for row in range(len(readings))]


def written_csv(readings: Readings) -> str:
    """Return the readings as an expected table, with the columns that say something."""
    rows = written(readings)
    columns = [name for name in COLUMNS if any(row[name] for row in rows)]
    lines = [columns, *([row[name] for name in columns] for row in rows)]
    return "".join(",".join(map(_quoted, line)) + "\n" for line in lines)


def differences(readings: Readings, expected: str, name: str = "expected") -> Iterator[str]:
    """Yield where the readings are not those of an expected table.

    Parameters
    ----------
    readings
        What was read.
    expected
        The CSV text of the table.
    name
        How to name it.
    """
    records = [record for record in csv.reader(expected.removeprefix("\ufeff").splitlines(keepends=True)) if record]
    header = records[0] if records else []
    unknown = [column for column in header if column not in COLUMNS]
    if unknown or not header:
        hint = suggestion(unknown[0], COLUMNS) if unknown else ""
        yield f"{name}: expected fields as columns ({listed(COLUMNS)}), got {listed(unknown) or 'none'}.{hint}"
        return
    rows = written(readings)
    if len(records) - 1 != len(rows):
        yield f"{name}: expected {len(records) - 1} readings, got {len(rows)}. Correct the layout or the table."
    for number, (record, row) in enumerate(zip(records[1:], rows, strict=False), 1):
        for column, cell in zip(header, record, strict=False):
            if not _same(cell.strip(), row[column]):
                place = f"{name}, reading {number} (line {row['line']} of the export), {column}"
                yield f"{place}: expected {cell.strip()!r}, got {row[column]!r}. Correct the layout or the table."


def _same(one: str, other: str) -> bool:
    try:
        return one == other or [float(a) for a in one.split()] == [float(b) for b in other.split()] != []
    except ValueError:
        return False


def _text(readings: Readings, name: str, row: int) -> str:
    if name == "role":
        return Role(int(readings.role[row])).word
    if name == "signal":
        return " ".join(filter(None, map(_number, readings.signals[row].tolist())))
    column = getattr(readings, name)
    if isinstance(column, Texts):
        return column[row] or ""
    if isinstance(column, Quantities):
        number = _number(float(column.values[row]))
        return f"{number} {column.units[row] or ''}".strip() if number else ""
    value = float(column[row])
    if name == "measured_at" and not math.isnan(value):
        return datetime.fromtimestamp(value, UTC).strftime("%Y-%m-%dT%H:%M:%S")
    return _number(value)


def _number(value: float) -> str:
    return "" if math.isnan(value) else f"{value:.15g}"


def _quoted(text: str) -> str:
    return '"' + text.replace('"', '""') + '"' if any(sign in text for sign in ',"\n') else text
