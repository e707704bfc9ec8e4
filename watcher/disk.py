"""Writing files so that they survive a power cut: the one way by which this program makes a file durable.

A file is written under a temporary name in its own folder, forced to disk, given its name, and then the folder is
forced to disk, so that a reader sees the old file or the new one and never half of either. Tests replace `Disk` to
count or to fail steps. Nothing here decides what is written, and nothing is ever deleted before its replacement.
"""

from __future__ import annotations

import os
import tempfile
import time
from pathlib import Path
from typing import TYPE_CHECKING, Self

from watcher.kill_points import at

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping

#: Our temporary files, so that a sweep in a shared folder can touch no one else's.
TEMPORARY_PREFIX = ".spikewarden-"
TEMPORARY_SUFFIX = ".tmp"

#: Windows: access denied, sharing violation, lock violation: a virus scanner or a spreadsheet holds the file.
PASSING_WINDOWS_ERRORS = (5, 32, 33)
#: Seconds between tries of a replacement on Windows; together 2.5 s.
WINDOWS_PAUSES = (0.1, 0.2, 0.4, 0.8, 1.0)


class Disk:
    """The durable steps; one object serves the whole process.

    Parameters
    ----------
    pause
        How to wait between tries of a replacement on Windows.
    """

    def __init__(self, pause: Callable[[float], None] = time.sleep) -> None:
        self._pause = pause

    def open(self, folder: Path) -> tuple[int, Path]:
        """Open a new file without its name yet, in the folder that it belongs to."""
        descriptor, name = tempfile.mkstemp(dir=folder, prefix=TEMPORARY_PREFIX, suffix=TEMPORARY_SUFFIX)
        return descriptor, Path(name)

    def write(self, descriptor: int, piece: memoryview) -> int:
        """Append what the system takes at once; returns how much that was."""
        return os.write(descriptor, piece)

    def sync(self, descriptor: int) -> None:
        """Force an open file to disk; a failure is final, since the system may have dropped the data."""
        os.fsync(descriptor)

    def sync_folder(self, folder: Path) -> None:
        """Force the names in a folder to disk; Windows cannot and needs not."""
        if os.name == "nt":
            return
        descriptor = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
        try:
            self.sync(descriptor)
        finally:
            os.close(descriptor)

    def replace(self, source: Path, target: Path) -> None:
        """Give `source` the name `target`; tries again only where Windows says the file is held for a moment."""
        for pause in WINDOWS_PAUSES:
            try:
                source.replace(target)
            except OSError as error:
                if getattr(error, "winerror", None) not in PASSING_WINDOWS_ERRORS:
                    raise
                self._pause(pause)
            else:
                return
        source.replace(target)

    def atomic_write(self, path: Path, content: bytes, step: str | None = None) -> None:
        """Write one file durably.

        Parameters
        ----------
        path
            The file; its folder must exist.
        content
            All of it.
        step
            The name of this step among the kill points.
        """
        self.write_all(path.parent, {path.name: (content,)}, step)

    def write_all(self, folder: Path, contents: Mapping[str, Iterable[bytes]], step: str | None = None) -> None:
        """Write several files of one folder durably, forcing the folder to disk once.

        Parameters
        ----------
        folder
            An existing folder.
        contents
            Name in the folder to content, in pieces, which are never held together.
        step
            The name of this step among the kill points.
        """
        _pass(step, "begins")
        for name, content in contents.items():
            self._write(folder / name, content, step)
        self.sync_folder(folder)
        _pass(step, "durable")

    def _write(self, path: Path, content: Iterable[bytes], step: str | None) -> None:
        with TemporaryFile(self, path.parent) as temporary:
            for piece in content:
                temporary.write(piece)
            temporary.become(path, step)


class TemporaryFile:
    """A file without its name yet: written in pieces, then given its name or removed.

    The folder is not forced to disk here; whoever writes several files does that once.
    """

    def __init__(self, disk: Disk, folder: Path) -> None:
        self._disk = disk
        self._open = True
        self._path: Path | None
        self._descriptor, self._path = disk.open(folder)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._close()
        if self._path is not None:
            self._path.unlink(missing_ok=True)

    def write(self, piece: bytes) -> None:
        """Append a piece."""
        view = memoryview(piece)
        while view:
            view = view[self._disk.write(self._descriptor, view) :]

    def become(self, path: Path, step: str | None) -> None:
        """Force the content to disk and give the file its name, readable as the user's mask says."""
        if os.name != "nt":
            os.fchmod(self._descriptor, 0o666 & ~_user_mask())
        self._disk.sync(self._descriptor)
        self._close()
        _pass(step, "written")
        if self._path is not None:
            self._disk.replace(self._path, path)
        self._path = None
        _pass(step, "replaced")

    def _close(self) -> None:
        if self._open:
            self._open = False
            os.close(self._descriptor)


def sweep(folder: Path) -> int:
    """Remove temporary files that a killed run left in a folder; returns how many. Call it only at start."""
    stale = list(folder.glob(f"{TEMPORARY_PREFIX}*{TEMPORARY_SUFFIX}"))
    for path in stale:
        path.unlink(missing_ok=True)
    return len(stale)


def _pass(step: str | None, moment: str) -> None:
    if step is not None:
        at(f"{step}-{moment}")


def _user_mask() -> int:
    # Reading the mask means setting it; 0o077 in between is the strict side.
    mask = os.umask(0o077)
    os.umask(mask)
    return mask
