"""What `explain` shows of an export: how it was understood, what was computed, which mails would go. Writes nothing."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import line_ranges
from rules import plan
from rules.figures import several
from watcher import mail
from watcher.scalars import duration
from watcher.terminal import heading, lines, short, table, word

if TYPE_CHECKING:
    from rich.console import Console

    from rules.outcomes import Outcomes
    from watcher.evaluation import Evaluated
    from watcher.mail import Mail

#: Most distinct labels and series that the summary spells out.
MOST_ROWS = 200


def explain(out: Console, evaluated: Evaluated, complete_after_seconds: float) -> None:
    """Print the summary, the labels, the results and the mails of an export."""
    _summary(out, evaluated)
    _labels(out, evaluated.outcomes)
    _cells(out, evaluated.outcomes)
    _results(out, evaluated.outcomes)
    letters = mail.mails(evaluated.outcomes, evaluated.export, evaluated.problems, complete_after_seconds, ())
    _mails(out, letters)


def _summary(out: Console, evaluated: Evaluated) -> None:
    readings = evaluated.outcomes.case.readings
    claims = evaluated.layout.claims
    why = [f"file {claims.file}" if claims.file else "", f"text {claims.text.pattern}" if claims.text else ""]
    used = [f"{use.header} → {', '.join(use.fields)}" for use in readings.columns if use.fields]
    ignored = [use.header or "(no header)" for use in readings.columns if not use.fields]
    heading(out, f"{evaluated.export.name}: read with layout '{evaluated.layout.layout}'")
    read = len(np.unique(readings.line))
    sentences = [
        f"claimed by   {' and '.join(part for part in why if part)}",
        f"lines        {readings.lines}: {read} with readings, {len(readings.set_aside)} set aside",
        f"readings     {len(readings)} of {several(list(readings.analyte.names), most=12)}",
        f"columns      {several(used, most=30)}",
    ]
    if ignored:
        sentences.append(f"ignored      {several(ignored, most=30)}")
    if readings.heading:
        sentences.append(f"heading      {', '.join(f'{k} = {v}' for k, v in readings.heading.items())}")
    lines(out, sentences)
    reasons: dict[str, list[int]] = {}
    for aside in readings.set_aside:
        reasons.setdefault(aside.reason, []).append(aside.line)
    if reasons:
        heading(out, "Set aside")
        table(out, ("lines", "why"), [(line_ranges(at), reason) for reason, at in reasons.items()])
    if evaluated.problems:
        heading(out, "Problems")
        lines(out, evaluated.problems)


def _labels(out: Console, outcomes: Outcomes) -> None:
    uses = outcomes.case.readings.labels
    heading(out, "Labels, and how they were understood")
    rows = [(u.label, u.role, u.sample, u.level, str(u.rows), u.rule) for u in uses[:MOST_ROWS]]
    table(out, ("label", "role", "sample", "level", "rows", "by"), rows, numbers=(4,))
    if len(uses) > MOST_ROWS:
        lines(out, [f"and {len(uses) - MOST_ROWS} more labels"])


def _cells(out: Console, outcomes: Outcomes) -> None:
    faults = outcomes.case.readings.faults
    if faults:
        heading(out, "Cells that cannot be used")
        lines(out, [str(fault) for fault in faults[:MOST_ROWS]])


def _results(out: Console, outcomes: Outcomes) -> None:
    heading(out, "Results")
    results(out, outcomes)
    notes = [(i, plan.next_step(outcomes, i)) for i in range(min(len(outcomes.case), MOST_ROWS)) if outcomes.reasons(i)]
    for i, step in notes:
        heading(out, f"{outcomes.case.name(i)}: {outcomes.verdict_of(i).word}")
        lines(out, [f"why  {reason}" for reason in outcomes.reasons(i)])
        if step:
            lines(out, [f"do   {step}"])


def results(out: Console, outcomes: Outcomes) -> None:
    """Print one row for each series."""
    case = outcomes.case
    shown = range(min(len(case), MOST_ROWS))
    rows = []
    for i in shown:
        name = case.name(i) + (f" (attempt {case.series.attempt[i]})" if case.series.attempt[i] > 1 else "")
        rows.append((name, word(outcomes.verdict_of(i).word), short(outcomes.text(i))))
    table(out, ("sample", "verdict", "result"), rows)
    if len(case) > MOST_ROWS:
        lines(out, [f"and {len(case) - MOST_ROWS} more series"])


def _mails(out: Console, letters: list[Mail]) -> None:
    heading(out, "Mails that would go" if letters else "No mail would go")
    for letter in letters:
        wait = f" (after {duration(letter.after_seconds)}, unless newer content comes)" if letter.after_seconds else ""
        lines(out, [f"Subject: {letter.subject}{wait}", "", letter.body])
