"""Broken exports and layouts without end, made from the invented ones; what each must end in.

Run as a program it works through a share of them: ``python fuzzing.py exports|layouts FIRST COUNT``.
"""

from __future__ import annotations

import random
import re
import signal
import sys
import time
import traceback
from dataclasses import dataclass
from fnmatch import fnmatch
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

from parsers.errors import DocumentInvalid, ExportRefused
from parsers.layout import Layout, parse_layout
from parsers.read import claims, is_finished, read

if TYPE_CHECKING:
    from parsers.readings import Readings

EXPORTS = Path(__file__).parents[1] / "exports"
#: Longest time for one of them, in seconds: a thousand times what it should take.
DEADLINE = 10.0
TOKENS = [
    b"", b" ", b";", b",", b"\t", b'"', b"'", b"\r", b"\n", b"\r\n", b"\0", b"\xff\xfe", b"\xef\xbb\xbf", b"\x0c",
    b"\x1f", b"1.234", b"1,234", b"007", b"1E5", b"NA", b"None", b"TRUE", b"nan", b"inf", b"-", b"1e999", b"<0.02",
    b">", b"OVR", b"=1+1", b"[10]", b"[Data]", b"Label", b"Mean", b"\xb5", b"\xc2\xa0", b"\xe2\x80\xaf",
    b"\xed\xa0\x80", b"0" * 400, b"=" * 60, b"\xf0\x9f\x90\x9f",
]  # fmt: skip
WORDS = [
    "", " ", ":", ": ", "- ", "[", "]", "{", "}", "'", '"', "|", "*", "&a", "!x", "#", "\t", "none", "refuse",
    "columns", "from", "constant", "heading", "blocks", "begin", "(?P<analyte>.)", "(", "[a-", "{99999999999}", "0",
    "-1", "1e9", "transposed", "grid", "pairs", "blanks", "label", "sample", "signal", "unit", "in cell", "rows",
    "are: rsd", "ratio", "\u2028", "\x07",
]  # fmt: skip


@dataclass(frozen=True)
class Case:
    """An invented export with its layout."""

    name: str
    export: bytes
    document: str
    tables: dict[str, str]
    layout: Layout


@cache
def cases() -> list[Case]:
    """Read the invented exports."""
    found = []
    for path in sorted(EXPORTS.glob("*/*/layout.yaml")):
        document = path.read_text("utf-8")
        tables = {
            name: (path.parent / name).read_text("utf-8") for name in re.findall(r"file: ([\w-]+\.csv)", document)
        }
        layout = parse_layout(document, "layout.yaml", tables)
        export = next(one for one in sorted(path.parent.iterdir()) if fnmatch(one.name, layout.claims.file))
        found.append(Case(export.name, export.read_bytes(), document, tables, layout))
    return found


def mutated_export(chance: random.Random, case: Case, others: list[Case]) -> bytes:
    """Damage an export in one to four ways."""
    data = bytearray(case.export)
    for _ in range(chance.randint(1, 4)):
        at = chance.randrange(len(data) + 1)
        lines = bytes(data).split(b"\n")
        one, two = chance.randrange(len(lines)), chance.randrange(len(lines))
        match chance.randrange(8):
            case 0:
                data[at : at + 1] = bytes([chance.randrange(256)])
            case 1:
                data[at:at] = chance.choice(TOKENS)
            case 2:
                del data[at : at + chance.choice((1, 2, 10, 100))]
            case 3:
                lines[one], lines[two] = lines[two], lines[one]
                data = bytearray(b"\n".join(lines))
            case 4:
                lines.insert(one, lines[two])
                data = bytearray(b"\n".join(lines))
            case 5:
                del lines[one]
                data = bytearray(b"\n".join(lines))
            case 6:
                cells = re.split(rb"([;,\t=]+)", lines[one])
                cells[chance.randrange(len(cells))] = chance.choice(TOKENS)
                lines[one] = b"".join(cells)
                data = bytearray(b"\n".join(lines))
            case _:
                other = chance.choice(others).export
                cut = chance.randrange(len(other) + 1)
                data[at:at] = other[cut : cut + 80]
    return bytes(data)


