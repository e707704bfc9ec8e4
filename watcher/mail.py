"""What a mail says: first what to do, then what is affected, where the vials are, why, the numbers, the record.

One mail for the failures of an export, grouped by cause. Nothing here knows a
mail server, a clock or a queue.
"""

from __future__ import annotations

import math
from collections import Counter, defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import line_ranges
from rules import expectations, pipetting, plan
from rules.checks import Outcome
from rules.figures import several
from rules.outcomes import Verdict, measured
from watcher.names import target
from watcher.record import local_time

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator

    from numpy.typing import NDArray

    from rules.outcomes import Outcomes
    from watcher.record import Export

#: Longest subject that a telephone shows to its end.
MOST_SUBJECT = 120
#: Causes that one mail spells out; the rest is counted, and stands in the result files.
MOST_CAUSES = 12
#: Checks that judge the batch: their failure is one cause for all series of the analyte.
BATCH_CHECKS = ("check_standard", "bracket", "blank", "spiked_blank")
#: Series that a mail shows as plots.
MOST_PICTURES = 3


@dataclass(frozen=True, slots=True)
class Mail:
    """A mail before it has a recipient.

    Attributes
    ----------
    kind
        ``fail``, ``incomplete`` or ``problem``.
    keys
        What it reports, one key for each; a key is never mailed twice.
    after_seconds
        How long it waits: newer content of the export may settle the matter.
    series
        The series to show as plots, the first of each cause that is a series' own.
    """

    kind: str
    subject: str
    body: str
    keys: tuple[str, ...]
    after_seconds: float = 0.0
    series: tuple[int, ...] = ()

    def plain(self) -> dict[str, Any]:
        """Return the mail as JSON values."""
        return {
            "kind": self.kind,
            "subject": self.subject,
            "body": self.body,
            "keys": list(self.keys),
            "after_seconds": self.after_seconds,
        }


@dataclass(frozen=True, slots=True)
class _Cause:
    """Series that fail for one reason; `batch` is the check that failed for all of them, if it is one of a batch."""

    series: tuple[int, ...]
    batch: str | None = None

    @property
    def first(self) -> int:
        return self.series[0]


def mails(
    outcomes: Outcomes,
    export: Export,
    problems: tuple[str, ...],
    complete_after_seconds: float,
    known: Iterable[str],
) -> list[Mail]:
    """Return the mails that an evaluated export gives rise to, without what was mailed before.

    Parameters
    ----------
    outcomes, export
        The export, judged.
    problems
        What belongs to no series and must be seen.
    complete_after_seconds
        How long what is missing may still come.
    known
        Keys that were mailed for this export already.
    """
    mailed = set(known)
    written = []
    for kind, verdict, wait in (
        ("fail", Verdict.FAIL, 0.0),
        ("incomplete", Verdict.INCOMPLETE, complete_after_seconds),
    ):
        keys = {i: _key(kind, outcomes, i, export) for i in np.flatnonzero(outcomes.verdict == verdict).tolist()}
        new = {i: key for i, key in keys.items() if key not in mailed}
        if new:
            written.append(_of_series(kind, outcomes, export, list(new), tuple(new.values()), wait))
    keyed = {f"problem|{export.name}|{problem}": problem for problem in problems}
    unseen = {key: problem for key, problem in keyed.items() if key not in mailed}
    if unseen:
        written.append(_of_problems(export, list(unseen.values()), tuple(unseen)))
    return written


def _key(kind: str, outcomes: Outcomes, i: int, export: Export) -> str:
    case = outcomes.case
    parts = (case.sample(i), case.analyte(i), case.channel(i) or "", str(int(case.series.attempt[i])))
    return "|".join((kind, export.name, *parts, "+".join(outcomes.failed_checks(i))))


def refusal(name: str, sentence: str, remedy: str, sha256: str) -> Mail:
    """Return the mail about an export that gave no results."""
    body = _body(
        f"PROBLEM {name} was not evaluated",
        [
            ("DO", [remedy, "A changed export and a mended layout are taken in by themselves."]),
            ("HOLD", [f"Everything measured in {name}: it has no results. Other exports are not affected."]),
            ("WHY", [sentence]),
            ("RECORD", [f"export {name}, sha256 {sha256[:12]}"]),
        ],
    )
    told = sentence if sentence.startswith(name) else f"{name}: {sentence}"
    return Mail("problem", f"PROBLEM {_cut(told)}", body, (f"refused|{name}|{sha256}|{sentence}",))


