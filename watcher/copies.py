"""Our own copies of exports: read briefly, read twice, kept under the hash of their content.

Everything later is computed from the copy, so that an export that is changed, moved or deleted afterwards changes
nothing. The original is opened for reading only, never waited for, never moved. Whether a content is new is for
the ledger to say.
"""

from __future__ import annotations

import errno
import hashlib
import os
import shutil
import stat
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.disk import TemporaryFile, sweep
from watcher.errors import WatcherError
from watcher.folder import signature_of
from watcher.kill_points import at

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    from watcher.disk import Disk
    from watcher.folder import Candidate

COPIES_NAME = "copies"
PIECE_BYTES = 1024 * 1024


@dataclass(eq=False)
class CopyRefused(WatcherError):
    """A file is not taken in as it is."""

    name: str
    fault: str
    remedy: str

    def __str__(self) -> str:
        return f"{self.name}: {self.fault}. It was not taken in; everything else is. {self.remedy}"


@dataclass(eq=False)
class CopyPostponed(WatcherError):
    """A file cannot be taken in now; it is tried again at the next look.

    Attributes
    ----------
    expected
        True where that is ordinary (it is still being written), False where someone should know if it lasts.
    lasting
        True where it will not pass by itself.
    """

    name: str
    fault: str
    expected: bool
    lasting: bool = False

    def __str__(self) -> str:
        return (
            f"{self.name}: {self.fault}. It was not taken in yet and is tried again at every look. "
            "If this lasts, see which program holds it and whether the service's account may read it."
        )


@dataclass(frozen=True, slots=True)
class Copy:
    """A durable copy: its hash, its size in bytes, and where it is."""

    sha256: str
    size: int
    path: Path


class Copies:
    """The copies in a records folder.

    Parameters
    ----------
    records
        The records folder.
    disk
        How files become durable.
    size_limit_bytes
        A larger export is refused unread.
    reserve_bytes
        Space that stays free on the disk: no copy may be the one that fills the instrument's disk.
    """

    def __init__(self, records: Path, disk: Disk, *, size_limit_bytes: int, reserve_bytes: int) -> None:
        self._folder = records / COPIES_NAME
        self._disk = disk
        self._size_limit_bytes = size_limit_bytes
        self._reserve_bytes = reserve_bytes

    def prepare(self) -> None:
        """Make the folder and remove what a killed run left half written."""
        self._folder.mkdir(parents=True, exist_ok=True)
        self._disk.sync_folder(self._folder.parent)
        self._disk.sync_folder(self._folder.parent.parent)
        sweep(self._folder)

    def path_of(self, sha256: str) -> Path:
        """Where the copy with this hash is."""
        return self._folder / sha256

    def hash_of(self, candidate: Candidate) -> str:
        """Read the file once and return its SHA-256.

        Raises
        ------
        CopyRefused
            Too large, or no regular file.
        CopyPostponed
            It changed since it was seen, or is held by another program.
        """
        self._refuse_too_large(candidate)
        return self._read(candidate, lambda _piece: None)

    def take(self, candidate: Candidate, sha256: str) -> Copy:
        """Read the file a second time into a durable copy; both readings must agree.

        Raises
        ------
        CopyRefused
            As `hash_of`.
        CopyPostponed
            As `hash_of`, or the two readings differ, or the disk of the records is nearly full.
        """
        self._refuse_too_large(candidate)
        target = self.path_of(sha256)
        if target.exists() and target.stat().st_size == candidate.size and _hash(target) == sha256:
            return Copy(sha256, candidate.size, target)
        self._keep_reserve(candidate)
        at("copy-begins")
        with TemporaryFile(self._disk, self._folder) as temporary:
            if self._read(candidate, temporary.write) != sha256:
                raise CopyPostponed(candidate.name, "it changed while it was being read", expected=True)
            temporary.become(target, "copy")
        self._disk.sync_folder(self._folder)
        at("copy-durable")
        return Copy(sha256, candidate.size, target)

    def _read(self, candidate: Candidate, use: Callable[[bytes], None]) -> str:
        digest = hashlib.sha256()
        descriptor = _open(candidate)
        try:
            for piece in _pieces(descriptor, candidate):
                digest.update(piece)
                use(piece)
            after = os.fstat(descriptor)
        finally:
            os.close(descriptor)
        if signature_of(after) != candidate.signature:
            raise CopyPostponed(candidate.name, "it is still being written", expected=True)
        return digest.hexdigest()

    def _refuse_too_large(self, candidate: Candidate) -> None:
        if candidate.size > self._size_limit_bytes:
            raise CopyRefused(
                candidate.name,
                f"it has {candidate.size} bytes, at most {self._size_limit_bytes} are read",
                "Export fewer samples at a time, or raise the limit.",
            )

    def _keep_reserve(self, candidate: Candidate) -> None:
        free = shutil.disk_usage(self._folder).free
        if free - candidate.size < self._reserve_bytes:
            raise CopyPostponed(
                candidate.name,
                f"the disk of {self._folder} has {free} bytes free, {self._reserve_bytes} must stay free",
                expected=False,
                lasting=True,
            )


def _open(candidate: Candidate) -> int:
    """Open for reading, without following links and without waiting for the other end of a pipe."""
    flags = os.O_RDONLY | getattr(os, "O_NOFOLLOW", 0) | getattr(os, "O_NONBLOCK", 0) | getattr(os, "O_BINARY", 0)
    try:
        descriptor = os.open(candidate.path, flags)
    except OSError as error:
        if error.errno == errno.ELOOP:
            raise _no_file(candidate) from error
        gone = isinstance(error, FileNotFoundError)
        raise CopyPostponed(
            candidate.name, f"it cannot be opened ({error.strerror or error})", expected=gone
        ) from error
    if not stat.S_ISREG(os.fstat(descriptor).st_mode):
        os.close(descriptor)
        raise _no_file(candidate)
    return descriptor


def _no_file(candidate: Candidate) -> CopyRefused:
    return CopyRefused(candidate.name, "it is no regular file any more", "Put the file itself here.")


def _pieces(descriptor: int, candidate: Candidate) -> Iterator[bytes]:
    while True:
        try:
            piece = os.read(descriptor, PIECE_BYTES)
        except OSError as error:
            fault = f"reading it failed ({error.strerror or error})"
            raise CopyPostponed(candidate.name, fault, expected=False) from error
        if not piece:
            return
        yield piece


def _hash(path: Path) -> str:
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