def mutated_document(chance: random.Random, case: Case, others: list[Case]) -> str:
    """Damage a layout in one to three ways."""
    text = case.document
    for _ in range(chance.randint(1, 3)):
        lines = text.split("\n")
        at, one, two = chance.randrange(len(text) + 1), chance.randrange(len(lines)), chance.randrange(len(lines))
        match chance.randrange(7):
            case 0:
                text = text[:at] + chance.choice(WORDS) + text[at + 1 :]
            case 1:
                text = text[:at] + chance.choice(WORDS) + text[at:]
            case 2:
                text = text[:at] + text[at + chance.choice((1, 2, 10)) :]
            case 3:
                lines[one] = lines[two]
                text = "\n".join(lines)
            case 4:
                del lines[one]
                text = "\n".join(lines)
            case 5:
                parts = re.split(r"([\[\]{},:' ]+)", lines[one])
                parts[chance.randrange(len(parts))] = chance.choice(WORDS)
                lines[one] = "".join(parts)
                text = "\n".join(lines)
            case _:
                lines.insert(one, chance.choice(chance.choice(others).document.split("\n")))
                text = "\n".join(lines)
    return text


def judge(layout: Layout, data: bytes, name: str) -> str:
    """Read an export; return what it ended in.

    Raises
    ------
    AssertionError
        If a line is lost, or an error says nothing.
    """
    claims(layout, name, data)
    is_finished(layout, data)
    try:
        readings = read(data, layout, name)
    except ExportRefused as error:
        refused = error
    else:
        _account(readings)
        return "read"
    assert name in str(refused)
    assert refused.remedy
    return "refused"


def _account(readings: Readings) -> None:
    """Look for each line among the readings and those set aside."""
    known = {*readings.line.tolist(), *(one.line for one in readings.set_aside)}
    lost = set(range(1, readings.lines + 1)) - known
    assert not lost, f"lines {sorted(lost)} are neither read nor set aside"
    assert known <= set(range(1, readings.lines + 1))
    assert len(readings)


def work(what: str, first: int, count: int) -> dict[str, int]:
    """Work through a share; return how they ended.

    Raises
    ------
    AssertionError
        At the first that ends in anything but readings or a clear error, with the number that makes it again.
    """
    known = cases()
    ends: dict[str, int] = {}
    for number in range(first, first + count):
        chance = random.Random(f"{what} {number}")
        case = chance.choice(known)
        signal.setitimer(signal.ITIMER_REAL, DEADLINE)
        try:
            if what == "exports":
                end = judge(case.layout, mutated_export(chance, case, known), case.name)
            else:
                end = _judge_layout(mutated_document(chance, case, known), case)
        except Exception as error:
            raise AssertionError(f"{what} {number} ({case.name}): {error!r}\n{traceback.format_exc()}") from error
        finally:
            signal.setitimer(signal.ITIMER_REAL, 0)
        ends[end] = ends.get(end, 0) + 1
    return ends


def _judge_layout(document: str, case: Case) -> str:
    try:
        layout = parse_layout(document, "layout.yaml", case.tables)
    except DocumentInvalid as invalid:
        faults = invalid.faults
    else:
        return judge(layout, case.export, case.name)
    assert faults
    assert all(fault.sentence.endswith((".", "?")) and "layout.yaml" in str(fault) for fault in faults)
    return "faults"


def _too_long(*_: object) -> None:
    raise TimeoutError(f"not done after {DEADLINE:g} s")


if __name__ == "__main__":
    signal.signal(signal.SIGALRM, _too_long)
    start = time.monotonic()
    print(work(sys.argv[1], int(sys.argv[2]), int(sys.argv[3])), f"{time.monotonic() - start:.0f} s")
