"""An explanation for machines: `explain --json`.

Keys, all of them always there::

    format        1
    export        its name
    exit          the exit code: 0, 1 or 2
    refused       null, or {line, column, sentence, remedy} where nothing was read; the rest is then empty or null
    layout        {name, file, claimed_by}
    lines         {total, read, faults, set_aside}: numbers of lines
    columns       [{header, fields}]: what each column feeds, nothing where it is ignored
    heading       {name: value}: values outside the table
    labels        [{label, role, sample, level, rows, rule}]: every distinct label
    cells         [{cell, column, taken_for, lines}]: every distinct cell that is no plain number
    faults        [{line, column, cell, field, sentence}]: cells that fail their series
    set_aside     [{line, reason}]
    problems      [sentence]: what belongs to no series
    series        [{sample, analyte, channel, attempt, unspiked, spiked, lines, verdict, result, reasons, next_step}]
    mails         [{kind, to, subject, text, after_seconds}]
    line_fates    [{line, fate, why}] with --lines, else null
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Role
from rules import plan
from watcher.exit_codes import NOT_DONE

if TYPE_CHECKING:
    from parsers.errors import ExportRefused
    from rules.outcomes import Outcomes
    from watcher.explanation import Explanation, ReadingAccount

FORMAT = 1


def plain(explanation: Explanation, *, with_lines: bool) -> dict[str, Any]:
    """Return an explanation as JSON values."""
    account = explanation.account
    outcomes = explanation.evaluated.outcomes
    return {
        **_empty(account.name, explanation.code),
        **_reading(account, with_lines=with_lines),
        "series": [_series(outcomes, i) for i in range(len(outcomes.case))],
        "mails": [
            {
                "kind": letter.kind,
                "to": list(to),
                "subject": letter.subject,
                "text": letter.body,
                "after_seconds": letter.after_seconds,
            }
            for letter, to in explanation.mails
        ],
    }


def refusal(name: str, sentence: str, refused: ExportRefused | None = None) -> dict[str, Any]:
    """Return the JSON values for an export of which nothing was read."""
    return _empty(name, NOT_DONE) | {
        "refused": {
            "line": refused.line if refused else None,
            "column": refused.column if refused else None,
            "sentence": refused.sentence if refused else sentence,
            "remedy": refused.remedy if refused else "",
        }
    }


def _empty(name: str, code: int) -> dict[str, Any]:
    lists = ("columns", "labels", "cells", "faults", "set_aside", "problems", "series", "mails")
    return {
        "format": FORMAT,
        "export": name,
        "exit": code,
        "refused": None,
        "layout": None,
        "lines": None,
        "heading": {},
        **{key: [] for key in lists},
        "line_fates": None,
    }


def _reading(account: ReadingAccount, *, with_lines: bool) -> dict[str, Any]:
    readings, layout = account.readings, account.layout
    return {
        "layout": {"name": layout.layout, "file": layout.document.path, "claimed_by": account.claimed_by},
        "lines": {
            "total": readings.lines,
            "read": len(account.read_lines),
            "faults": len(account.fault_lines),
            "set_aside": len(readings.set_aside),
        },
        "columns": [{"header": use.header, "fields": list(use.fields)} for use in readings.columns],
        "heading": readings.heading,
        "labels": [
            {"label": u.label, "role": u.role, "sample": u.sample, "level": u.level, "rows": u.rows, "rule": u.rule}
            for u in readings.labels
        ],
        "cells": [
            {"cell": cell.text, "column": cell.column, "taken_for": cell.treatment, "lines": list(cell.lines)}
            for cell in account.odd_cells
        ],
        "faults": [
            {"line": f.line, "column": f.column, "cell": f.cell, "field": f.field, "sentence": f.sentence}
            for f in readings.faults
        ],
        "set_aside": [{"line": aside.line, "reason": aside.reason} for aside in readings.set_aside],
        "problems": list(account.problems),
        "line_fates": [{"line": one.line, "fate": one.fate, "why": one.why} for one in account.line_fates()]
        if with_lines
        else None,
    }


def _series(outcomes: Outcomes, i: int) -> dict[str, Any]:
    case = outcomes.case
    roles = case.readings.role[case.solutions.rows[case.series.members_of(i)]]
    return {
        "sample": case.sample(i),
        "analyte": case.analyte(i),
        "channel": case.channel(i),
        "attempt": int(case.series.attempt[i]),
        "unspiked": int(np.sum(roles == Role.UNSPIKED)),
        "spiked": int(np.sum(roles == Role.SPIKED)),
        "lines": [int(line) for line in case.series_lines(i)],
        "verdict": outcomes.verdict_of(i).word,
        "result": outcomes.text(i),
        "reasons": outcomes.reasons(i),
        "next_step": plan.next_step(outcomes, i) or None,
    }
