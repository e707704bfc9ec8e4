"""The real service with the stub worker, for tests that kill it: ``service_process.py run|once SETTINGS BODY``."""

from __future__ import annotations

import dataclasses
import json
import sys
from pathlib import Path

from watcher.errors import WatcherError
from watcher.instance import Instance
from watcher.ledger import Ledger
from watcher.log import set_up_log
from watcher.service import Service
from watcher.service_settings import ServiceSettings
from watcher.worker import Worker


def _main(mode: str, settings_text: str, body: str) -> None:
    settings = ServiceSettings.from_plain(json.loads(settings_text))
    with Instance(settings.records):
        set_up_log(settings.records)
        with Ledger(settings.records) as ledger:
            ledger.adopt_settings(body, "lead", "test")
            worker = Worker(
                [sys.executable, str(Path(__file__).with_name("stub_worker.py"))],
                deadline_seconds=settings.deadline_seconds,
                memory_bytes=settings.memory_bytes,
                idle_seconds=settings.idle_seconds,
            )
            service = Service(settings, ledger, worker, version="test")
            if mode == "once":
                print(json.dumps(dataclasses.asdict(service.once())))
            else:
                service.run()


if __name__ == "__main__":
    try:
        _main(*sys.argv[1:])
    except WatcherError as error:
        sys.exit(str(error))
