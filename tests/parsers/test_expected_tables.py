"""The expected tables of the example exports, checked without the program: every number stands on the line it names.

The tables say what readings an export holds. Here they are held against the bytes of the exports by regular expressions
of the standard library alone: the line of each reading holds each of its signals, written with one of the marks that
instruments use, and its label or sample stands on that line or before it.
"""

from __future__ import annotations

import csv
import re
from pathlib import Path

import pytest

EXPORTS = Path(__file__).parents[1] / "exports"
CASES = sorted(path for kind in ("cookbook", "quirks") for path in (EXPORTS / kind).glob("*/expected.csv"))
_RUN = re.compile(r"[\d.,'’ ]*\d(?:[eEdD]\s?[+-]?\d+)?")
_NO_BREAK = str.maketrans({"\u202f": " ", "\xa0": " "})


def raw_lines(path: Path) -> list[str]:
    """Lines of an export in the first encoding that fits."""
    data = path.read_bytes()
    marked = data[:2] in (b"\xff\xfe", b"\xfe\xff")
    halves = data[1:200:2].count(0) > 50  # every other byte is NUL
    for encoding in ("utf-16",) if marked else ("utf-16-le",) if halves else ("utf-8-sig", "cp1252", "latin-1"):
        try:
            return re.split(r"\r\n|\r|\n", data.decode(encoding).translate(_NO_BREAK))
        except UnicodeDecodeError:
            continue
    raise AssertionError(f"{path} is in no encoding that instruments use")


def export_of(case: Path) -> Path:
    """The export that an expected table belongs to."""
    beside = ("README.md", "layout.yaml", "expected.csv", "bench-sheet.csv", "wells.csv", "bench.csv", "levels.csv")
    (export,) = [path for path in case.parent.iterdir() if path.name not in beside]
    return export


def numbers(line: str) -> set[float]:
    """Every number that a line may hold, whichever marks it has."""
    found: set[float] = set()
    for run in _RUN.findall(line):
        parts = {run, *re.split(r"[, ]", run)}
        for plain in (re.sub(r"['’ ]", "", part).replace("d", "e").replace("D", "e") for part in parts):
            dots, commas = plain.replace(",", ""), plain.replace(".", "").replace(",", ".")
            for text in (plain, dots, commas, plain.replace(",", ".")):
                try:
                    found.add(float(text))
                except ValueError:
                    continue
    return found


def record(lines: list[str], at: int) -> str:
    """The line, and those that a cell in quotes goes on over."""
    end = at + 1
    while "".join(lines[at:end]).count('"') % 2 and end < len(lines):
        end += 1
    return "\n".join(lines[at:end])


@pytest.mark.parametrize("case", CASES, ids=lambda path: path.parent.name)
def test_expected_signals_stand_on_their_lines(case: Path) -> None:
    """Each signal of an expected table is written on the line of the export that the table names."""
    lines = raw_lines(export_of(case))
    for row in csv.DictReader(case.read_text("utf-8").splitlines(keepends=True)):
        text = record(lines, int(row["line"]) - 1)
        held = numbers(text)
        for signal in map(float, row["signal"].split()):
            assert any(abs(abs(signal) - one) <= 1e-9 * max(one, 1.0) for one in held), (signal, text)


@pytest.mark.parametrize("case", CASES, ids=lambda path: path.parent.name)
def test_expected_labels_stand_on_their_lines_or_above(case: Path) -> None:
    """Each label of an expected table is written at or above the line of its reading, or in the file's name.

    A well of a plate is no text: its row letter begins the line, and its column number stands above.
    """
    export = export_of(case)
    lines = raw_lines(export)
    for row in csv.DictReader(case.read_text("utf-8").splitlines(keepends=True)):
        at = int(row["line"])
        above = "".join([export.name, *lines[:at], record(lines, at - 1)])
        if case.parent.name == "plate":
            assert lines[at - 1].startswith(row["label"][0])
            assert row["label"][1:] in lines[at - 2 if row["label"][0] == "A" else at - 3].split()
            continue
        bare = {"".join(text.split()).replace('"', "") for text in (row.get("label", ""), row.get("level") or "")}
        squeezed = "".join(above.split()).replace('"', "")
        assert all(text in squeezed for text in bare), row
