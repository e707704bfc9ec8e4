"""The command `history`: recoveries, slopes and scatter over months, and how many series other limits would fail.

Everything is read from the JSON records in the results folder, of each export its newest revision. Nothing is written.
"""

from __future__ import annotations

import json
from collections import defaultdict
from dataclasses import dataclass
from statistics import median
from typing import TYPE_CHECKING, Any

from rich.progress import Progress

from rules.limits import DEFAULTS, CheckLimits, LimitUnreadable, parse_check_limits
from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.inspection import settings_of
from watcher.terminal import console, heading, lines, table

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence
    from pathlib import Path

#: Checks whose values are shown month by month, with the words above their tables.
SHOWN = {
    "recovery": "Recovery (%)",
    "residual": "Largest residual (%)",
    "check_standard": "Check standards (% of nominal, the farthest)",
}
_SHOWN = {"slope": "Slope of the additions", **SHOWN}
#: From so many records on, progress is shown while they are read.
MANY = 200


@dataclass(frozen=True, slots=True)
class Seen:
    """One series of one record.

    Attributes
    ----------
    month, export, sample, analyte
        When it was taken in, and what it is; a channel stands with its analyte.
    verdict, slope
        As in the record; no slope where no line was computed.
    values
        Check to what it judged; checks that were not evaluated are left out.
    failed
        Checks that failed.
    """

    month: str
    export: str
    sample: str
    analyte: str
    verdict: str
    slope: float | None
    values: Mapping[str, float]
    failed: frozenset[str]


def run(config: Path, *, analyte: str | None, since: str | None, limits: Sequence[str], as_json: bool = False) -> int:
    """Show the history; return the exit code.

    Parameters
    ----------
    config
        The settings that name the results folder.
    analyte, since
        Only this analyte, only from this month (``2026-09``) on.
    limits
        Limits to try, ``check=limit``.
    """
    settings = settings_of(config)
    if settings is None:
        return NOT_DONE
    err = console(error=True)
    try:
        tried = dict(map(_tried, limits))
    except LimitUnreadable as unreadable:
        lines(err, [str(unreadable)])
        return NOT_DONE
    folder = settings.path(settings.file.folders.results)
    broken: list[str] = []
    seen = [
        one
        for record in _records(folder, broken)
        for one in _series(record)
        if (analyte is None or one.analyte.split()[0] == analyte) and (since is None or one.month >= since)
    ]
    lines(err, broken)
    if as_json:
        plain = {"months": list(_months(seen)), "limits": [_other(name, tried[name], seen) for name in tried]}
        print(json.dumps(plain, ensure_ascii=False, indent=1))  # noqa: T201 - nothing may wrap it
    else:
        _show(seen, tried, folder)
    return NOT_DONE if broken else ALL_PASS


def _tried(text: str) -> tuple[str, CheckLimits]:
    """Read one limit to try.

    Raises
    ------
    LimitUnreadable
        If it names no check that judges a number, or its limit cannot be read.
    """
    name, _, limit = text.partition("=")
    if name not in DEFAULTS or name == "bracket":
        known = ", ".join(check for check in DEFAULTS if check != "bracket")
        raise LimitUnreadable(
            f"--limit: expected CHECK=LIMIT with one of {known}, got '{text}'. Nothing was tried. Write for example "
            f'--limit "recovery=80 to 120 %".'
        )
    return name, parse_check_limits(limit)


def _records(folder: Path, broken: list[str]) -> Iterator[dict[str, Any]]:
    """Yield the newest record of each export, oldest first; what cannot be read is named."""
    newest: dict[str, dict[str, Any]] = {}
    paths = sorted(folder.glob("*/*.json"))
    with Progress(console=console(error=True), transient=True, disable=len(paths) < MANY) as progress:
        for path in progress.track(paths, description="reading records"):
            try:
                record = json.loads(path.read_bytes())
                export = record["export"]
                known = newest.get(export["name"])
                if known is None or known["export"]["revision"] < export["revision"]:
                    newest[export["name"]] = record
            except (OSError, ValueError, KeyError, TypeError) as error:
                broken.append(f"{path}: cannot be read as a record ({error}). It is left out. See `audit`.")
    yield from sorted(newest.values(), key=lambda record: record["export"]["accepted_at"])


