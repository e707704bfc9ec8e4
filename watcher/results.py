"""Result files: one CSV for people and spreadsheets, one JSON record, both with bytes that depend on nothing else.

Text cells that a spreadsheet would run as a formula are made inert; numbers are untouched.
"""

from __future__ import annotations

import csv
import io
import json
import math
import re
from typing import TYPE_CHECKING, Any

from parsers.readings import line_ranges
from rules import plan
from rules.case import Reported
from rules.figures import figure
from watcher.record import Export, record_parts, result_by

if TYPE_CHECKING:
    from collections.abc import Iterator

    from rules.outcomes import Outcomes
    from watcher.schema import CsvPart

COLUMNS = (
    "sample",
    "analyte",
    "channel",
    "attempt",
    "result",
    "unit",
    "expanded_uncertainty",
    "coverage_factor",
    "low",
    "high",
    "result_by",
    "slope",
    "intercept",
    "correlation",
    "n_levels",
    "matrix_effect",
    "recovery",
    "verdict",
    "reasons",
    "next_step",
    "export",
    "export_lines",
    "revision",
    "accepted_at",
)
#: A spreadsheet takes a cell that begins so for a formula (OWASP, CSV injection), also behind blanks of any kind, and
#: in the full-width forms of the signs.
_FORMULA = re.compile(r"\s*[=+\-@\uff1d\uff0b\uff0d\uff20]|[\t\r]")


def json_pieces(outcomes: Outcomes, export: Export, problems: tuple[str, ...]) -> Iterator[bytes]:
    """Yield the JSON record piece by piece: one line for each key, and one for each series and other list entry.

    A long export has ten thousand series, so the whole is never held in memory.
    """
    opening = "{"
    for key, value in record_parts(outcomes, export, problems):
        yield f"{opening}{_json(key)}: ".encode()
        opening = ",\n"
        if isinstance(value, (dict, str, int)) or value is None:
            yield _json(value).encode()
            continue
        yield b"["
        separator = "\n"
        for entry in value:
            yield f"{separator}{_json(entry)}".encode()
            separator = ",\n"
        yield b"]"
    yield b"}\n"


def _json(value: Any) -> str:
    return json.dumps(value, ensure_ascii=False, allow_nan=False)


def csv_pieces(outcomes: Outcomes, export: Export, form: CsvPart) -> Iterator[bytes]:
    """Yield the CSV row by row: one for each series, UTF-8 with a mark, CRLF."""
    out = io.StringIO()
    writer = csv.writer(out, delimiter=form.separator, lineterminator="\r\n")
    writer.writerow(COLUMNS)
    yield out.getvalue().encode("utf-8-sig")
    for i in range(len(outcomes.case)):
        out.seek(0)
        out.truncate()
        row = _row(outcomes, i, export)
        writer.writerow([_cell(row[column], form.decimal) for column in COLUMNS])
        yield out.getvalue().encode()


def inert(text: str) -> str:
    """Return a text that no spreadsheet runs.

    >>> inert("=1+1"), inert("RIV-17")
    ("'=1+1", 'RIV-17')
    """
    risky = any(_FORMULA.match(part) for part in text.split("\n"))
    return f"'{text}" if risky else text


def _cell(value: Any, decimal: str) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return inert(value)
    if isinstance(value, int):
        return str(value)
    if not math.isfinite(value):
        return ""
    return repr(float(value)).replace(".", decimal)


def _row(outcomes: Outcomes, i: int, export: Export) -> dict[str, Any]:
    case = outcomes.case
    results = outcomes.reported(i)
    sound = i not in case.faults
    at = int(case.fits.of_series[i])
    lines = case.fits.lines
    less_than = float(results.less_than[i])

    def of_result(column: Any) -> float | None:
        return float(column[i]) if sound else None

    value: Any = of_result(results.value)
    if sound and not results.detected[i] and math.isfinite(less_than):
        value = f"< {figure(less_than)}"
    return {
        "sample": case.sample(i),
        "analyte": case.analyte(i),
        "channel": case.channel(i),
        "attempt": int(case.series.attempt[i]),
        "result": value,
        "unit": case.method.result_unit,
        "expanded_uncertainty": of_result(results.expanded_uncertainty) if results.symmetric(i) else None,
        "coverage_factor": of_result(results.coverage_factor) if results.symmetric(i) else None,
        "low": of_result(results.low),
        "high": of_result(results.high),
        "result_by": result_by(case, i, Reported(int(case.reported[i]))),
        "slope": None if at < 0 else float(lines.slope[at]),
        "intercept": None if at < 0 else float(lines.intercept[at]),
        "correlation": None if at < 0 else float(lines.correlation[at]),
        "n_levels": 0 if at < 0 else int(case.fits.distinct[at]),
        "matrix_effect": float(case.recoveries.matrix_effect[i]),
        "recovery": float(outcomes.check("recovery").value[i]),
        "verdict": outcomes.verdict_of(i).word,
        "reasons": "; ".join(outcomes.reasons(i)),
        "next_step": plan.next_step(outcomes, i),
        "export": export.name,
        "export_lines": line_ranges(case.series_lines(i)),
        "revision": export.revision,
        "accepted_at": export.accepted_at,
    }
