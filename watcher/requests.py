"""What people ask of a running service: small files in `records/requests/`, each done once.

The ledger belongs to the service, so a command puts its request there, durably, and the service does it within a
round. The same request done by the command itself, where no service runs, takes the same way. A request is removed
only after the ledger holds it, under an identity that keeps it from being done twice.
"""

from __future__ import annotations

import contextlib
import json
import uuid
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING

from watcher.disk import Disk
from watcher.errors import WatcherError

if TYPE_CHECKING:
    from pathlib import Path

REQUESTS_NAME = "requests"
#: What may be asked.
KINDS = ("adopt", "again", "note")
#: Bytes of a request; anything longer was not written by us.
LONGEST = 64 * 1024


@dataclass(eq=False)
class RequestRefused(WatcherError):
    """A request cannot be done, and why, in a whole sentence."""

    reason: str

    def __str__(self) -> str:
        return self.reason


@dataclass(frozen=True, slots=True)
class Request:
    """One request.

    Attributes
    ----------
    id
        Its identity; done at most once.
    kind
        One of `KINDS`.
    export
        The export's name, where it is about one.
    by, why
        Who asks, and the reason or the note itself.
    """

    id: str
    kind: str
    export: str
    by: str
    why: str


def new_request(kind: str, export: str, by: str, why: str) -> Request:
    """Make a request with an identity of its own.

    Raises
    ------
    RequestRefused
        Name or reason is blank.
    """
    if not by.strip() or not why.strip():
        raise RequestRefused("Expected a name after --by and words that say why. Nothing was recorded. State both.")
    return Request(uuid.uuid4().hex, kind, export, by.strip(), why.strip())


def submit(records: Path, request: Request) -> None:
    """Put a request where the running service finds it, durably."""
    folder = records / REQUESTS_NAME
    folder.mkdir(exist_ok=True)
    Disk().atomic_write(folder / f"{request.id}.json", json.dumps(asdict(request)).encode())


def waiting(records: Path) -> list[tuple[Path, Request | None]]:
    """Return the requests that wait, oldest first; None for a file that is none."""
    folder = records / REQUESTS_NAME
    found = []
    with contextlib.suppress(FileNotFoundError):
        paths = [path for path in folder.glob("*.json") if not path.name.startswith(".")]
        found = sorted(paths, key=lambda path: (path.stat().st_mtime_ns, path.name))
    return [(path, _read(path)) for path in found]


def _read(path: Path) -> Request | None:
    try:
        if path.stat().st_size > LONGEST:
            return None
        request = Request(**json.loads(path.read_text("utf-8")))
    except (OSError, ValueError, TypeError):
        return None
    texts = (request.id, request.kind, request.export, request.by, request.why)
    return request if request.kind in KINDS and all(isinstance(text, str) for text in texts) else None
