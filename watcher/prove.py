"""The command `prove`: published examples recomputed on this machine, with a dated record for the laboratory's files.

Shows that the program computes here as published. It says nothing of a laboratory's samples, settings or instruments.
"""

from __future__ import annotations

import io
import json
from typing import TYPE_CHECKING, Any

from rich.console import Console

from watcher.clock import Clock, SystemClock
from watcher.disk import Disk
from watcher.exit_codes import NOT_DONE
from watcher.settings import SettingsInvalid, compile_snapshot, read_files
from watcher.terminal import COLUMNS, console, lines
from watcher.verification.account import show
from watcher.verification.examples import recompute
from watcher.verification.inputs import Inputs, PublishedUnusable
from watcher.verification.verification_record import record_of

if TYPE_CHECKING:
    from pathlib import Path

#: All values agree and no misprint came out; one does not.
PROVED, DISAGREES = 0, 1


def run(
    config: Path | None, here: Path, *, as_json: bool, inputs: Inputs | None = None, clock: Clock | None = None
) -> int:
    """Recompute, show and record; return the exit code.

    Parameters
    ----------
    config
        The laboratory's settings, whose records folder takes the record; None writes it into `here`.
    here
        The current folder.
    as_json
        Print the record instead of the table.
    inputs, clock
        Other examples and another time, for tests.
    """
    try:
        folder = here if config is None else _records(config)
        examples = inputs or Inputs()
        record = record_of(*recompute(examples), examples.sha256(), (clock or SystemClock()).now())
    except (SettingsInvalid, PublishedUnusable) as error:
        lines(console(error=True), [str(error)])
        return NOT_DONE
    if as_json:
        print(_json(record), end="")  # noqa: T201 - for machines: nothing may wrap it
    else:
        show(console(), record)
    return _keep(folder, record) or (PROVED if record["agrees"] else DISAGREES)


def _records(config: Path) -> Path:
    settings = compile_snapshot(read_files(config))
    return settings.path(settings.file.folders.records) / "prove"


def _keep(folder: Path, record: dict[str, Any]) -> int:
    """Write the record as JSON and as text, both durable; return 0, or the exit code of a failure."""
    err = console(error=True)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        name = _free_name(folder, record["verified_at"])
        Disk().write_all(folder, {f"{name}.json": [_json(record).encode()], f"{name}.txt": [_text(record).encode()]})
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        sentence = (
            f"{folder}: expected a folder to write the record into, got: {reason}. The numbers above are not on "
            f"record. Make the folder writable, or run prove in another one."
        )
        lines(err, [sentence])
        return NOT_DONE
    # a path must stay whole to be copied, however long it is
    err.print(f"Record: {folder / name}.json and .txt", soft_wrap=True)
    return 0


def _free_name(folder: Path, verified_at: str) -> str:
    """Return a name by the time that no earlier record has: a record is never written over."""
    base = f"prove-{verified_at.replace(':', '').replace('-', '')}"
    number, name = 1, base
    while any((folder / f"{name}.{kind}").exists() for kind in ("json", "txt")):
        number += 1
        name = f"{base}-{number}"
    return name


def _json(record: dict[str, Any]) -> str:
    return json.dumps(record, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _text(record: dict[str, Any]) -> str:
    page = io.StringIO()
    show(Console(file=page, width=COLUMNS, color_system=None, highlight=False, emoji=False, markup=False), record)
    return page.getvalue()
