"""What kind each row of a table is by the rules of its layout, and the blanks that a row takes from the one above.

Statistic rows are joined to the reading above them; rows that are no readings are set aside with their kind. Nothing
here converts a cell.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from parsers import fates
from parsers.readings import SetAside
from parsers.spelling import fold, listed

if TYPE_CHECKING:
    import re

    from parsers.forms import Sheet
    from parsers.layout import Layout, RowRule
    from parsers.table import Frame

#: Why a row of each kind is no reading.
_REASONS = {
    "unit": "units of the columns",
    "limit": "limits of detection",
    "excluded": fates.EXCLUDED,
    "left out": "left out by rows",
}
_READINGS = ("reading", "replicate", "mean")
_STATISTICS = ("sd", "rsd")


def sort_rows(sheet: Sheet, frame: Frame, layout: Layout) -> None:
    """Keep the readings of a table, with their statistic rows beside them; fill down.

    Raises
    ------
    ExportRefused
        If a column of a condition is missing or stands twice, or a statistic row stands below no row.
    """
    kinds = _kinds(sheet, frame, layout)
    _fill_down(sheet, frame, layout)
    label = _label_column(frame, layout)
    kept: list[int] = []
    above: int | None = None  # index in `kept` of the reading to which a statistic row belongs
    left_out = False
    count, last = 0, ""
    sheet.sd, sheet.rsd, sheet.replicate = [], [], []
    for row, kind in enumerate(kinds):
        line = sheet.lines[row]
        text = frame.lines.lines[line - 1]
        if kind in _READINGS:
            named = fold(sheet.rows[row][label]) if label is not None else ""
            count = count + 1 if kind == "replicate" and named == last else 1
            last = named if kind == "replicate" else "\0"
            kept.append(row)
            above, left_out = len(kept) - 1, False
            sheet.sd.append(None)
            sheet.rsd.append(None)
            sheet.replicate.append(count if kind == "replicate" else None)
        elif kind in _STATISTICS:
            sheet.set_aside.append(SetAside(line, f"{kind} of the row above", text))
            if above is None and not left_out:
                sentence = f"expected a row above this one, which is its {kind} by rows of the layout, got none"
                raise frame.lines.refusal(line - 1, sentence, "Correct the conditions in rows of the layout")
            if above is not None:
                (sheet.sd if kind == "sd" else sheet.rsd)[above] = sheet.rows[row]
        else:
            sheet.set_aside.append(SetAside(line, _REASONS[kind], text))
            above, left_out = None, True
            if kind == "excluded":
                count += 1  # the numbers of the replicates behind it stay what they are
            else:
                last = "\0"
    for name in ("rows", "lines", "across"):
        column = getattr(sheet, name)
        setattr(sheet, name, [column[row] for row in kept])


def _kinds(sheet: Sheet, frame: Frame, layout: Layout) -> list[str]:
    rules = [(_conditions(rule, frame), rule.line, rule.are) for rule in layout.rows]
    kinds = []
    for row, line in zip(sheet.rows, sheet.lines, strict=True):
        text = frame.lines.lines[line - 1]
        kinds.append(next((are for where, whole, are in rules if _holds(row, text, where, whole)), "reading"))
    return kinds


def _holds(row: list[str], text: str, where: list[tuple[int, re.Pattern[str]]], whole: re.Pattern[str] | None) -> bool:
    return all(pattern.search(fold(row[at])) for at, pattern in where) and (whole is None or bool(whole.search(text)))


def _conditions(rule: RowRule, frame: Frame) -> list[tuple[int, re.Pattern[str]]]:
    return [(_only(frame, name, "rows.where"), pattern) for name, pattern in rule.where.items()]


def _only(frame: Frame, name: str, key: str) -> int:
    found = frame.named(name)
    if len(found) != 1:
        got = f"{len(found)} of this name" if found else f"none; the header holds {listed(frame.headers)}"
        sentence = f"expected one column {name!r} for {key}, got {got}"
        raise frame.lines.refusal(frame.header_at, sentence, f"Correct {key} in the layout", name)
    return found[0]


def _fill_down(sheet: Sheet, frame: Frame, layout: Layout) -> None:
    for name in layout.fill_down:
        at, above = _only(frame, name, "fill_down"), ""
        for row in sheet.rows:
            above = row[at] if row[at].strip() else above
            row[at] = above


def _label_column(frame: Frame, layout: Layout) -> int | None:
    for source in (layout.columns.label, layout.columns.sample):
        for name in source.names if source is not None else ():
            found = frame.named(name)
            if found:
                return found[0]
    return None
