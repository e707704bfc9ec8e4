"""Opening a laboratory: settings are read by the worker, adopted in the ledger, and handed on as plain values.

The same for `watch` and `once`. Stays light: what reads YAML and numbers lives in the worker process.
"""

from __future__ import annotations

import contextlib
import getpass
import json
import logging
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from watcher import VERSION
from watcher.adoption import Adoption
from watcher.clock import SystemClock
from watcher.copies import COPIES_NAME
from watcher.errors import WatcherError
from watcher.instance import Instance
from watcher.ledger import LEDGER_NAME, Ledger, missing
from watcher.log import set_up_log
from watcher.places import findings, refuse_network
from watcher.service import Service
from watcher.service_settings import ServiceSettings
from watcher.worker import Worker

if TYPE_CHECKING:
    from collections.abc import Iterator


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
        try:
            answer = _read_settings(worker, config)
        except SettingsRefused:
            # An unattended computer that was switched off and on again goes on with what was adopted.
            last = _last_adopted(worker, config) if reason == "watch" else None
            if last is None:
                raise
            answer = last
        settings = ServiceSettings.from_plain(answer["service"])
        refuse_network(settings.records)
        _refuse_missing(settings)
        with Instance(settings.records), Ledger(settings.records) as ledger:
            handler = set_up_log(settings.records)
            try:
                settings = _in_force(worker, ledger, config, answer, settings, reason)
                if (current := ledger.current_settings()) is not None:
                    worker.ask({"do": "adopt", "snapshot": json.loads(current.body)})
                files = tuple(Path(each) for each in answer["files"])
                adoption = Adoption(
                    config.absolute(), files, worker=worker, ledger=ledger, clock=SystemClock(), account=account()
                )
                service = Service(settings, ledger, worker, version=VERSION, adoption=adoption)
                service.note(findings(settings, ledger))
                yield Laboratory(settings, ledger, service)
            finally:
                logging.getLogger().removeHandler(handler)
                handler.close()
    finally:
        worker.close()


def _refuse_missing(settings: ServiceSettings) -> None:
    """Refuse to begin a ledger where results show that there was one: its disk may only not be mounted yet.

    Raises
    ------
    LedgerUnusable
        It would be begun anew, and everything be mailed again.
    """
    path = settings.records / LEDGER_NAME
    if path.exists() or (settings.records / COPIES_NAME).is_dir():  # of copies without it the ledger tells
        return
    results = None
    with contextlib.suppress(OSError):  # a share that is away shows nothing; deliveries say so
        results = next(settings.results.glob("[0-9]*-[0-9]*/*.r[0-9]*.json"), None)
    if results is not None:
        raise missing(path, f"{settings.results} holds results of earlier exports")


def _read_settings(worker: Worker, config: Path) -> dict[str, Any]:
    answer = worker.ask({"do": "look at settings", "config": str(config.absolute()), "adopted": None})
    if answer.get("fate") == "bug":
        raise SettingsRefused(
            (f"{config}: {answer['error']}. This is a defect of the program.\n{answer['traceback']}",)
        )
    if answer["faults"]:
        raise SettingsRefused(tuple(answer["faults"]))
    return answer


def _last_adopted(worker: Worker, config: Path) -> dict[str, Any] | None:
    """Return what was adopted last, where the files are faulty; only records beside the configuration are found."""
    records = config.absolute().parent / "records"
    if not (records / LEDGER_NAME).exists():
        return None
    with Instance(records), Ledger(records) as ledger:
        current = ledger.current_settings()
    if current is None:
        return None
    snapshot, folder = json.loads(current.body), str(config.absolute().parent)
    plain = worker.ask({"do": "plain settings", "snapshot": snapshot, "folder": folder})
    return {"body": current.body, "service": plain, "files": [str(config.absolute())]}


def _in_force(
    worker: Worker, ledger: Ledger, config: Path, answer: dict[str, Any], settings: ServiceSettings, reason: str
) -> ServiceSettings:
    """Adopt what the files say, unless the settings in force want a signature for it; return what is in force."""
    current = ledger.current_settings()
    if current is None or current.body == answer["body"]:
        ledger.adopt_settings(answer["body"], account(), reason)
        return settings
    before = json.loads(current.body)
    old = worker.ask({"do": "plain settings", "snapshot": before, "folder": str(config.absolute().parent)})
    if "laboratory" in old and old["adoption"] == "signed":
        return ServiceSettings.from_plain(old)
    again = worker.ask({"do": "look at settings", "config": str(config.absolute()), "adopted": before})
    difference = again.get("difference") or ["not known: the files were changed at this moment"]
    ledger.adopt_settings(answer["body"], account(), reason, "\n".join(difference))
    return settings


def account() -> str:
    """Return the account that runs the program, for the record of adoption."""
    try:
        return getpass.getuser()
    except (KeyError, OSError):  # an account without name, as in some containers
        return "unknown"
