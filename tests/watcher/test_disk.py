"""Writing durably: the right steps in the right order, and never half a file under a name."""

from __future__ import annotations

import os
import stat
from typing import TYPE_CHECKING, Any

import pytest

from watcher.disk import WINDOWS_PAUSES, Disk, sweep

if TYPE_CHECKING:
    from pathlib import Path


class _TellingDisk(Disk):
    """Writes down its steps, and fails at one of them if told to."""

    def __init__(self, fail_at: int = 0, error: OSError | None = None) -> None:
        super().__init__(lambda _seconds: None)
        self.steps: list[str] = []
        self._fail_at = fail_at
        self._error = error or OSError(5, "Input/output error")

    def _step(self, name: str) -> None:
        self.steps.append(name)
        if len(self.steps) == self._fail_at:
            raise self._error

    def sync(self, descriptor: int) -> None:
        self._step("folder" if stat.S_ISDIR(os.fstat(descriptor).st_mode) else "sync")
        super().sync(descriptor)

    def replace(self, source: Path, target: Path) -> None:
        self._step(f"replace {target.name}")
        super().replace(source, target)


def test_content_is_on_disk_before_its_name(tmp_path: Path) -> None:
    """Two files of one folder: each is synced before it gets its name, and the folder is synced once, last."""
    disk = _TellingDisk()

    disk.write_all(tmp_path, {"a.csv": [b"1"], "a.json": [b"2", b"3"]})

    assert disk.steps == ["sync", "replace a.csv", "sync", "replace a.json", "folder"]
    assert (tmp_path / "a.csv").read_bytes() == b"1"
    assert (tmp_path / "a.json").read_bytes() == b"23"


@pytest.mark.parametrize("step", [1, 2, 3])
def test_a_step_that_fails_leaves_the_old_file_or_the_new(tmp_path: Path, step: int) -> None:
    """Whatever step fails, a reader finds a whole file and no temporary one, and the error is not hidden."""
    (tmp_path / "a.csv").write_bytes(b"old")

    with pytest.raises(OSError, match="Input/output error"):
        _TellingDisk(step).atomic_write(tmp_path / "a.csv", b"new")

    assert (tmp_path / "a.csv").read_bytes() == (b"new" if step == 3 else b"old")
    assert [path.name for path in tmp_path.iterdir()] == ["a.csv"]


def test_files_are_as_readable_as_any_other(tmp_path: Path) -> None:
    """A result file has the rights the user's mask gives, not those of a temporary file."""
    Disk().atomic_write(tmp_path / "a.csv", b"1")
    (tmp_path / "b.csv").write_bytes(b"1")

    assert (tmp_path / "a.csv").stat().st_mode == (tmp_path / "b.csv").stat().st_mode


class _HeldFile:
    """Stands for a path on Windows that is held for some tries."""

    def __init__(self, code: int, tries: int) -> None:
        self.left = tries
        self.code = code

    def replace(self, _target: Any) -> None:
        if self.left:
            self.left -= 1
            error = PermissionError("held")
            error.winerror = self.code  # type: ignore[attr-defined]
            raise error


@pytest.mark.parametrize("code", [5, 32, 33])
def test_a_file_held_for_a_moment_is_tried_again(code: int) -> None:
    """The three passing errors of Windows are waited out, with growing pauses."""
    pauses: list[float] = []

    Disk(pauses.append).replace(_HeldFile(code, 3), None)  # type: ignore[arg-type]

    assert pauses == list(WINDOWS_PAUSES[:3])


@pytest.mark.parametrize(("code", "tries", "waited"), [(17, 1, 0), (32, 99, len(WINDOWS_PAUSES))])
def test_other_errors_and_lasting_ones_are_not_hidden(code: int, tries: int, waited: int) -> None:
    """Any other error is raised at once, and a passing one that lasts is raised in the end."""
    pauses: list[float] = []

    with pytest.raises(PermissionError, match="held"):
        Disk(pauses.append).replace(_HeldFile(code, tries), None)  # type: ignore[arg-type]

    assert len(pauses) == waited


def test_a_sweep_touches_only_our_own(tmp_path: Path) -> None:
    """Temporary files of other programs stay."""
    for name in (".spikewarden-1.tmp", ".other.tmp", "a.csv"):
        (tmp_path / name).write_bytes(b"")

    assert sweep(tmp_path) == 1
    assert sorted(path.name for path in tmp_path.iterdir()) == [".other.tmp", "a.csv"]
