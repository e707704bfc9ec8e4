"""What `once` shows and which exit code it ends with."""

from __future__ import annotations

from typing import TYPE_CHECKING

from watcher.exit_codes import ALL_PASS, NOT_DONE, SAMPLE_FAILS
from watcher.names import target
from watcher.terminal import console, heading, lines, table, word

if TYPE_CHECKING:
    from collections.abc import Iterable

    from rich.text import Text

    from watcher.assessment import Assessed
    from watcher.ledger import Ledger
    from watcher.service import OnceReport
    from watcher.service_settings import ServiceSettings

#: Verdicts that keep an export from passing.
FAILING = ("fail", "incomplete")


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