def _of_problems(export: Export, sentences: list[str], keys: tuple[str, ...]) -> Mail:
    body = _body(
        f"PROBLEM in {export.name}",
        [
            ("DO", ["Correct what is named in the instrument's program and export again."]),
            ("HOLD", ["What is named is in no result, or not all of it; everything else was evaluated."]),
            ("WHY", _capped(sentences)),
            ("RECORD", _record(export, None)),
        ],
    )
    return Mail("problem", f"PROBLEM {export.name}: {_cut(sentences[0])}", body, keys)


def _of_series(
    kind: str, outcomes: Outcomes, export: Export, series: list[int], keys: tuple[str, ...], wait: float
) -> Mail:
    causes = _causes(outcomes, series)
    headline = f"{kind.upper()} {_names(outcomes, series)}: {outcomes.headline(causes[0].first)}"
    shown = causes[:MOST_CAUSES]
    more = len(causes) - len(shown)
    tail = [f"and {more} more: see the result files"] if more else []
    lines = [line for i in series for line in outcomes.case.series_lines(i)]
    body = _body(
        headline,
        [
            ("DO", list(dict.fromkeys(_do(outcomes, cause) for cause in shown)) + tail),
            ("HOLD", _hold(outcomes, series)),
            ("WHERE", [_where(outcomes, cause) for cause in shown] + _people(outcomes)),
            ("WHY", [_why(outcomes, cause) for cause in shown]),
            ("PLAN", list(_plans(outcomes, shown))),
            ("NUMBERS", [line for cause in shown for line in _numbers(outcomes, cause)]),
            ("RECORD", _record(export, lines)),
        ],
    )
    drawn = tuple(cause.first for cause in shown if cause.batch is None)[:MOST_PICTURES]
    return Mail(kind, _cut(headline, MOST_SUBJECT), body, keys, wait, drawn)


def _causes(outcomes: Outcomes, series: list[int]) -> list[_Cause]:
    """Group series by cause.

    A failed batch check is one cause for all series of its analyte, and so are one vessel that does not fit in several
    analytes, one faulty cell that they share, a stock out of its dates, and what the batch lacks; any other cause
    belongs to its series. What holds for a whole batch comes first.
    """
    groups: dict[tuple[Any, ...], list[int]] = defaultdict(list)
    for i in series:
        failed = outcomes.failed_checks(i)
        batch = next((name for name in BATCH_CHECKS if name in failed and "inputs" not in failed), None)
        faults = tuple(outcomes.case.faults.get(i, ()))
        lacks = outcomes.missing.get(i, "") if failed == ("incomplete",) else ""
        key: tuple[Any, ...] = (None, i)
        if i in outcomes.slips:
            key = (None, outcomes.case.sample(i), outcomes.slips[i])
        elif "stock" in failed and "inputs" not in failed:
            members = outcomes.case.series.members_of(i)
            late = members[outcomes.case.vessels.out_of_date[members]]
            key = ("stock", tuple(np.unique(outcomes.case.vessels.stock[late]).tolist()), failed)
        elif batch:
            key = (batch, int(outcomes.case.key[i]))
        elif faults:
            key = (None, faults)
        elif expectations.of_batch(outcomes.case, i, lacks):
            key = (None, lacks)
        groups[key].append(i)
    causes = [_Cause(tuple(group), key[0]) for key, group in groups.items()]
    return sorted(causes, key=lambda cause: cause.batch is None)


def _names(outcomes: Outcomes, series: list[int]) -> str:
    first = outcomes.case.name(series[0])
    attempt = int(outcomes.case.series.attempt[series[0]])
    first += f" (attempt {attempt})" if attempt > 1 else ""
    return first if len(series) == 1 else f"{first} and {len(series) - 1} more"


def _all_names(outcomes: Outcomes, series: Iterable[int]) -> str:
    return several(list(dict.fromkeys(outcomes.case.name(i) for i in series)), most=8)


def _do(outcomes: Outcomes, cause: _Cause) -> str:
    if cause.batch:
        samples = dict.fromkeys(outcomes.case.sample(i) for i in cause.series)
        return plan.batch_step(cause.batch, several(list(samples), most=8))
    sentence = plan.next_step(outcomes, cause.first) or "Look at the result files."
    lacks = outcomes.missing.get(cause.first, "")
    whole = (
        len(cause.series) == 1
        or cause.first in outcomes.slips
        or expectations.of_batch(outcomes.case, cause.first, lacks)
    )
    return sentence if whole else f"{sentence} The same holds for {_all_names(outcomes, cause.series[1:])}."


