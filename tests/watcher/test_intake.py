"""From a settled file to an accepted export."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING, Any

import pytest

from watcher.copies import Copies, CopyPostponed
from watcher.disk import Disk
from watcher.intake import PATIENCE_SECONDS, Intake
from watcher.service_settings import ServiceSettings

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger


class _CountingCopies(Copies):
    """Counts readings, and refuses to read while told so."""

    hashed = 0
    held: CopyPostponed | None = None

    def hash_of(self, candidate: Any) -> str:
        self.hashed += 1
        if self.held is not None:
            raise self.held
        return super().hash_of(candidate)


@pytest.fixture
def copies(tmp_path: Path, ledger: Ledger) -> _CountingCopies:
    """Copies of up to 100 bytes."""
    made = _CountingCopies(tmp_path / "records", Disk(), size_limit_bytes=100, reserve_bytes=0)
    made.prepare()
    return made


@pytest.fixture
def make_intake(tmp_path: Path, ledger: Ledger, copies: _CountingCopies, clock: Any) -> Any:
    """Make the intake of a bench with two exports folders, as after a start."""
    for name in ("flame", "furnace"):
        (tmp_path / name).mkdir()
    settings = ServiceSettings(
        laboratory="Skerry Point Water Laboratory",
        exports=(tmp_path / "flame", tmp_path / "furnace"),
        results=tmp_path / "results",
        records=tmp_path / "records",
    )
    return lambda: Intake(settings, ledger, copies, clock)


def _looks(intake: Intake, clock: Any, times: int = 2) -> Any:
    for _ in range(times):
        taken = intake.take_in()
        clock.advance(5.0)
    return taken


def test_the_first_folders_exports_keep_bare_names(make_intake: Any, clock: Any, tmp_path: Path) -> None:
    """A file of the same name in the second folder is another export."""
    (tmp_path / "flame" / "FL-1.csv").write_text("a")
    (tmp_path / "furnace" / "FL-1.csv").write_text("b")

    taken = _looks(make_intake(), clock)

    assert [each.name for each in taken.exports] == ["FL-1.csv", "furnace/FL-1.csv"]


def test_after_a_restart_content_is_read_again_once(
    make_intake: Any, clock: Any, tmp_path: Path, copies: _CountingCopies, ledger: Ledger
) -> None:
    """No time stamp is trusted across a restart: a file of the same size and time with other content is found."""
    path = tmp_path / "flame" / "FL-1.csv"
    path.write_text("12.5")
    _looks(make_intake(), clock, 5)
    assert copies.hashed == 1
    stamp = path.stat().st_mtime_ns
    with path.open("r+") as file:
        file.write("13.5")
    os.utime(path, ns=(stamp, stamp))

    taken = _looks(make_intake(), clock)

    assert copies.hashed == 2
    assert [each.name for each in taken.exports] == ["FL-1.csv"]
    assert ledger.counts() == {"accepted": 2}


def test_a_held_file_becomes_a_trouble_after_a_while(
    make_intake: Any, clock: Any, tmp_path: Path, copies: _CountingCopies
) -> None:
    """A file held by another program is tried at every look, told of after minutes, and taken in in the end."""
    (tmp_path / "flame" / "FL-1.csv").write_text("a")
    intake = make_intake()
    copies.held = CopyPostponed("FL-1.csv", "it cannot be opened (held)", expected=False)
    assert _looks(intake, clock).troubles == ()
    assert _looks(intake, clock, 1).unsettled == ("FL-1.csv",)

    clock.advance(PATIENCE_SECONDS)

    assert [each.key for each in intake.take_in().troubles] == ["held:FL-1.csv"]
    copies.held = None
    taken = intake.take_in()
    assert [each.name for each in taken.exports] == ["FL-1.csv"]
    assert taken.troubles == ()


def test_a_file_over_the_limit_is_told_and_not_read_again(
    make_intake: Any, clock: Any, tmp_path: Path, copies: _CountingCopies
) -> None:
    """An export that is too large is a trouble, and others are taken in."""
    (tmp_path / "flame" / "A.csv").write_text("x" * 101)
    (tmp_path / "flame" / "B.csv").write_text("b")
    intake = make_intake()

    taken = _looks(intake, clock)

    assert [each.name for each in taken.exports] == ["B.csv"]
    assert "A.csv: it has 101 bytes, at most 100 are read" in taken.troubles[0].sentence
    _looks(intake, clock, 3)
    assert copies.hashed == 2


def test_a_stop_between_two_files_loses_none(make_intake: Any, clock: Any, tmp_path: Path, ledger: Ledger) -> None:
    """What was not accepted before the stop is found at the next look."""
    for name in ("A.csv", "B.csv"):
        (tmp_path / "flame" / name).write_text(name)
    intake = make_intake()
    _looks(intake, clock, 1)
    answers = iter([False, True])

    assert len(intake.take_in(lambda: next(answers)).exports) == 1
    assert len(intake.take_in().exports) == 1
