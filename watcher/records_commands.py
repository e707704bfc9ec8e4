"""The commands `adopt`, `again`, `note`, `audit` and `replay`: what people ask of the records.

`again`, `note` and `adopt` reach a running service through its requests; where none runs they do it themselves.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from watcher.audit import open_audit
from watcher.errors import WatcherError
from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.instance import Instance, is_held
from watcher.ledger import LEDGER_NAME, Ledger
from watcher.ledger_view import LedgerBusy
from watcher.requests import new_request, submit
from watcher.settings import SettingsInvalid, compile_snapshot, read_files
from watcher.terminal import console, lines

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.audit import Audit, Finding
    from watcher.requests import Request
    from watcher.settings import Settings

#: Something was altered or cannot be computed again.
ALTERED = 1


def ask(config: Path, kind: str, export: str, by: str, why: str) -> int:
    """Ask the running service, or do it here."""
    err = console(error=True)
    try:
        settings = compile_snapshot(read_files(config))
        request = new_request(kind, export, by, why)
        records = settings.path(settings.file.folders.records)
        if not (records / LEDGER_NAME).exists():
            lines(err, [f"Expected the records of a service in {records}, found none. Start `watch` or `once` first."])
            return NOT_DONE
        sentence = _ask(settings, records, request)
    except (SettingsInvalid, WatcherError) as error:
        lines(err, [str(error)])
        return NOT_DONE
    lines(console(), [sentence])
    return ALL_PASS


def _ask(settings: Settings, records: Path, request: Request) -> str:
    if is_held(records):
        submit(records, request)
        return "Handed to the running service, which does it within seconds; `audit` shows it then."
    with Instance(records), Ledger(records) as ledger:
        if request.kind == "adopt":
            number = ledger.adopt_settings(settings.snapshot.body, request.by, request.why)
            return f"Adopted as settings {number}."
        ledger.do(request)
    return "Recorded. It is evaluated at the next start." if request.kind == "again" else "Recorded."


def audit(config: Path, result: str | None) -> int:
    """Tell the story of a result, or check everything."""
    return _look(config, result, 0)


def replay(config: Path, result: str | None, last: int) -> int:
    """Compute a result again, or the last ones."""
    return _look(config, result, last)


def _look(config: Path, result: str | None, last: int) -> int:
    out, err = console(), console(error=True)
    try:
        settings = compile_snapshot(read_files(config))
        records, results = (settings.path(p) for p in (settings.file.folders.records, settings.file.folders.results))
        if not (records / LEDGER_NAME).exists():
            lines(err, [f"Expected a ledger in {records}, found none. Nothing to look at."])
            return ALTERED
        with open_audit(records, results) as found:
            seen, running = _examine(found, result, last), found.running
        if running and seen.findings:
            # Something may have been replaced or delivered since the view was taken: only what lasts is a finding.
            with open_audit(records, results) as found:
                again = _examine(found, result, last).findings
            seen = replace(seen, findings=[each for each in seen.findings if each in again])
    except (SettingsInvalid, WatcherError) as error:
        lines(err, [str(error)])
        return NOT_DONE if isinstance(error, LedgerBusy) else ALTERED
    lines(err if seen.findings or not seen.known else out, [str(each) for each in seen.findings] or seen.words)
    return ALTERED if seen.findings or not seen.known else ALL_PASS


@dataclass(frozen=True, slots=True)
class _Seen:
    """What a look found wrong, what to say where it found nothing, and whether there was something to look at."""

    findings: list[Finding]
    words: list[str]
    known: bool = True


def _examine(found: Audit, result: str | None, last: int) -> _Seen:
    if result is None and not last:
        return _Seen(found.all(), ["Every entry, copy and delivered result file is as it was recorded."])
    exports = found.done(last) if result is None else [each for each in [found.find(result)] if each is not None]
    if result is not None and not exports:
        return _Seen(
            [], [f"No result and no export is called '{result}'. Name it as in the results folder."], known=False
        )
    if not last:
        return _Seen([], list(found.story(exports[0])))
    findings = [each for export in exports for each in found.replay(export)]
    return _Seen(findings, [f"{len(exports)} computed again, equal to 1e-9."])
