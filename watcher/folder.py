"""Looking through an exports folder: which files are there, and which have stopped changing.

The full look is the truth; nothing is ever left out because it is "old". A file counts as settled when size, time
and identity were the same in looks at least `settle_seconds` apart. What was taken in once is skipped as long as
its signature stays; after a restart everything is settled anew and told apart by its content. Never opens a file,
never moves or changes one.
"""

from __future__ import annotations

import os
import stat
from array import array
from bisect import bisect_left, insort
from dataclasses import dataclass
from fnmatch import fnmatch
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

#: Names that programs give to files they have not finished, or keep beside them; compared in lower case.
IGNORED = (
    ".*", "~$*", "*~", "*.tmp", "*.temp", "*.part", "*.partial", "*.crdownload", "*.download", "*.swp", "*.lock",
    "thumbs.db", "desktop.ini",
)  # fmt: skip
#: A directory with such an ending was meant to be an export.
EXPORT_ENDINGS = frozenset({".csv", ".txt", ".tsv", ".asc", ".prn", ".dat", ".log", ".rep"})


#: So many files that are gone are remembered before they are forgotten.
FORGOTTEN = 1000

#: See `signature_of`.
Signature = tuple[int, int, int, int]


@dataclass(frozen=True, slots=True)
class Candidate:
    """A file that may be taken in: it was seen twice, unchanged.

    Attributes
    ----------
    path
        Where it is.
    name
        Path under the exports folder, with ``/``: the name of the export.
    signature
        What tells whether it was changed; see `signature_of`.
    """

    path: Path
    name: str
    signature: Signature

    @property
    def size(self) -> int:
        """Its size in bytes."""
        return self.signature[0]


@dataclass(frozen=True, slots=True)
class Trouble:
    """Something in or with the folder that cannot be taken in.

    Attributes
    ----------
    key
        The same for the same trouble.
    sentence
        What, what follows, and what to do.
    """

    key: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Look:
    """What one look through a folder found.

    Attributes
    ----------
    settled
        Files that were not taken in yet and have stopped changing, by name.
    unsettled
        Names of those that may still change.
    troubles
        Everything that is wrong now, known or new.
    settles_at
        The monotonic second at which the first of `unsettled` may have settled.
    """

    settled: tuple[Candidate, ...]
    unsettled: tuple[str, ...]
    troubles: tuple[Trouble, ...]
    settles_at: float | None = None


class _Seen:
    """One file over several looks."""

    __slots__ = ("signature", "since")

    def __init__(self, signature: Signature, since: float) -> None:
        self.signature = signature
        self.since = since


