"""What `once` shows and which exit code it ends with."""

from __future__ import annotations

import json
from contextlib import contextmanager
from dataclasses import asdict
from typing import TYPE_CHECKING

from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

from watcher.exit_codes import ALL_PASS, NOT_DONE, SAMPLE_FAILS
from watcher.names import target
from watcher.terminal import console, heading, lines, table, word

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator

    from rich.text import Text

    from watcher.assessment import Assessed
    from watcher.ledger import Ledger
    from watcher.service import OnceReport
    from watcher.service_settings import ServiceSettings

#: From so many exports on, progress is shown.
MANY = 5
#: Verdicts that keep an export from passing.
FAILING = ("fail", "incomplete")


@contextmanager
def progress() -> Iterator[Callable[[int, int], None]]:
    """Show on a terminal how many exports are done, where it takes a while; yields what takes (done, in all)."""
    err = console(error=True)
    with Progress(TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), console=err, transient=True,
                  disable=not err.is_terminal) as bar:  # fmt: skip
        task = bar.add_task("evaluating", total=None, visible=False)

        def told(done: int, count: int) -> None:
            bar.update(task, completed=done, total=count, visible=count >= MANY)

        yield told


def show(report: OnceReport, settings: ServiceSettings, ledger: Ledger) -> int:
    """Print what was taken in to standard output, what is not done to standard error; return the exit code."""
    out = console()
    if not report.assessed:
        lines(out, ["Nothing new."])
    else:
        heading(out, "Taken in")
        table(out, ("export", "state", "verdicts", "results"), (_row(each) for each in report.assessed))
    failing = [each for each in report.assessed if any(each.counts.get(verdict) for verdict in FAILING)]
    if failing:
        heading(out, "Not passed")
        table(out, ("export", "sample", "verdict"), _failing(failing, ledger))
    undone = list(_undone(report))
    if undone:
        lines(console(error=True), undone)
    elif report.assessed:
        lines(out, ["", f"Results are in {settings.results}"])
    return NOT_DONE if undone else SAMPLE_FAILS if failing else ALL_PASS


def show_json(report: OnceReport, ledger: Ledger) -> int:
    """Print what was taken in and what is not done as JSON; return the exit code."""
    exports = [
        {
            "name": each.export.name,
            "state": each.export.state,
            "revision": each.export.revision if each.export.state == "done" else None,
            "counts": dict(each.counts),
            "problem": each.export.problem,
            "series": [asdict(series) for series in ledger.series_of(each.export.id)],
        }
        for each in report.assessed
    ]
    undone = list(_undone(report))
    fails = any(each.counts.get(verdict) for each in report.assessed for verdict in FAILING)
    code = NOT_DONE if undone else SAMPLE_FAILS if fails else ALL_PASS
    print(json.dumps({"exit": code, "exports": exports, "undone": undone}, ensure_ascii=False, indent=1))  # noqa: T201
    return code


def _row(each: Assessed) -> tuple[str | Text, ...]:
    export = each.export
    counts = ", ".join(f"{count} {verdict}" for verdict, count in sorted(each.counts.items()))
    file = target(export.name, export.revision, export.accepted_at, "csv") if export.state == "done" else ""
    return export.name, word(export.state), counts, file


def _failing(failing: Iterable[Assessed], ledger: Ledger) -> Iterable[tuple[str | Text, ...]]:
    for each in failing:
        for series in ledger.series_of(each.export.id):
            if series.verdict in FAILING:
                name = " ".join(part for part in (series.sample, series.analyte, series.channel) if part)
                yield each.export.name, name, word(series.verdict)


def _undone(report: OnceReport) -> Iterable[str]:
    for each in report.assessed:
        if each.export.state == "superseded":
            continue  # another export's content: nothing is left to do
        if each.export.state != "done":
            problem = each.export.problem or "its last line is not there yet"
            prefix = "" if problem.startswith(each.export.name) else f"{each.export.name}: "
            yield f"{each.export.state}: {prefix}{problem}"
        elif each.export.problem:
            yield from (f"problem: {each.export.name}: {problem}" for problem in each.export.problem.split("\n"))
    yield from (f"not settled: {name} was still being written. Run once again later." for name in report.unsettled)
    yield from report.troubles
    for mail in report.undelivered_mails:
        reason = mail.last_error or "not tried"
        yield f"undelivered: mail to {mail.address}: {mail.subject} ({reason}). It stays queued."
    for file in report.undelivered_files:
        yield f"undelivered: {file.target} ({file.last_error or 'not tried'}). It stays queued."
    if report.stopped:
        yield "Stopped before everything was done. Run once again."
