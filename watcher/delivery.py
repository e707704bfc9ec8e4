"""Bringing one result file from the records into the results folder.

The bytes are checked against the hash the ledger holds and replace the old file as a whole. A path that would lead
out of the results folder is refused. The results folder itself is not made here: where it is missing, a share may
be gone, and files must not end up under its empty mount point.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath
from typing import TYPE_CHECKING

from watcher.errors import WatcherError

if TYPE_CHECKING:
    from watcher.disk import Disk
    from watcher.ledger_rows import DueFile


@dataclass(eq=False)
class TargetOutside(WatcherError):
    """A result file would leave the results folder."""

    target: str
    results: Path

    def __str__(self) -> str:
        return (
            f"Result file {self.target!r} would lie outside the results folder {self.results}. It was not written. "
            "See whether a link was put into the results folder; otherwise this is a defect of the program."
        )


@dataclass(eq=False)
class StagedFileAltered(WatcherError):
    """A result file in the records is not the one that was computed."""

    staged: Path
    target: str
    fault: str

    def __str__(self) -> str:
        return (
            f"Result file {self.staged}, meant for {self.target}, {self.fault}. It was not delivered. "
            "Someone or something changed the records folder; evaluate its export again."
        )


def deliver(due: DueFile, results: Path, disk: Disk) -> None:
    """Put a result file into the results folder, durably, and leave the staged one in place.

    Raises
    ------
    TargetOutside, StagedFileAltered
        It can never be delivered as it is.
    OSError
        Not now: the share is gone, the folder read-only, the disk full, the file held open.
    """
    target = inside(results, due.target)
    content = _staged_content(due)
    if not target.parent.is_dir():
        target.parent.mkdir()  # one level, never the results folder itself
        disk.sync_folder(target.parent.parent)
    disk.atomic_write(target, content, "deliver")


def inside(results: Path, target: str) -> Path:
    """Return where a target lies; at most one folder below the results folder.

    Raises
    ------
    TargetOutside
        It is absolute, climbs, is too deep, or passes through a link.
    """
    relative = PurePosixPath(target)
    windows = PureWindowsPath(target)
    plain = (
        bool(relative.name)
        and len(relative.parts) <= 2
        and ".." not in relative.parts
        and "\\" not in target
        and "\0" not in target
        and not (relative.is_absolute() or windows.drive or windows.root)
    )
    path = results / relative
    if not plain or path.parent.resolve() != results.resolve() / relative.parent:
        raise TargetOutside(target, results)
    return path


def _staged_content(due: DueFile) -> bytes:
    try:
        content = due.staged.read_bytes()
    except FileNotFoundError as error:
        raise StagedFileAltered(due.staged, due.target, "is missing") from error
    if hashlib.sha256(content).hexdigest() != due.sha256:
        raise StagedFileAltered(due.staged, due.target, "has other bytes than were computed")
    return content
