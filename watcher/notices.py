"""What the service itself has to say by mail: about exports it could not evaluate, about folders, about itself.

Plain sentences with what, what follows and what to do; mails about results are written elsewhere.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from watcher.replies import WantedMail

if TYPE_CHECKING:
    from collections.abc import Sequence

    from watcher.failures import Failure
    from watcher.folder import Trouble
    from watcher.ledger_rows import ExportRow

#: A mail names so many things one by one; the rest is counted.
NAMED = 20


def poison(export: ExportRow, settings_number: int, reason: str) -> WantedMail:
    """Tell that an export ended the worker too often."""
    return _problem(
        f"{export.name}: not evaluated",
        f"{export.name} could not be evaluated: {reason}.\n"
        "This was tried three times. The export is refused and has no results; all others are evaluated.\n"
        f"Its content is kept under {export.sha256}. Give it a layout whose patterns cannot run away, or export "
        "fewer samples at a time; new settings or a changed export are tried by themselves.\n",
        (f"poison:{export.name}:{export.sha256}:{settings_number}",),
    )


def defect(error: str, traceback: str) -> WantedMail:
    """Tell of a defect of the program, once for each."""
    return _problem(
        f"defect of the program: {error}",
        f"The program met a defect of its own: {error}.\n"
        "What it was doing has no result; everything else goes on. Hand this mail to whoever looks after the "
        f"program.\n\n{traceback[-4000:]}\n",
        (f"defect:{error}",),
    )


def troubles(found: Sequence[Trouble], keys: tuple[str, ...]) -> WantedMail:
    """Tell of what is wrong with folders, worker or disk."""
    first = found[0].sentence.partition(". ")[0]
    more = f" (and {len(found) - 1} more)" if len(found) > 1 else ""
    return _problem(f"{first}{more}", _listed([each.sentence for each in found]), keys)


def unclaimed(exports: Sequence[ExportRow], keys: tuple[str, ...]) -> WantedMail:
    """Tell, once a day, which exports no layout claims."""
    count = "1 export" if len(exports) == 1 else f"{len(exports)} exports"
    lines = [f"{each.name}: {each.problem or 'no layout claims it'}" for each in exports]
    return _problem(
        f"{count} that no layout claims",
        f"{count} came in that no layout claims. They have no results and are evaluated as soon as one does.\n"
        "Write a layout for them, or keep such files out of the exports folder.\n\n" + _listed(lines),
        keys,
    )


def evaluated_after_all(export: ExportRow) -> WantedMail:
    """Tell that an export which was refused has its results now."""
    return WantedMail(
        "cleared",
        f"CLEARED PROBLEM {export.name}: evaluated now",
        f"{export.name} was refused before ({export.problem or 'no layout claimed it'}) and is evaluated now that the "
        "settings were changed. Its results are in the results folder; nothing more is to be done about the refusal.\n",
        (f"evaluated:{export.name}:{export.sha256}",),
        0.0,
    )


def cleared(export: ExportRow, closed: Sequence[Failure]) -> WantedMail:
    """Tell which open failures an export settles."""
    more = f" and {len(closed) - 1} more" if len(closed) > 1 else ""
    lines = [f"{each.title}: failed in {each.name}, attempt {each.attempt}, since {each.opened_at}" for each in closed]
    return WantedMail(
        "cleared",
        f"CLEARED {closed[0].title}{more}",
        f"{export.name}, revision {export.revision}, settles what was mailed before:\n{_listed(lines)}"
        "What was held back for these alone may go on.\n",
        tuple(f"cleared:{each.id}" for each in closed),
        0.0,
    )


def alive(day: str, counts: dict[str, int], failures: Sequence[Failure], troubles: Sequence[str]) -> WantedMail:
    """Tell once a day that the service runs, what came in, and what is open."""
    came = ", ".join(f"{count} {state}" for state, count in sorted(counts.items())) or "nothing"
    lines = [f"{each.title}: {each.verdict} in {each.name}, since {each.opened_at}" for each in failures]
    parts = [f"The service runs. In the last 24 hours came in: {came}.\n"]
    parts.append(f"Open failures: {len(failures)}\n{_listed(lines)}" if failures else "No failure is open.\n")
    if failures:
        parts.append('Close one with: spikewarden note EXPORT --by NAME "what was done"\n')
    if troubles:
        parts.append(f"What is wrong now:\n{_listed(troubles)}")
    parts.append("If this mail does not come on a day when it should, see whether the computer is switched on.\n")
    open_ones = f"{len(failures)} open" if failures else "nothing open"
    return WantedMail("alive", f"ALIVE {day}: {came}; {open_ones}", "\n".join(parts), (f"alive:{day}",), 0.0)


def refused(export: ExportRow, reason: str) -> WantedMail:
    """Tell why the service itself refused an export."""
    return _problem(
        f"{export.name}: refused",
        f"{export.name} is refused and has no results: {reason}\n",
        (f"refused:{export.name}:{export.sha256}:{reason}",),
    )


def _problem(subject: str, body: str, keys: tuple[str, ...]) -> WantedMail:
    return WantedMail("problem", f"PROBLEM {subject}", body, keys, 0.0)


def _listed(lines: Sequence[str]) -> str:
    shown = "".join(f"- {line}\n" for line in lines[:NAMED])
    return shown + (f"- and {len(lines) - NAMED} more\n" if len(lines) > NAMED else "")
