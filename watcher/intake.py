"""Taking exports in: looked for, settled, hashed, new to the ledger, copied durably, accepted. In this order.

After `Ledger.accept` the export cannot get lost any more; before it, the next look finds it again. Nothing is
evaluated here, and the exports folder is only read.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import structlog

from watcher.copies import CopyPostponed, CopyRefused
from watcher.folder import Folder, Trouble

if TYPE_CHECKING:
    from collections.abc import Callable

    from watcher.clock import Clock
    from watcher.copies import Copies
    from watcher.folder import Candidate
    from watcher.ledger import Ledger
    from watcher.ledger_rows import ExportRow
    from watcher.service_settings import ServiceSettings

#: Minutes after which an export that cannot be read becomes a trouble.
PATIENCE_SECONDS = 300.0

_log = structlog.get_logger("spikewarden.intake")


@dataclass(frozen=True, slots=True)
class Taken:
    """What one look brought.

    Attributes
    ----------
    exports
        Accepted now.
    unsettled
        Names of files that may still change or could not be read yet.
    troubles
        What is wrong with folders and files now.
    settles_at
        The monotonic second from which another look may find more settled; None: nothing is unsettled.
    """

    exports: tuple[ExportRow, ...]
    unsettled: tuple[str, ...]
    troubles: tuple[Trouble, ...]
    settles_at: float | None


class Intake:
    """Takes exports in from all folders.

    Parameters
    ----------
    settings
        Folders, times, limits.
    ledger, copies, clock
        Where they go.
    """

    def __init__(self, settings: ServiceSettings, ledger: Ledger, copies: Copies, clock: Clock) -> None:
        self._ledger = ledger
        self._copies = copies
        self._clock = clock
        self._settle_seconds = settings.settle_seconds
        self._folders = [
            Folder(
                root,
                # The first folder's exports keep bare names, so that a second folder renames nothing.
                prefix="" if place == 0 else f"{root.name}/",
                settle_seconds=settings.settle_seconds,
                subfolders=settings.subfolders,
            )
            for place, root in enumerate(settings.exports)
        ]
        #: Since when an export could not be read.
        self._held_since: dict[str, float] = {}

    def take_in(self, stopping: Callable[[], bool] = lambda: False) -> Taken:
        """Look through every folder once and accept what is settled and new.

        Parameters
        ----------
        stopping
            Asked between two files; what is left is found at the next look.
        """
        exports: list[ExportRow] = []
        unsettled: list[str] = []
        troubles: list[Trouble] = []
        settles_at: list[float] = []
        for folder in self._folders:
            look = folder.look(self._clock.monotonic())
            unsettled += look.unsettled
            troubles += look.troubles
            settles_at += [] if look.settles_at is None else [look.settles_at]
            for candidate in look.settled:
                if stopping():
                    return Taken(tuple(exports), tuple(unsettled), tuple(troubles), None)
                try:
                    accepted = self._accept(candidate)
                except CopyRefused as error:
                    folder.taken(candidate)
                    troubles.append(Trouble(f"odd:{candidate.name}:{error.fault}", str(error)))
                except CopyPostponed as error:
                    unsettled.append(candidate.name)
                    settles_at.append(self._clock.monotonic() + self._settle_seconds)
                    troubles += self._patience(candidate, error)
                else:
                    folder.taken(candidate)
                    self._held_since.pop(candidate.name, None)
                    exports += [] if accepted is None else [accepted]
        return Taken(tuple(exports), tuple(unsettled), tuple(troubles), min(settles_at, default=None))

    def _accept(self, candidate: Candidate) -> ExportRow | None:
        sha256 = self._copies.hash_of(candidate)
        if self._ledger.knows(candidate.name, sha256):
            return None
        copy = self._copies.take(candidate, sha256)
        accepted = self._ledger.accept(candidate.name, copy.sha256, copy.size)
        if accepted is not None:
            _log.info("export accepted", export=accepted.name, sha256=accepted.sha256, bytes=accepted.size)
        return accepted

    def _patience(self, candidate: Candidate, error: CopyPostponed) -> list[Trouble]:
        """Being written is ordinary; being held for minutes is a trouble, and so is a full disk at once."""
        if error.expected:
            return []
        since = self._held_since.setdefault(candidate.name, self._clock.monotonic())
        _log.info("export not readable yet", export=candidate.name, fault=error.fault)
        if not error.lasting and self._clock.monotonic() - since < PATIENCE_SECONDS:
            return []
        return [Trouble(f"held:{candidate.name}", str(error))]
