"""File events as a mere bell: they make the next look come sooner and carry nothing else.

Systems lose events, and an observer of a folder that was replaced stays silent while it looks alive. So nothing
rests on them: the service looks through the folders in any case, and listens anew when a folder is another one.
"""

from __future__ import annotations

import contextlib
import os
from typing import TYPE_CHECKING

import structlog
from watchdog.events import (
    FileClosedEvent,
    FileCreatedEvent,
    FileModifiedEvent,
    FileMovedEvent,
    FileSystemEventHandler,
)
from watchdog.observers import Observer

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

    from watchdog.events import FileSystemEvent
    from watchdog.observers.api import BaseObserver

    from watcher.wake import Wake

#: ``1`` switches events off; the service then finds everything by looking.
VARIABLE = "SPIKEWARDEN_NO_EVENTS"

#: Opening and listing are left out: the service's own look would wake it again and again.
_HEARD = [FileCreatedEvent, FileModifiedEvent, FileMovedEvent, FileClosedEvent]

_log = structlog.get_logger("spikewarden.events")


class _Ring(FileSystemEventHandler):
    def __init__(self, wake: Wake) -> None:
        self._wake = wake

    def on_any_event(self, event: FileSystemEvent) -> None:  # noqa: ARG002 - what happened does not matter
        # An exception here would end the observer's thread; this cannot raise.
        self._wake.ring()


class Events:
    """Listens to the exports folders.

    Parameters
    ----------
    roots
        The folders.
    wake
        The bell to ring.
    subfolders
        Whether to listen to subfolders.
    enabled
        Off: `renew` does nothing.
    """

    def __init__(self, roots: Iterable[Path], wake: Wake, *, subfolders: bool, enabled: bool) -> None:
        self._roots = tuple(roots)
        self._ring = _Ring(wake)
        self._subfolders = subfolders
        self._enabled = enabled and os.environ.get(VARIABLE) != "1"
        self._observer: BaseObserver | None = None
        self._identities: tuple[tuple[int, int] | None, ...] | None = None

    def renew(self) -> None:
        """Listen, anew where a folder is not the one it was; call it before each look."""
        if not self._enabled:
            return
        identities = tuple(_identity(root) for root in self._roots)
        if identities == self._identities:
            return
        self.close()
        self._identities = identities
        try:
            self._listen(identities)
        except OSError as error:
            # No descriptors left, or a kind of file system without events.
            _log.warning("file events are off, the folders are looked through instead", error=str(error))
            self.close()
            self._identities = identities

    def close(self) -> None:
        """Stop listening."""
        observer, self._observer, self._identities = self._observer, None, None
        if observer is None:
            return
        observer.stop()
        with contextlib.suppress(RuntimeError):  # it was never started
            observer.join(2.0)

    def _listen(self, identities: tuple[tuple[int, int] | None, ...]) -> None:
        self._observer = Observer()
        for root, identity in zip(self._roots, identities, strict=True):
            if identity is not None:
                self._observer.schedule(self._ring, str(root), recursive=self._subfolders, event_filter=list(_HEARD))
        self._observer.start()


def _identity(root: Path) -> tuple[int, int] | None:
    try:
        found = root.stat()
    except OSError:
        return None
    return found.st_dev, found.st_ino
