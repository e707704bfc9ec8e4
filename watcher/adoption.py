"""Settings files that change while the service runs: noticed, read by the worker, adopted or refused.

The service works on adopted settings only. What is valid is adopted by itself, or, where the laboratory wants a
signature, waits for one; what is faulty leaves the old settings in force and is told. Nothing here evaluates.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import structlog

from watcher.folder import Trouble
from watcher.service_settings import ServiceSettings

if TYPE_CHECKING:
    from watcher.clock import Clock
    from watcher.ledger import Ledger
    from watcher.worker import Worker

#: Seconds for which files must stay unchanged before they are read: somebody may be saving several.
SETTLE_SECONDS = 1.0

_log = structlog.get_logger("spikewarden.adoption")


@dataclass(frozen=True, slots=True)
class Adopted:
    """Settings that were adopted just now, and what is wrong with the files."""

    settings: ServiceSettings | None = None
    troubles: tuple[Trouble, ...] = ()


class Adoption:
    """Looks after the files of the settings.

    Parameters
    ----------
    config
        The configuration.
    files
        All files that the settings in force were read from.
    worker, ledger, clock
        To read and to record.
    account
        Who runs the service.
    """

    def __init__(
        self, config: Path, files: tuple[Path, ...], *, worker: Worker, ledger: Ledger, clock: Clock, account: str
    ) -> None:
        self._config = config
        self._files = files
        self._worker = worker
        self._ledger = ledger
        self._clock = clock
        self._account = account
        #: None: read them at the first look; they may have changed since they were adopted.
        self._read: tuple[object, ...] | None = None
        self._seen = self._signature()
        self._since = clock.monotonic()

    def changed(self) -> bool:
        """Tell whether a file is another one than was read last, and has settled."""
        now, signature = self._clock.monotonic(), self._signature()
        if signature != self._seen:
            self._seen, self._since = signature, now
        return signature != self._read and now - self._since >= SETTLE_SECONDS

    def adopt(self, settings: ServiceSettings, signed_by: str | None = None, why: str = "") -> Adopted:
        """Read the files and adopt what they say, if it is valid, new, and may be adopted.

        Parameters
        ----------
        settings
            Those in force.
        signed_by, why
            A person's name and reason, where one asked for it.

        Raises
        ------
        WorkerFailed, WorkerUnfit, WorkerStopped
            They could not be read; nothing was adopted.
        """
        signature = self._signature()
        current = self._ledger.current_settings()
        answer = self._worker.ask(
            {
                "do": "look at settings",
                "config": str(self._config),
                "adopted": json.loads(current.body) if current else None,
            }
        )
        self._read = signature
        files = tuple(Path(each) for each in answer.get("files") or self._files)
        if files != self._files:
            self._files, self._read = files, None  # what is new among them is looked at once more
        if answer.get("fate") == "bug" or answer["faults"]:
            faults = [str(answer["error"])] if "error" in answer else answer["faults"]
            return Adopted(troubles=(_faulty(faults),))
        if current is not None and current.sha256 == hashlib.sha256(answer["body"].encode()).hexdigest():
            return Adopted()
        wanted = ServiceSettings.from_plain(answer["service"])
        if wanted.records != settings.records:
            return Adopted(troubles=(_moved(settings, wanted),))
        # What is in force decides, so that nobody can take the signature away with the change that needs it.
        if settings.adoption == "signed" and signed_by is None:
            return Adopted(troubles=(_unsigned(answer["difference"]),))
        number = self._ledger.adopt_settings(
            answer["body"],
            signed_by or self._account,
            why or "changed files, adopted by themselves",
            "\n".join(answer["difference"]),
        )
        _log.info("settings adopted", number=number, by=signed_by or self._account, difference=answer["difference"])
        return Adopted(wanted)

    def _signature(self) -> tuple[object, ...]:
        found: list[object] = []
        for path in self._files:
            try:
                state = path.stat()
            except OSError as error:
                found.append(type(error).__name__)
            else:
                found.append((state.st_mtime_ns, state.st_size, state.st_ino))
        return tuple(found)


def _faulty(faults: list[str]) -> Trouble:
    digest = hashlib.sha256("\n".join(faults).encode()).hexdigest()[:16]
    return Trouble(
        f"odd:settings:{digest}",
        f"The settings were changed and have faults, so the old ones stay in force. {' '.join(faults)} "
        "Correct what is named; it is read again by itself.",
    )


def _moved(old: ServiceSettings, new: ServiceSettings) -> Trouble:
    return Trouble(
        f"settings:records:{new.records}",
        f"folders.records was changed from {old.records} to {new.records}. The old settings stay in force, since a "
        "running service cannot move its records. Stop the service, move the folder, and start it again.",
    )


def _unsigned(difference: list[str]) -> Trouble:
    digest = hashlib.sha256("\n".join(difference).encode()).hexdigest()[:16]
    return Trouble(
        f"odd:unsigned:{digest}",
        f"The settings were changed and wait for a signature; the old ones stay in force. {'; '.join(difference)}. "
        'Adopt them with: spikewarden adopt --by NAME --why "REASON", or change the files back.',
    )
