"""The published examples as they ship with the program: inputs, values, misprints. Reads them; computes nothing."""

from __future__ import annotations

import csv
import hashlib
import io
from dataclasses import dataclass
from importlib import resources
from math import isfinite
from typing import TYPE_CHECKING

import numpy as np

from watcher.errors import WatcherError

if TYPE_CHECKING:
    from importlib.resources.abc import Traversable

    from rules.line import Floats

#: Where a value comes from, word to what it means. Derived values have no source outside and are counted apart.
ORIGINS = {
    "found": "input and answer read in a public text",
    "data": "input read, answer from memory",
    "answer": "answer read, input from memory",
    "memory": "input and answer from memory",
    "derived": "follows from other values; no source outside",
}
VALUES, MISPRINTS = "values.csv", "misprints.csv"


class PublishedUnusable(WatcherError):
    """A file of the published examples cannot be used: the installation is damaged.

    Parameters
    ----------
    file
        Its name.
    line
        Line from 1; 0 where the whole file is meant.
    sentence
        Expected and got.
    """

    def __init__(self, file: str, line: int, sentence: str) -> None:
        super().__init__(file, line, sentence)
        self.file, self.line, self.sentence = file, line, sentence

    def __str__(self) -> str:
        """Say where and what, what follows, and what to do."""
        at = f"{self.file}, line {self.line}" if self.line else self.file
        return f"{at}: {self.sentence}. The numbers cannot be verified. Install the program again."


@dataclass(frozen=True, slots=True)
class Value:
    """A published value.

    Attributes
    ----------
    example, quantity
        What it is a value of.
    printed
        As published.
    tolerance
        Largest difference that counts as agreement, absolute, in the unit of the value.
    origin
        A word of `ORIGINS`.
    source
        Where it was published, in short; the README beside the files gives it in full.
    """

    example: str
    quantity: str
    printed: str
    tolerance: float
    origin: str
    source: str

    @property
    def number(self) -> float:
        """The value."""
        return float(self.printed)


@dataclass(frozen=True, slots=True)
class Misprint:
    """A published value that is known to be wrong: `correct` is what must come out, within its tolerance."""

    printed: str
    correct: Value
    reason: str


class Inputs:
    """The files of the published examples.

    Parameters
    ----------
    folder
        Where they lie; those of the program itself by default.
    """

    def __init__(self, folder: Traversable | None = None) -> None:
        self.folder = folder or resources.files("watcher").joinpath("published")

    def text(self, name: str) -> str:
        """Return a file's text."""
        try:
            return self.folder.joinpath(name).read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            raise PublishedUnusable(name, 0, f"expected a file of published examples, got: {error}") from error

    def columns(self, name: str, **where: str) -> tuple[Floats, ...]:
        """Return the numeric columns of an input in their order, of the rows whose other cells are as wanted."""
        rows = [row for _, row in self._rows(f"{name}.csv") if all(row[key] == word for key, word in where.items())]
        try:
            return tuple(
                np.array([float(row[key]) for row in rows]) for key in (rows[0] if rows else ()) if key not in where
            )
        except ValueError as error:
            raise PublishedUnusable(f"{name}.csv", 0, f"expected numbers, {error}") from error

    def values(self) -> tuple[Value, ...]:
        """Return every published value."""
        return tuple(_value(VALUES, line, row, "published", row["kind"]) for line, row in self._rows(VALUES))

    def misprints(self) -> tuple[Misprint, ...]:
        """Return every known misprint."""
        return tuple(
            Misprint(row["printed"], _value(MISPRINTS, line, row, "correct", "absolute"), row["reason"])
            for line, row in self._rows(MISPRINTS)
        )

    def sha256(self) -> str:
        """Hash of all files with their names, whatever the ends of their lines."""
        digest = hashlib.sha256()
        for file in sorted(self.folder.iterdir(), key=lambda one: one.name):
            if file.is_file():
                content = self.text(file.name).encode()
                digest.update(f"{file.name} {len(content)}\n".encode() + content)
        return digest.hexdigest()

    def _rows(self, name: str) -> list[tuple[int, dict[str, str]]]:
        return list(enumerate(csv.DictReader(io.StringIO(self.text(name))), 2))


def _value(file: str, line: int, row: dict[str, str], column: str, kind: str) -> Value:
    numbers = []
    for key in (column, "tolerance"):
        try:
            numbers.append(float(row[key]))
        except ValueError as error:
            raise PublishedUnusable(file, line, f"expected a number in {key}, got '{row[key]}'") from error
    number, tolerance = numbers
    if not (isfinite(number) and isfinite(tolerance) and tolerance > 0):
        raise PublishedUnusable(file, line, f"expected a tolerance above 0, got '{row['tolerance']}'")
    if row["origin"] not in ORIGINS:
        raise PublishedUnusable(file, line, f"expected origin {', '.join(ORIGINS)}, got '{row['origin']}'")
    if kind == "relative":
        tolerance *= abs(number)
    return Value(row["example"], row["quantity"], row[column], tolerance, row["origin"], row["source"])
