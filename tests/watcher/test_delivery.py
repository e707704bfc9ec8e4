"""Bringing a result file into the results folder, and nowhere else."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher.delivery import StagedFileAltered, TargetOutside, deliver, inside
from watcher.disk import Disk
from watcher.ledger_rows import DueFile

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture
def results(tmp_path: Path) -> Path:
    """An empty results folder."""
    (tmp_path / "results").mkdir()
    return tmp_path / "results"


def _due(tmp_path: Path, target: str = "2026-12/FL-1.r1.csv", content: bytes = b"SED-12,pass\n") -> DueFile:
    staged = tmp_path / "staged.csv"
    staged.write_bytes(content)
    return DueFile(1, "FL-1.csv", target, staged, hashlib.sha256(content).hexdigest(), 0)


def test_a_file_arrives_whole_and_replaces_the_old_one(tmp_path: Path, results: Path) -> None:
    """The month's folder is made, and an older file of the name is replaced."""
    deliver(_due(tmp_path, content=b"old"), results, Disk())
    deliver(_due(tmp_path), results, Disk())

    assert (results / "2026-12" / "FL-1.r1.csv").read_bytes() == b"SED-12,pass\n"
    assert [path.name for path in (results / "2026-12").iterdir()] == ["FL-1.r1.csv"]


@pytest.mark.parametrize(
    "target",
    ["../x.csv", "2026-12/../../x.csv", "/etc/x.csv", "C:x.csv", "a/b/x.csv", "..", "", ".", "2026-12\\x.csv", "a\0b"],
)
def test_no_target_leaves_the_results_folder(tmp_path: Path, results: Path, target: str) -> None:
    """Paths that climb, are absolute, too deep or of Windows are refused, and nothing is written."""
    with pytest.raises(TargetOutside, match=r"would lie outside the results folder .* was not written"):
        deliver(_due(tmp_path, target), results, Disk())

    assert list(results.rglob("*")) == []


@given(st.text(st.sampled_from("./\\aC:\0 "), max_size=12))
def test_whatever_the_target_it_is_inside_or_refused(tmp_path_factory: Any, target: str) -> None:
    """Every target that is allowed resolves to a place below the results folder."""
    results = tmp_path_factory.getbasetemp()
    try:
        path = inside(results, target)
    except TargetOutside:
        return

    assert results.resolve() in path.resolve().parents


def test_a_link_in_the_results_folder_is_not_followed(tmp_path: Path, results: Path) -> None:
    """A month's folder that is a link to somewhere else is refused."""
    (tmp_path / "elsewhere").mkdir()
    (results / "2026-12").symlink_to(tmp_path / "elsewhere")

    with pytest.raises(TargetOutside, match="See whether a link"):
        deliver(_due(tmp_path), results, Disk())

    assert list((tmp_path / "elsewhere").iterdir()) == []


@pytest.mark.parametrize("damage", ["altered", "missing"])
def test_a_staged_file_that_is_not_the_computed_one_stays(tmp_path: Path, results: Path, damage: str) -> None:
    """Bytes that do not have the ledger's hash never reach the results folder."""
    file = _due(tmp_path)
    if damage == "altered":
        file.staged.write_bytes(b"SED-12,PASS\n")
    else:
        file.staged.unlink()

    with pytest.raises(StagedFileAltered, match=r"FL-1\.r1\.csv, (has other bytes|is missing).* evaluate its export"):
        deliver(file, results, Disk())

    assert list(results.rglob("*.csv")) == []


def test_a_missing_results_folder_is_not_made(tmp_path: Path) -> None:
    """Where a share is gone, nothing is written under its mount point."""
    with pytest.raises(FileNotFoundError):
        deliver(_due(tmp_path), tmp_path / "gone", Disk())

    assert not (tmp_path / "gone").exists()
