"""What `explain` knows of an export: how it was understood, what was computed, which mails would go. Writes nothing."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

from parsers.odd_cells import OddCell, odd_cells
from parsers.readings import Readings, Role
from rules.outcomes import Verdict
from watcher.exit_codes import ALL_PASS, NOT_DONE, SAMPLE_FAILS
from watcher.mail import Mail, mails
from watcher.schema import MailPart

if TYPE_CHECKING:
    from parsers.layout import Layout
    from watcher.evaluation import Evaluated
    from watcher.settings import Settings


@dataclass(frozen=True, slots=True)
class LineFate:
    """What became of one line: ``read``, ``fault`` (read, with a cell that cannot be used) or ``set aside``."""

    line: int
    fate: str
    why: str


@dataclass(frozen=True)
class ReadingAccount:
    """How one export was read, whether or not anything was computed of it."""

    name: str
    data: bytes
    layout: Layout
    readings: Readings
    problems: tuple[str, ...]

    @cached_property
    def claimed_by(self) -> str:
        """Why the layout claimed the export."""
        claims = self.layout.claims
        parts = [f"file {claims.file}" if claims.file else "", f"text {claims.text.pattern}" if claims.text else ""]
        return " and ".join(part for part in parts if part)

    @cached_property
    def read_lines(self) -> frozenset[int]:
        """The lines that gave readings."""
        return frozenset(self.readings.line.tolist())

    @cached_property
    def fault_lines(self) -> frozenset[int]:
        """Those of them with a cell that cannot be used, so that their series are not evaluated."""
        return frozenset(fault.line for fault in self.readings.faults)

    @cached_property
    def odd_cells(self) -> list[OddCell]:
        """Every distinct cell that is no number where one is expected."""
        return odd_cells(self.data, self.layout, self.name, self.read_lines)

    def line_fates(self) -> list[LineFate]:
        """Return the fate of every line, in the order of the file."""
        readings = self.readings
        fates = {aside.line: LineFate(aside.line, "set aside", aside.reason) for aside in readings.set_aside}
        said: dict[int, dict[str, None]] = {}
        for row, line in enumerate(readings.line.tolist()):
            what = f"{readings.sample[row]} {readings.analyte[row]}"
            said.setdefault(line, {})[f"{what}, {Role(int(readings.role[row])).word}"] = None
        for line, whats in said.items():
            first, *more = whats
            fates[line] = LineFate(line, "read", first + (f" and {len(more)} more readings" if more else ""))
        for fault in readings.faults:
            fates[fault.line] = LineFate(fault.line, "fault", f"column {fault.column!r}: {fault.sentence}")
        return [fates[line] for line in sorted(fates)]


@dataclass(frozen=True)
class Explanation:
    """Everything that `explain` shows."""

    account: ReadingAccount
    evaluated: Evaluated
    mails: list[tuple[Mail, tuple[str, ...]]]

    @classmethod
    def of(cls, settings: Settings, evaluated: Evaluated, data: bytes) -> Explanation:
        """Gather what is known of an evaluated export; each mail stands with the addresses it would go to."""
        outcomes = evaluated.outcomes
        account = ReadingAccount(
            evaluated.export.name, data, evaluated.layout, outcomes.case.readings, evaluated.problems
        )
        letters = mails(outcomes, evaluated.export, evaluated.problems, settings.file.complete_after, ())
        return cls(account, evaluated, [(letter, _recipients(settings, letter)) for letter in letters])

    @property
    def code(self) -> int:
        """The exit code, as `once` would end."""
        if self.account.problems:
            return NOT_DONE
        outcomes = self.evaluated.outcomes
        failing = any(outcomes.verdict_of(i) in (Verdict.FAIL, Verdict.INCOMPLETE) for i in range(len(outcomes.case)))
        return SAMPLE_FAILS if failing else ALL_PASS


def _recipients(settings: Settings, letter: Mail) -> tuple[str, ...]:
    part = settings.file.mail
    return part.to if isinstance(part, MailPart) and letter.kind in part.about else ()
