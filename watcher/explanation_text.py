"""An explanation in words: tables and sentences of 80 columns, the summary first. Decides nothing."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role, line_ranges
from rules import plan
from rules.figures import several
from watcher.scalars import duration
from watcher.terminal import heading, lines, short, table, word

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from rich.console import Console

    from rules.outcomes import Outcomes
    from watcher.explanation import Explanation, ReadingAccount

#: Most distinct labels, cells and series that are spelt out.
MOST_ROWS = 200
#: Where the text behind a key begins.
_KEY = 13


def explain(out: Console, explanation: Explanation, *, with_lines: bool) -> None:
    """Print the summary, the labels and cells, the series, the results and the mails of an export."""
    read(out, explanation.account, with_lines=with_lines)
    outcomes = explanation.evaluated.outcomes
    _series(out, outcomes)
    _results(out, outcomes)
    _mails(out, explanation)


def read(out: Console, account: ReadingAccount, *, with_lines: bool) -> None:
    """Print how an export was read."""
    _summary(out, account)
    _set_aside(out, account)
    _labels(out, account)
    _odd_cells(out, account)
    if with_lines:
        heading(out, "Lines")
        rows = [(str(one.line), one.fate, one.why) for one in account.line_fates()]
        table(out, ("line", "fate", "why"), rows, numbers=(0,))


def _summary(out: Console, account: ReadingAccount) -> None:
    readings = account.readings
    used: dict[str, list[str]] = {}
    for use in readings.columns:
        if use.fields:
            used.setdefault(", ".join(use.fields), []).append(use.header)
    ignored = [use.header or "(no header)" for use in readings.columns if not use.fields]
    heading(out, f"{account.name}: read with layout '{account.layout.layout}'")
    read_lines, faulty = len(account.read_lines), len(account.fault_lines)
    cannot = f" ({faulty} of them with a cell that cannot be used)" if faulty else ""
    _keyed(out, "claimed by", account.claimed_by)
    _keyed(out, "lines", f"{readings.lines}: {read_lines} read{cannot}, {len(readings.set_aside)} set aside")
    _keyed(out, "readings", f"{len(readings)} of {several(list(readings.analyte.names), most=12)}")
    for number, (fields, headers) in enumerate(used.items()):
        _keyed(out, "" if number else "columns", f"{fields} ← {several(headers, most=12)}")
    _keyed(out, "ignored", several(ignored, most=30) if ignored else "none")
    if readings.heading:
        _keyed(out, "heading", ", ".join(f"{key} = {value}" for key, value in readings.heading.items()))
    if account.problems:
        heading(out, "Problems")
        lines(out, account.problems)


def _keyed(out: Console, key: str, text: str) -> None:
    """Print a key and its text, the further lines of which stand below the first."""
    wrapped = textwrap.wrap(text, out.width - _KEY, break_on_hyphens=False) or [""]
    lines(out, [f"{key:<{_KEY}}{wrapped[0]}", *(f"{'':<{_KEY}}{line}" for line in wrapped[1:])])


def _set_aside(out: Console, account: ReadingAccount) -> None:
    reasons: dict[str, list[int]] = {}
    for aside in account.readings.set_aside:
        reasons.setdefault(aside.reason, []).append(aside.line)
    if reasons:
        heading(out, "Set aside")
        table(out, ("lines", "why"), [(line_ranges(at), reason) for reason, at in reasons.items()])


def _labels(out: Console, account: ReadingAccount) -> None:
    uses = account.readings.labels
    heading(out, "Labels, and how they were understood")
    rows = [(u.label, u.role or "set aside", u.sample, u.level, str(u.rows), u.rule) for u in uses[:MOST_ROWS]]
    _table_of_used(out, ("label", "role", "sample", "level", "rows", "by"), rows, numbers=(4,))
    _and_more(out, len(uses), "labels")


def _table_of_used(
    out: Console, header: Sequence[str], rows: Sequence[Sequence[str]], *, numbers: tuple[int, ...] = ()
) -> None:
    """Print a table without the columns in which nothing stands: 80 columns are few."""
    used = [at for at in range(len(header)) if any(row[at] for row in rows)]
    shown = [tuple(row[at] for at in used) for row in rows]
    table(out, [header[at] for at in used], shown, numbers=[used.index(at) for at in numbers if at in used])


def _odd_cells(out: Console, account: ReadingAccount) -> None:
    odd = account.odd_cells
    heading(out, "Cells that are no plain numbers" if odd else "Every cell of the columns of numbers is a number")
    if odd:
        rows = [
            (cell.text or "(empty)", cell.column, line_ranges(cell.lines), cell.treatment) for cell in odd[:MOST_ROWS]
        ]
        table(out, ("cell", "column", "lines", "taken for"), rows)
        _and_more(out, len(odd), "cells")
    faults = account.readings.faults
    if faults:
        heading(out, "Cells that cannot be used")
        lines(out, (str(fault) for fault in faults[:MOST_ROWS]))
        _and_more(out, len(faults), "cells")


def _and_more(out: Console, count: int, what: str) -> None:
    if count > MOST_ROWS:
        lines(out, [f"and {count - MOST_ROWS} more {what}"])


def _series(out: Console, outcomes: Outcomes) -> None:
    """Print which solutions were put together."""
    case = outcomes.case
    heading(out, "Series: which solutions belong together")
    rows = []
    for i in range(min(len(case), MOST_ROWS)):
        roles = case.readings.role[case.solutions.rows[case.series.members_of(i)]]
        unspiked, spiked = (int(np.sum(roles == role)) for role in (Role.UNSPIKED, Role.SPIKED))
        attempt = str(case.series.attempt[i])
        rows.append((case.name(i), attempt, str(unspiked), str(spiked), line_ranges(case.series_lines(i))))
    table(out, ("sample", "attempt", "unspiked", "spiked", "lines"), rows, numbers=(1, 2, 3))
    _and_more(out, len(case), "series")


def _results(out: Console, outcomes: Outcomes) -> None:
    heading(out, "Results")
    results(out, outcomes)
    notes = [(i, plan.next_step(outcomes, i)) for i in range(min(len(outcomes.case), MOST_ROWS)) if outcomes.reasons(i)]
    for i, step in notes:
        heading(out, f"{outcomes.case.name(i)}: {outcomes.verdict_of(i).word}")
        sentences = [("why", reason) for reason in outcomes.reasons(i)] + ([("do", step)] if step else [])
        lines(out, _hanging(out, sentences))


def _hanging(out: Console, sentences: Iterable[tuple[str, str]]) -> Iterable[str]:
    for key, text in sentences:
        yield from textwrap.wrap(
            text, out.width, initial_indent=f"{key:<5}", subsequent_indent=" " * 5, break_on_hyphens=False
        )


def results(out: Console, outcomes: Outcomes) -> None:
    """Print one row for each series."""
    case = outcomes.case
    rows = []
    for i in range(min(len(case), MOST_ROWS)):
        name = case.name(i) + (f" (attempt {case.series.attempt[i]})" if case.series.attempt[i] > 1 else "")
        rows.append((name, word(outcomes.verdict_of(i).word), short(outcomes.text(i))))
    table(out, ("sample", "verdict", "result"), rows)
    _and_more(out, len(case), "series")


def _mails(out: Console, explanation: Explanation) -> None:
    heading(out, "Mails that would go" if explanation.mails else "No mail would go")
    for letter, to in explanation.mails:
        wait = f" (after {duration(letter.after_seconds)}, unless newer content comes)" if letter.after_seconds else ""
        recipients = ", ".join(to) or "nobody: the settings name no address for it"
        lines(out, [f"To: {recipients}", f"Subject: {letter.subject}{wait}", "", letter.body])
