"""Opening a laboratory: settings are read by the worker, adopted in the ledger, and handed on as plain values.

The same for `watch` and `once`. Stays light: what reads YAML and numbers lives in the worker process.
"""

from __future__ import annotations

import getpass
import logging
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from watcher import VERSION
from watcher.errors import WatcherError
from watcher.instance import Instance
from watcher.ledger import Ledger
from watcher.log import set_up_log
from watcher.service import Service
from watcher.service_settings import ServiceSettings
from watcher.worker import Worker

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path


@dataclass(eq=False)
class SettingsRefused(WatcherError):
    """The configuration or a layout has faults; all of them, as sentences."""

    faults: tuple[str, ...]

    def __str__(self) -> str:
        """Say all faults, one a line."""
        return "\n".join(self.faults)


@dataclass(frozen=True, slots=True)
class Laboratory:
    """An open laboratory."""

    settings: ServiceSettings
    ledger: Ledger
    service: Service


@contextmanager
def open_laboratory(config: Path, reason: str) -> Iterator[Laboratory]:
    """Read and adopt the settings, take hold of the records, open the ledger and make the service.

    Raises
    ------
    SettingsRefused
        The settings have faults.
    WatcherError
        The records are held by another process, or the ledger cannot be used.
    """
    worker = Worker()
    try:
        answer = _read_settings(worker, config)
        settings = ServiceSettings.from_plain(answer["service"])
        with Instance(settings.records), Ledger(settings.records) as ledger:
            handler = set_up_log(settings.records)
            try:
                ledger.adopt_settings(answer["body"], account(), reason)
                yield Laboratory(settings, ledger, Service(settings, ledger, worker, version=VERSION))
            finally:
                logging.getLogger().removeHandler(handler)
                handler.close()
    finally:
        worker.close()


def _read_settings(worker: Worker, config: Path) -> dict[str, Any]:
    answer = worker.ask({"do": "read settings", "config": str(config.absolute())})
    if answer.get("fate") == "bug":
        raise SettingsRefused(
            (f"{config}: {answer['error']}. This is a defect of the program.\n{answer['traceback']}",)
        )
    if answer["faults"]:
        raise SettingsRefused(tuple(answer["faults"]))
    return answer


def account() -> str:
    """Return the account that runs the program, for the record of adoption."""
    try:
        return getpass.getuser()
    except (KeyError, OSError):  # an account without name, as in some containers
        return "unknown"
