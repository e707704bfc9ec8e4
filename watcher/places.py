"""What is looked at once, at the start: folders that may not be written, a ledger that was altered, a network path.

Nothing here repairs; what is found is told once and the service goes on, except where the ledger would not be safe.
"""

from __future__ import annotations

import os
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from watcher.errors import WatcherError
from watcher.folder import Trouble

if TYPE_CHECKING:
    from watcher.ledger import Ledger
    from watcher.service_settings import ServiceSettings

#: File systems on which locks of the operating system and the ledger's own are not to be trusted.
NETWORK = frozenset({"nfs", "nfs4", "cifs", "smb3", "smbfs", "afs", "ncpfs", "9p", "fuse.sshfs", "glusterfs", "ceph"})
#: File systems that forget everything when the computer is switched off.
PASSING = frozenset({"tmpfs", "ramfs"})


@dataclass(eq=False)
class RecordsOnNetwork(WatcherError):
    """The records would lie on another computer."""

    records: Path
    kind: str

    def __str__(self) -> str:
        return (
            f"Records folder {self.records}: expected a local disk, got a network path ({self.kind}). Nothing was "
            "started: a ledger on a share is damaged sooner or later. Set folders.records to a folder of this computer."
        )


def refuse_network(records: Path) -> None:
    """Refuse records on a share.

    Raises
    ------
    RecordsOnNetwork
        The path is one.
    """
    kind = "a path to another computer" if str(records).startswith(("\\\\", "//")) else file_system(records)
    if kind in NETWORK or kind.startswith("a path"):
        raise RecordsOnNetwork(records, kind)


def file_system(path: Path, mounts: Path = Path("/proc/self/mounts")) -> str:
    """Return the kind of file system a path lies on, as the system calls it; empty where it does not say."""
    if sys.platform != "linux":
        return ""
    try:
        lines = mounts.read_text("utf-8", "surrogateescape").splitlines()
    except OSError:
        return ""
    best, kind = -1, ""
    place = path.absolute()
    while not place.exists() and place != place.parent:
        place = place.parent
    resolved = place.resolve()
    for line in lines:
        _, point, found, *_ = line.split(" ")
        mounted = Path(point.replace("\\040", " "))
        if resolved.is_relative_to(mounted) and len(mounted.parts) >= best:
            best, kind = len(mounted.parts), found
    return kind


def findings(settings: ServiceSettings, ledger: Ledger) -> list[Trouble]:
    """Look at what a person should know from the start."""
    found = []
    if (number := ledger.broken_at()) is not None:
        sentence = (
            f"The ledger was altered: entry {number} is not what it was when it was sealed. New entries go on behind "
            "it. Compare with the numbers and seals in the mails and with the last backup, and keep the file."
        )
        found.append(Trouble(f"odd:altered:{number}", sentence))
    if file_system(settings.records) in PASSING:
        sentence = (
            f"Records folder {settings.records} lies on a temporary file system: switched off, the computer forgets "
            "what was mailed. Set folders.records to a folder on a disk."
        )
        found.append(Trouble("odd:passing", sentence))
    for folder, mode, word in (
        *((each, os.R_OK | os.X_OK, "read") for each in settings.exports),
        (settings.results, os.W_OK | os.X_OK, "written"),
    ):
        if folder.is_dir() and not os.access(folder, mode):
            sentence = (
                f"Folder {folder} may not be {word} by the account that runs the service. What needs it waits. "
                "Give the account the right, or choose another folder."
            )
            found.append(Trouble(f"access:{folder}", sentence))
    return found
