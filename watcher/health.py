"""How the service is: a small file, written anew after each round, that other processes may read at any time.

The ledger is held by the service alone, so this file is what `status` shows. It proves nothing by itself: its age
and the lock tell whether a service is behind it. Nothing here judges.
"""

from __future__ import annotations

import contextlib
import json
from dataclasses import asdict, dataclass, field
from typing import TYPE_CHECKING, Any

from watcher.disk import TEMPORARY_PREFIX
from watcher.instance import is_held

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.failures import Failure
    from watcher.ledger_rows import Listed, RefusedExport

STATUS_NAME = "status.json"


@dataclass(frozen=True, slots=True)
class Undelivered:
    """What waits to leave: how many, since when the oldest, and the last thing that went wrong."""

    count: int
    oldest: str | None
    last_error: str | None


@dataclass(frozen=True, slots=True)
class Heartbeat:
    """How the service is.

    Attributes
    ----------
    running
        False once it has stopped in order.
    last_scan_at, last_delivery_at
        When the folders were last looked through, and when the thread that mails last came by.
    last_export
        The name of the export taken in last.
    evaluating
        The export that is being evaluated.
    counts
        State to number of exports.
    refused
        Exports without results, with their reasons, newest first.
    undelivered_mails, refused_mails, undelivered_files
        What waits to leave, and mails a server refused for good.
    open_failures
        Samples that failed and of which nothing better is known yet, oldest first.
    latest
        The newest exports, with what came of them.
    problems
        What is wrong now, in sentences: folders, worker, disk, mail.
    """

    running: bool
    pid: int
    version: str
    laboratory: str
    started_at: str
    written_at: str
    last_scan_at: str | None = None
    last_delivery_at: str | None = None
    last_export: str | None = None
    evaluating: str | None = None
    settings_number: int | None = None
    counts: dict[str, int] = field(default_factory=dict)
    refused: list[RefusedExport] = field(default_factory=list)
    undelivered_mails: Undelivered = Undelivered(0, None, None)
    refused_mails: Undelivered = Undelivered(0, None, None)
    undelivered_files: Undelivered = Undelivered(0, None, None)
    open_failures: list[Failure] = field(default_factory=list)
    latest: list[Listed] = field(default_factory=list)
    problems: list[str] = field(default_factory=list)


def write_heartbeat(records: Path, heartbeat: Heartbeat) -> None:
    """Write the file. It is not forced to disk: after a power cut nothing is behind it anyway."""
    temporary = records / f"{TEMPORARY_PREFIX}status.tmp"
    temporary.write_text(json.dumps(asdict(heartbeat), ensure_ascii=False) + "\n", "utf-8")
    temporary.replace(records / STATUS_NAME)


@dataclass(frozen=True, slots=True)
class Status:
    """What another process can learn of a service.

    Attributes
    ----------
    held
        A process holds the records folder now.
    heartbeat
        The last file it wrote, as plain values; None where there is none or it cannot be read.
    """

    held: bool
    heartbeat: dict[str, Any] | None


def read_status(records: Path) -> Status:
    """Read how the service of a records folder is; never fails for what is not there."""
    heartbeat = None
    with contextlib.suppress(OSError, ValueError):
        loaded = json.loads((records / STATUS_NAME).read_text("utf-8"))
        heartbeat = loaded if isinstance(loaded, dict) else None
    return Status(is_held(records), heartbeat)
