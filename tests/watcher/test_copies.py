"""Copying an export: read twice, kept under its hash, never half, never from what is no file."""

from __future__ import annotations

import hashlib
import os
from typing import TYPE_CHECKING, Any

import pytest

from watcher import copies as module
from watcher.copies import Copies, CopyPostponed, CopyRefused
from watcher.disk import Disk
from watcher.folder import Candidate, signature_of

if TYPE_CHECKING:
    from pathlib import Path


class _CountingDisk(Disk):
    """Counts what is forced to disk."""

    def __init__(self) -> None:
        super().__init__()
        self.syncs = 0

    def sync(self, descriptor: int) -> None:
        self.syncs += 1
        super().sync(descriptor)


@pytest.fixture
def disk() -> _CountingDisk:
    """A disk that counts."""
    return _CountingDisk()


@pytest.fixture
def copies(tmp_path: Path, disk: _CountingDisk) -> Copies:
    """Copies in an empty records folder, up to 1000 bytes each."""
    made = Copies(tmp_path / "records", disk, size_limit_bytes=1000, reserve_bytes=0)
    (tmp_path / "records").mkdir()
    made.prepare()
    disk.syncs = 0
    return made


def _candidate(path: Path) -> Candidate:
    found = path.stat()
    return Candidate(path, path.name, signature_of(found))


@pytest.fixture
def export(tmp_path: Path) -> Path:
    """An export of one line."""
    path = tmp_path / "SED-12.csv"
    path.write_bytes(b"SED-12;Zn;0.51\n")
    return path


def _files(copies: Copies) -> list[Path]:
    return list(copies.path_of("x").parent.iterdir())


def test_a_copy_lies_under_its_hash(copies: Copies, export: Path, disk: _CountingDisk) -> None:
    """The copy has the export's bytes and hash, and cost one sync for the file and one for the folder."""
    sha256 = copies.hash_of(_candidate(export))
    copy = copies.take(_candidate(export), sha256)

    assert sha256 == hashlib.sha256(export.read_bytes()).hexdigest()
    assert copy.path.read_bytes() == export.read_bytes()
    assert copy.size == 15
    assert _files(copies) == [copy.path]
    assert disk.syncs == 2


def test_the_same_content_is_stored_once(copies: Copies, export: Path, disk: _CountingDisk) -> None:
    """A content that is there already is checked and not written again; a damaged one is replaced."""
    sha256 = copies.hash_of(_candidate(export))
    copy = copies.take(_candidate(export), sha256)
    copies.take(_candidate(export), sha256)
    assert disk.syncs == 2

    copy.path.write_bytes(b"SED-12;Zn;9.99\n")
    copies.take(_candidate(export), sha256)

    assert copy.path.read_bytes() == export.read_bytes()


def test_a_file_that_changed_since_it_was_seen_is_put_off(copies: Copies, export: Path) -> None:
    """A file that is not the one that settled is not hashed into anything."""
    seen = _candidate(export)
    with export.open("ab") as file:
        file.write(b"more")

    with pytest.raises(CopyPostponed, match=r"SED-12.csv: it is still being written\. It was not taken in yet"):
        copies.hash_of(seen)


def test_readings_that_differ_are_no_copy(copies: Copies, export: Path) -> None:
    """Content exchanged between the two readings, of whatever size and time, is noticed and nothing is left."""
    seen = _candidate(export)
    sha256 = copies.hash_of(seen)
    with export.open("r+b") as file:
        file.write(b"SED-13")
    seen = _candidate(export)

    with pytest.raises(CopyPostponed, match="it changed while it was being read"):
        copies.take(seen, sha256)

    assert _files(copies) == []


def test_a_file_over_the_limit_is_refused_unread(copies: Copies, export: Path, monkeypatch: Any) -> None:
    """An export that is too large is refused before it is opened, with both numbers."""
    export.write_bytes(b"x" * 1001)
    monkeypatch.setattr(module.os, "open", None)

    with pytest.raises(CopyRefused, match=r"it has 1001 bytes, at most 1000 are read\. .* Export fewer samples"):
        copies.hash_of(_candidate(export))


@pytest.mark.parametrize("kind", ["link", "pipe"])
def test_a_file_that_became_something_else_is_refused(copies: Copies, export: Path, kind: str) -> None:
    """A link or pipe put in the file's place after the look is neither followed nor waited for."""
    seen = _candidate(export)
    export.unlink()
    export.symlink_to("/etc/hostname") if kind == "link" else os.mkfifo(export)

    with pytest.raises(CopyRefused, match="it is no regular file any more"):
        copies.hash_of(seen)


def test_a_file_that_is_held_is_put_off_with_the_reason(copies: Copies, export: Path, monkeypatch: Any) -> None:
    """What the system refuses to open is tried again later; somebody should know if it lasts."""

    def held(*_: object) -> int:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(module.os, "open", held)

    with pytest.raises(CopyPostponed, match=r"cannot be opened \(Permission denied\)") as caught:
        copies.hash_of(_candidate(export))
    assert not caught.value.expected


def test_a_file_that_is_gone_is_put_off_quietly(copies: Copies, export: Path) -> None:
    """A file removed after the look is ordinary."""
    seen = _candidate(export)
    export.unlink()

    with pytest.raises(CopyPostponed, match="cannot be opened") as caught:
        copies.hash_of(seen)
    assert caught.value.expected


def test_the_instruments_disk_is_not_filled(tmp_path: Path, export: Path) -> None:
    """Where a copy would eat into the reserve, nothing is written."""
    copies = Copies(tmp_path, Disk(), size_limit_bytes=1000, reserve_bytes=2**62)
    copies.prepare()

    with pytest.raises(CopyPostponed, match="must stay free") as caught:
        copies.take(_candidate(export), copies.hash_of(_candidate(export)))
    assert caught.value.lasting
    assert _files(copies) == []


def test_a_killed_copy_is_swept_at_the_start(copies: Copies) -> None:
    """What a killed run left half written is removed, copies are not."""
    folder = copies.path_of("x").parent
    (folder / ".spikewarden-abc.tmp").write_bytes(b"half")
    (folder / ("0" * 64)).write_bytes(b"whole")

    copies.prepare()

    assert [path.name for path in _files(copies)] == ["0" * 64]