def _series(record: Mapping[str, Any]) -> Iterator[Seen]:
    for one in record["series"]:
        judged = [check for check in one["checks"] if check["outcome"] != "not evaluated"]
        yield Seen(
            month=record["export"]["accepted_at"][:7],
            export=record["export"]["name"],
            sample=one["sample"],
            analyte=" ".join(part for part in (one["analyte"], one["channel"]) if part),
            verdict=one["verdict"],
            slope=one["fit"]["slope"] if one["fit"] else None,
            values={check["check"]: check["value"] for check in judged if check["value"] is not None},
            failed=frozenset(check["check"] for check in judged if check["outcome"] == "fail"),
        )


def _months(seen: Iterable[Seen]) -> Iterator[dict[str, Any]]:
    """Return one line for each month and analyte: medians, and the lowest and highest value."""
    groups: dict[tuple[str, str], list[Seen]] = defaultdict(list)
    for one in seen:
        groups[one.month, one.analyte].append(one)
    for (month, analyte), members in sorted(groups.items()):
        columns = {"slope": [one.slope for one in members if one.slope is not None]}
        columns |= {name: [one.values[name] for one in members if name in one.values] for name in SHOWN}
        yield {
            "month": month,
            "analyte": analyte,
            "series": len(members),
            "failed": sum(one.verdict == "fail" for one in members),
        } | {
            name: {"n": len(values), "median": median(values), "low": min(values), "high": max(values)}
            if values
            else None
            for name, values in columns.items()
        }


def _other(name: str, limits: CheckLimits, seen: Iterable[Seen]) -> dict[str, Any]:
    """Count what a check fails now, and what it would fail under other limits."""
    judged = [one for one in seen if name in one.values]
    would = [one for one in judged if limits.fail is not None and not _holds(limits, one.values[name])]
    return {
        "check": name,
        "limit": limits.text,
        "judged": len(judged),
        "fail_now": sum(name in one.failed for one in judged),
        "would_fail": len(would),
        "series": [{"export": one.export, "sample": one.sample, "analyte": one.analyte} for one in would],
    }


def _holds(limits: CheckLimits, value: float) -> bool:
    limit = limits.fail
    if limit is None:
        return True
    return limit.low <= value <= limit.high if limit.closed else limit.low < value < limit.high


def _show(seen: Sequence[Seen], tried: Mapping[str, CheckLimits], folder: Path) -> None:
    out = console()
    if not seen:
        lines(out, [f"No series in the records of {folder} yet."])
        return
    months = list(_months(seen))
    heading(out, "Series")
    counts = [(line["month"], line["analyte"], str(line["series"]), str(line["failed"])) for line in months]
    table(out, ("month", "analyte", "series", "failed"), counts, numbers=(2, 3))
    for name, title in _SHOWN.items():
        rows = [(line["month"], line["analyte"], *_figures(line[name])) for line in months if line[name] is not None]
        if rows:
            heading(out, title)
            table(out, ("month", "analyte", "n", "median", "lowest", "highest"), rows, numbers=(2, 3, 4, 5))
    if tried:
        heading(out, "With other limits")
        others = [_other(name, tried[name], seen) for name in tried]
        table(
            out,
            ("check", "limit", "judged", "fail now", "would fail"),
            [(o["check"], o["limit"], str(o["judged"]), str(o["fail_now"]), str(o["would_fail"])) for o in others],
            numbers=(2, 3, 4),
        )
        lines(out, ["", "Only values that were judged are counted. Changing a limit is the laboratory's decision."])


def _figures(value: Mapping[str, float]) -> tuple[str, ...]:
    """Write a count, and median, lowest and highest value to three digits."""
    return str(value["n"]), *(f"{value[name]:.3g}" for name in ("median", "low", "high"))
