"""The command `status`: how the service is, from the heartbeat that it leaves and the lock that it holds."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

from watcher.clock import moment
from watcher.exit_codes import ATTENTION, NOT_RUNNING, WELL
from watcher.health import read_status
from watcher.inspection import settings_of
from watcher.terminal import console, heading, lines, table, word

if TYPE_CHECKING:
    from pathlib import Path

    from rich.console import Console
    from rich.text import Text

    from watcher.health import Status
    from watcher.settings import Settings

#: A heartbeat older than so many scans says that the service hangs.
STALE_SCANS = 6
#: … but never sooner than this, since an evaluation may take its time.
STALE_SECONDS = 180.0
#: Open failures that the terminal lists; the page index.html lists more.
MOST_FAILURES = 20


def run(config: Path, *, as_json: bool = False) -> int:
    """Tell how the service is; return the exit code."""
    settings = settings_of(config)
    if settings is None:
        return NOT_RUNNING
    records = settings.path(settings.file.folders.records)
    account = _Account(read_status(records), settings, datetime.now(UTC))
    if as_json:
        print(json.dumps(account.plain(), ensure_ascii=False, indent=1))  # noqa: T201 - nothing may wrap it
    elif account.beat is None:
        lines(console(), [f"Not running: no service has worked with {records} yet. Start it with `spikewarden watch`."])
    else:
        account.show(console(), account.beat)
    return account.code


@dataclass(frozen=True, slots=True)
class _Account:
    """What is known of a service, in words.

    Attributes
    ----------
    status, settings, now
        What was found, the settings that say how often it looks, and the time.
    """

    status: Status
    settings: Settings
    now: datetime

    @property
    def beat(self) -> dict[str, Any] | None:
        return self.status.heartbeat

    @property
    def age(self) -> float:
        """Seconds since the last heartbeat."""
        return (self.now - moment(self.beat["written_at"])).total_seconds() if self.beat else float("inf")

    @property
    def hangs(self) -> bool:
        return self.status.held and self.age > max(STALE_SECONDS, STALE_SCANS * self.settings.file.watching.scan)

    @property
    def code(self) -> int:
        if not self.status.held or self.beat is None:
            return NOT_RUNNING
        return ATTENTION if self.attention() or self.beat.get("open_failures") else WELL

    def plain(self) -> dict[str, Any]:
        """Return it for machines."""
        return {
            "running": self.status.held and self.beat is not None,
            "exit": self.code,
            "attention": self.attention(),
            "heartbeat": self.beat,
        }

    def show(self, out: Console, beat: dict[str, Any]) -> None:
        """Print it."""
        if self.status.held:
            lines(out, [f"Running since {_local(beat['started_at'])}, pid {beat['pid']}."])
        else:
            lines(out, [f"Not running. Last heartbeat {_length(self.age)} ago, at {_local(beat['written_at'])}."])
        counts = ", ".join(f"{count} {state}" for state, count in sorted(beat["counts"].items())) or "none yet"
        waiting, refused = (beat[what]["count"] for what in ("undelivered_mails", "refused_mails"))
        facts = [
            f"exports      {counts}",
            f"last export  {beat['last_export'] or 'none since start'}",
            f"last scan    {_local(beat['last_scan_at']) if beat['last_scan_at'] else 'none yet'}",
            f"mails        {waiting} waiting, {refused} refused by the server",
            f"files        {beat['undelivered_files']['count']} waiting",
        ]
        lines(out, facts)
        self._latest(out, beat.get("latest", []))
        self._failures(out, beat.get("open_failures", []))
        if attention := self.attention():
            heading(out, "Needs attention")
            lines(out, attention)

    @staticmethod
    def _latest(out: Console, latest: list[dict[str, Any]]) -> None:
        if latest:
            heading(out, "Latest exports")
            rows: list[tuple[str | Text, ...]] = [
                (
                    each["name"],
                    str(each["revision"] or ""),
                    _local(each["accepted_at"])[:16],
                    ", ".join(f"{count} {verdict}" for verdict, count in each["counts"].items()) or each["state"],
                )
                for each in latest
            ]
            table(out, ("export", "rev.", "taken in", "series"), rows)

    @staticmethod
    def _failures(out: Console, failures: list[dict[str, Any]]) -> None:
        if not failures:
            return
        heading(out, f"Open failures: {len(failures)}")
        rows: list[tuple[str | Text, ...]] = [
            (
                " ".join(part for part in (each["sample"], each["analyte"], each["channel"]) if part),
                word(each["verdict"]),
                each["name"],
                _local(each["opened_at"])[:16],
            )
            for each in failures[-MOST_FAILURES:]
        ]
        table(out, ("series", "verdict", "export", "since"), rows)
        if len(failures) > MOST_FAILURES:
            lines(out, [f"and {len(failures) - MOST_FAILURES} older ones: index.html lists them"])
        lines(out, ['Close one with: spikewarden note EXPORT --by NAME "what was done"'])

    def attention(self) -> list[str]:
        """Return what is wrong, in sentences."""
        if self.beat is None:
            return []
        found = [f"The service holds its records and has not moved for {_length(self.age)}: restart it."]
        found = [*(found if self.hangs else []), *self.beat["problems"]]
        for export in self.beat["refused"]:
            problem = export["problem"] or "not evaluated"
            prefix = "" if problem.startswith(export["name"]) else f"{export['name']}: "
            found.append(f"{export['state']}: {prefix}{problem}")
        for what, told in (
            ("undelivered_mails", "mails wait"),
            ("refused_mails", "mails were refused for good"),
            ("undelivered_files", "result files wait"),
        ):
            waiting = self.beat[what]
            if waiting["count"] and waiting["last_error"]:
                found.append(f"{waiting['count']} {told}: {waiting['last_error']}")
        return found


def _length(seconds: float) -> str:
    """Write a length of time roughly."""
    for size, unit in ((86400.0, "days"), (3600.0, "hours"), (60.0, "minutes")):
        if seconds >= 2 * size:
            return f"{seconds / size:.0f} {unit}"
    return f"{seconds:.0f} s"


def _local(utc: str) -> str:
    """Return a moment in local time with its offset, for people."""
    return moment(utc).astimezone().strftime("%Y-%m-%d %H:%M:%S %z")
