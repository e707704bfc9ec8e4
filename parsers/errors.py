"""What can go wrong in reading, as errors that carry their facts.

    ParsersError
    ├── DocumentInvalid     a layout or settings file has faults, all of them at once
    └── ExportRefused       the structure of an export is broken: nothing of it is read

A cell that cannot be read is no exception: it is a `parsers.readings.Fault` and fails its own series.
Nothing here decides whether something is wrong.
"""

from __future__ import annotations

from dataclasses import dataclass


class ParsersError(Exception):
    """Base of every error that reading raises because of its input."""


@dataclass(frozen=True, slots=True)
class DocumentFault:
    """One fault of a layout or settings file.

    Attributes
    ----------
    path
        The file as the reader knows it.
    line
        Line from 1; 0 where no line can be given.
    key
        The key path, such as ``columns.signal``; empty where the fault belongs to no key.
    sentence
        What was expected, what was found, what follows and what to do.
    """

    path: str
    line: int
    key: str
    sentence: str

    def __str__(self) -> str:
        """Say where and what."""
        place = [self.path, f"line {self.line}" if self.line else "", self.key]
        return f"{', '.join(part for part in place if part)}: {self.sentence}"


class DocumentInvalid(ParsersError):
    """A layout or settings file cannot be used; `faults` holds every reason, in the order of the lines."""

    def __init__(self, faults: tuple[DocumentFault, ...]) -> None:
        super().__init__(faults)
        self.faults = tuple(sorted(faults, key=lambda fault: (fault.line, fault.key)))

    def __str__(self) -> str:
        """Say all faults, one a line."""
        return "\n".join(str(fault) for fault in self.faults)


class ExportRefused(ParsersError):
    """The structure of an export is broken, so nothing of it is read.

    Attributes
    ----------
    name
        The export.
    line
        Line from 1, or None where the whole export is meant.
    column
        The header concerned, or None.
    sentence
        What was expected, what was found, what follows and what to do.
    remedy
        What to do, once more by itself.
    """

    def __init__(self, name: str, line: int | None, column: str | None, sentence: str, remedy: str) -> None:
        super().__init__(name, line, column, sentence, remedy)
        self.name = name
        self.line = line
        self.column = column
        self.sentence = sentence
        self.remedy = remedy

    def __str__(self) -> str:
        """Say where and what."""
        line = "" if self.line is None else f", line {self.line}"
        column = "" if self.column is None else f", column {self.column!r}"
        return f"{self.name}{line}{column}: {self.sentence}"