class Folder:
    """One exports folder.

    Parameters
    ----------
    root
        Its absolute path.
    prefix
        What its exports' names begin with; empty for the first folder.
    settle_seconds
        How long a file must stay unchanged.
    subfolders
        Whether to look into subfolders.
    """

    def __init__(self, root: Path, *, prefix: str = "", settle_seconds: float = 5.0, subfolders: bool = False) -> None:
        self.root = root
        self._prefix = prefix
        self._settle_seconds = settle_seconds
        self._subfolders = subfolders
        self._seen: dict[str, _Seen] = {}
        #: Hashes of name and signature of what was taken in, sorted: 8 bytes for each of perhaps 100,000 files.
        self._taken = array("Q")
        self._present = 0

    def look(self, now: float) -> Look:
        """Look through the whole folder.

        Parameters
        ----------
        now
            Monotonic seconds.

        Returns
        -------
        Look
            With a trouble, and nothing else, where the folder is not there or cannot be read.
        """
        troubles: list[Trouble] = []
        seen: dict[str, _Seen] = {}
        settled: list[Candidate] = []
        unsettled: list[str] = []
        settles_at: list[float] = []
        try:
            for name, path, signature in self._files(troubles):
                known = self._seen.get(name)
                if known is None or known.signature != signature:
                    known = _Seen(signature, now)
                seen[name] = known
                if now > known.since and now - known.since >= self._settle_seconds:
                    settled.append(Candidate(Path(path), name, signature))
                else:
                    unsettled.append(name)
                    settles_at.append(known.since + self._settle_seconds)
        except OSError as error:
            # What was seen is kept: a share that comes back is no reason to read everything again.
            return Look((), (), (self._unreadable(error),))
        self._seen = seen
        return Look(
            tuple(sorted(settled, key=lambda each: each.name)),
            tuple(unsettled),
            tuple(troubles),
            min(settles_at, default=None),
        )

    def taken(self, candidate: Candidate) -> None:
        """Skip this file from now on, unless its signature changes."""
        known = self._seen.get(candidate.name)
        if known is not None and known.signature == candidate.signature:
            insort(self._taken, _mark(candidate.name, candidate.signature))
            del self._seen[candidate.name]

    def _files(self, troubles: list[Trouble]) -> Iterator[tuple[str, str, Signature]]:
        """Yield name, path and signature of every regular file that was not taken in; note what is none."""
        present, self._present = self._present, 0
        still_there = array("Q") if len(self._taken) > 2 * present + FORGOTTEN else None
        open_folders = [(os.fspath(self.root), self._prefix)]
        while open_folders:
            folder, prefix = open_folders.pop()
            with os.scandir(folder) as entries:
                for entry in entries:
                    name = prefix + entry.name
                    try:
                        # Windows' own list of a folder holds no identities.
                        found = os.lstat(entry.path) if os.name == "nt" else entry.stat(follow_symlinks=False)
                    except FileNotFoundError:
                        continue  # gone since the folder was listed
                    signature = signature_of(found)
                    if self._was_taken(mark := _mark(name, signature)):
                        self._present += 1
                        if still_there is not None:
                            still_there.append(mark)
                    elif is_ignored(entry.name):
                        continue
                    elif stat.S_ISREG(found.st_mode) and _is_text(name):
                        yield name, entry.path, signature
                    elif stat.S_ISDIR(found.st_mode) and self._subfolders and _is_text(name):
                        open_folders.append((entry.path, f"{name}/"))
                    else:
                        troubles.extend(self._odd(name, found.st_mode))
        if still_there is not None:
            self._taken = array("Q", sorted(still_there))

    def _was_taken(self, mark: int) -> bool:
        place = bisect_left(self._taken, mark)
        return place < len(self._taken) and self._taken[place] == mark

    def _odd(self, name: str, mode: int) -> Iterator[Trouble]:
        if not _is_text(name):
            what, remedy = "has a name that is not valid UTF-8", "Rename it"
        elif stat.S_ISDIR(mode):
            if Path(name).suffix.lower() not in EXPORT_ENDINGS:
                return  # an ordinary subfolder, not asked for
            what, remedy = "is a directory with the name of an export", "Move it elsewhere"
        elif stat.S_ISLNK(mode):
            what, remedy = "is a symbolic link; only files themselves are read", "Put the file itself here"
        else:
            what, remedy = "is no regular file", "Move it elsewhere"
        shown = name.encode("utf-8", "surrogateescape").decode("utf-8", "backslashreplace")
        yield Trouble(
            f"odd:{shown}:{what}",
            f"{shown} in {self.root} {what}. It was not taken in; everything else is. {remedy}.",
        )

    def _unreadable(self, error: OSError) -> Trouble:
        return Trouble(
            f"folder:{self.root}",
            f"Exports folder {self.root} cannot be looked through ({error.strerror or error}). No new export is "
            "taken in from it until it is there again, which is noticed by itself. See whether the share is "
            "connected and the service's account may read it.",
        )


def signature_of(found: os.stat_result) -> Signature:
    """Return what tells whether a file was changed: size, modification time, identity, time of the last change.

    The last one cannot be put back by the program that writes, except on Windows, where it is the time of creation:
    there a replacement of the same size and time is noticed at the next start.
    """
    return found.st_size, found.st_mtime_ns, found.st_ino, 0 if os.name == "nt" else found.st_ctime_ns


def _mark(name: str, signature: Signature) -> int:
    return hash((name, signature)) & 0xFFFF_FFFF_FFFF_FFFF


def is_ignored(file_name: str) -> bool:
    """Tell whether a name is that of an unfinished or accompanying file.

    >>> [name for name in ("SED-12.csv", "~$SED-12.csv", ".SED-12.csv", "a.part") if is_ignored(name)]
    ['~$SED-12.csv', '.SED-12.csv', 'a.part']
    """
    lower = file_name.lower()
    return any(fnmatch(lower, pattern) for pattern in IGNORED)


def _is_text(name: str) -> bool:
    try:
        name.encode("utf-8")
    except UnicodeEncodeError:
        return False
    return True
