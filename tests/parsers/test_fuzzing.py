"""However an export or a layout is damaged, it ends in readings or in a clear error, and no line is lost."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import fuzzing
import pytest

if TYPE_CHECKING:
    from parsers.readings import Readings

ROOT = Path(__file__).parents[2]
#: Damaged exports and layouts of the long proof, in shares for two processors.
SHARES = [("exports", number * 50_000, 50_000) for number in range(4)] + [
    ("layouts", number * 25_000, 25_000) for number in range(2)
]


@pytest.mark.parametrize(("what", "count"), [("exports", 600), ("layouts", 300)])
def test_damage_ends_in_readings_or_a_clear_error(what: str, count: int) -> None:
    """A small share in the default run: readings that account for every line, or an error that says what to do."""
    ends = fuzzing.work(what, 0, count)

    assert sum(ends.values()) == count
    assert ends["read"] > count / 20
    assert ends["refused" if what == "exports" else "faults"] > count / 20


def test_a_lost_line_is_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    """The judge itself fails where a line is neither read nor set aside."""
    case = fuzzing.cases()[0]
    whole = fuzzing.read(case.export, case.layout, case.name)
    monkeypatch.setattr(fuzzing, "read", lambda *_: _without_last_aside(whole))

    with pytest.raises(AssertionError, match="neither read nor set aside"):
        fuzzing.judge(case.layout, case.export, case.name)


def _without_last_aside(readings: Readings) -> Readings:
    return replace(readings, set_aside=readings.set_aside[:-1])


@pytest.mark.proof
def test_quarter_of_a_million_damaged_files() -> None:
    """200,000 exports and 50,000 layouts, two at a time: no traceback, no hang, no table shortened in silence."""
    waiting = [
        [sys.executable, "tests/parsers/fuzzing.py", what, str(first), str(count)] for what, first, count in SHARES
    ]
    environment = {"PYTHONPATH": str(ROOT), "PATH": "/usr/bin:/bin"}
    for pair in zip(waiting[::2], waiting[1::2], strict=True):
        running = [subprocess.Popen(command, cwd=ROOT, env=environment, stderr=subprocess.PIPE) for command in pair]
        errors = [process.communicate(timeout=480)[1].decode() for process in running]
        assert [process.returncode for process in running] == [0, 0], "\n".join(error[-2000:] for error in errors)