def _hold(outcomes: Outcomes, series: list[int]) -> list[str]:
    held = set(series)
    others = Counter(outcomes.verdict_of(i).word for i in range(len(outcomes.case)) if i not in held)
    listed = ", ".join(f"{count} {verdict}" for verdict, count in others.items())
    rest = f"The rest of this export is not affected by it: {listed}." if others else "It holds nothing else."
    return [f"Do not release {_all_names(outcomes, series)}.", rest]


def _where(outcomes: Outcomes, cause: _Cause) -> str:
    case = outcomes.case
    rows = [int(case.solutions.rows[s]) for i in cause.series for s in case.series.members_of(i).tolist()]
    parts = [_all_names(outcomes, cause.series)]
    positions = case.readings.position[rows]
    if np.isfinite(positions).any():
        parts.append(f"position {_positions(positions[np.isfinite(positions)])}")
    times = case.readings.measured_at[rows]
    if np.isfinite(times).any():
        begin, end = (local_time(float(t)) or "" for t in (np.nanmin(times), np.nanmax(times)))
        parts.append(f"measured {begin.replace('T', ' ')}" + (f" to {end[11:]}" if end != begin else ""))
    lines = [line for i in cause.series for line in case.series_lines(i)]
    parts.append(f"lines {line_ranges(lines)}")
    return ", ".join(parts)


def _positions(positions: NDArray[np.float64]) -> str:
    if (positions == np.round(positions)).all():
        return line_ranges(positions.astype(int).tolist())
    return several([f"{p:g}" for p in np.unique(positions).tolist()], most=12)


def _people(outcomes: Outcomes) -> list[str]:
    readings = outcomes.case.readings
    parts = [
        f"{word} {several(list(column.names))}"
        for word, column in (
            ("batch", readings.batch),
            ("analyst", readings.analyst),
            ("instrument", readings.instrument),
        )
        if column.names
    ]
    return [", ".join(parts)] if parts else []


def _why(outcomes: Outcomes, cause: _Cause) -> str:
    reasons = outcomes.failing_sentences(cause.first) or outcomes.reasons(cause.first)
    return f"{_all_names(outcomes, cause.series)}: {'; '.join(reasons)}"


def _plans(outcomes: Outcomes, causes: Iterable[_Cause]) -> Iterator[str]:
    """Yield which solutions to prepare for the series whose causes are their own."""
    for cause in causes:
        found = None if cause.batch else plan.solutions(outcomes, cause.first)
        if found is not None:
            yield f"{outcomes.case.name(cause.first)}: {pipetting.sentence(found, outcomes.case.method.vessel_unit)}"


def _numbers(outcomes: Outcomes, cause: _Cause) -> list[str]:
    case, i = outcomes.case, cause.first
    lines = [
        f"{case.name(i)}: {measured(check, case, i)}"
        for check in outcomes.deciding(i, Outcome.FAIL)
        if math.isfinite(check.value[i])
    ]
    return [*lines, *(f"{case.name(k)}: result {outcomes.text(k)}" for k in cause.series[:8])]


def _record(export: Export, lines: list[int] | None) -> list[str]:
    entries = [f"export {export.name}, revision {export.revision}, sha256 {export.sha256[:12]}"]
    if lines:
        entries.append(f"lines {line_ranges(lines)}")
    entries.append(f"results {target(export.name, export.revision, export.accepted_at, 'csv')}")
    entries.append(f"layout {export.layout}, settings {export.settings[:12]}, program {export.program}")
    return entries


def _capped(sentences: list[str]) -> list[str]:
    rest = len(sentences) - MOST_CAUSES
    return sentences[:MOST_CAUSES] + ([f"and {rest} more"] if rest > 0 else [])


def _cut(sentence: str, most: int = 90) -> str:
    """Shorten a sentence for a subject, between words where that leaves the better part of it."""
    if len(sentence) <= most:
        return sentence
    whole, blank, _ = sentence[:most].rpartition(" ")
    return f"{whole if blank and len(whole) > most // 2 else sentence[: most - 1].rstrip()}…"


def _body(headline: str, sections: list[tuple[str, list[str]]]) -> str:
    """Return headline and sections, one paragraph a line; the letter breaks lines to a width."""
    parts = [headline]
    for title, paragraphs in sections:
        if paragraphs:
            dash = "- " if len(paragraphs) > 1 else ""
            parts.append("\n".join([title, *(f"{dash}{paragraph}" for paragraph in paragraphs)]))
    return "\n\n".join(parts) + "\n"
