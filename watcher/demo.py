"""The demonstration: an invented laboratory, the real service working on it, and a mail server of its own.

Everything stays in one folder and on this computer. What is shown is read back from the files that the service wrote
and from the mails that it sent.
"""

from __future__ import annotations

import email
import email.policy
import json
import shlex
import shutil
import socket
import subprocess
import sys
import time
from importlib import resources
from typing import TYPE_CHECKING, Any

from aiosmtpd.controller import Controller
from rich.text import Text

from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.health import read_status
from watcher.letter_html import unfolded
from watcher.terminal import console, heading, lines, short, table, word

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from email.message import EmailMessage
    from pathlib import Path

    from aiosmtpd.smtp import SMTP, Envelope, Session
    from rich.console import Console

#: The first words of the demonstration's settings, by which an earlier one is recognised and may be replaced.
MARK = "# The Skerry Point laboratory is invented"
#: Exports in the order in which they land, and what each is there for.
EXPORTS = {
    "FL-0412.csv": "one element, calibration and additions made up to volume",
    "BR-0221.txt": "standard on top of the aliquot",
    "MX-0077.csv": "four elements side by side",
    "FL-0413.csv": "one sample with a poor recovery",
    "FL-0414.csv": "a broken row",
}
#: The two mails that come of them: one sample fails, one export cannot be read.
MAILS = 2
PATIENCE_SECONDS = 90.0
LOOK_SECONDS = 0.1


class _Catcher:
    """Keeps every mail that arrives."""

    def __init__(self) -> None:
        self.mails: list[EmailMessage] = []

    async def handle_DATA(self, _server: SMTP, _session: Session, envelope: Envelope) -> str:  # noqa: N802
        """Take a mail; the name is the library's."""
        content = envelope.content
        data = content if isinstance(content, bytes) else str(content).encode()
        message = email.message_from_bytes(data, policy=email.policy.default)
        self.mails.append(message)
        return "250 kept"


def run(folder: Path) -> int:
    """Run the demonstration in a folder; return the exit code."""
    out = console()
    if not _prepare(folder):
        lines(
            console(error=True),
            [f"{folder} holds something else than an earlier demonstration. Nothing was changed. Name another folder."],
        )
        return NOT_DONE
    catcher = _Catcher()
    port = _free_port()
    controller = Controller(catcher, hostname="127.0.0.1", port=port)
    controller.start()
    try:
        config = _write_settings(folder, port)
        lines(out, [f"An invented laboratory in {folder}: settings, layouts and {len(EXPORTS)} exports.", ""])
        _work(out, folder, config, catcher)
    except TimeoutError as error:
        lines(console(error=True), [str(error)])
        return NOT_DONE
    finally:
        controller.stop()
    _show(out, folder, catcher.mails)
    return ALL_PASS


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


def _prepare(folder: Path) -> bool:
    """Make the folder; an earlier demonstration in it is replaced, anything else is left alone."""
    if folder.exists() and any(folder.iterdir()):
        config = folder / "config.yaml"
        if not config.is_file() or not config.read_text("utf-8").startswith(MARK):
            return False
        shutil.rmtree(folder)
    (folder / "exports").mkdir(parents=True)
    (folder / "layouts").mkdir()
    return True


def _write_settings(folder: Path, port: int) -> Path:
    laboratory = resources.files("watcher") / "laboratory"
    for layout in (laboratory / "layouts").iterdir():
        (folder / "layouts" / layout.name).write_bytes(layout.read_bytes())
    text = (laboratory / "config.yaml").read_text("utf-8")
    config = folder / "config.yaml"
    config.write_text(text.replace("port: 2525", f"port: {port}"), "utf-8")
    return config


def _work(out: Console, folder: Path, config: Path, catcher: _Catcher) -> None:
    """Start the service, let the exports land, wait for what comes of them, stop it."""
    log = (folder / "watch.txt").open("w", encoding="utf-8")
    service = subprocess.Popen(  # noqa: S603 - our own program
        [sys.executable, "-m", "watcher", "watch", "--config", str(config)], stdout=log, stderr=log
    )
    try:
        _wait(lambda: read_status(folder / "records").held, "the service did not start", folder, service)
        for name, what in EXPORTS.items():
            source = resources.files("watcher") / "laboratory" / "exports" / name
            (folder / "exports" / name).write_bytes(source.read_bytes())
            lines(out, [f"exports/{name} lands: {what}"])
        lines(out, ["", "The service waits until each file is complete, evaluates it and mails what fails …"])
        _wait(lambda: len(_records(folder)) == len(EXPORTS) - 1, "results are missing", folder, service)
        _wait(lambda: len(catcher.mails) >= MAILS, "a mail is missing", folder, service)
        _wait(
            lambda: len(list(folder.glob("results/*/*.html"))) == len(EXPORTS) - 1, "a page is missing", folder, service
        )
    finally:
        service.terminate()
        service.wait(timeout=PATIENCE_SECONDS)
        log.close()


def _wait(holds: Callable[[], bool], complaint: str, folder: Path, service: subprocess.Popen[bytes]) -> None:
    until = time.monotonic() + PATIENCE_SECONDS
    while not holds():
        if time.monotonic() > until or service.poll() is not None:
            said = (folder / "watch.txt").read_text("utf-8").strip()
            raise TimeoutError(f"The demonstration stopped: {complaint}. The service said: {said or 'nothing'}")
        time.sleep(LOOK_SECONDS)


def _records(folder: Path) -> list[dict[str, Any]]:
    files = sorted(folder.glob("results/*/*.json"))
    return [json.loads(file.read_text("utf-8")) for file in files]


def _show(out: Console, folder: Path, mails: list[EmailMessage]) -> None:
    heading(out, "Results")
    records = {record["export"]["name"]: record for record in _records(folder)}
    table(
        out,
        ("export", "sample", "verdict", "result"),
        _rows([records[name] for name in EXPORTS if name in records]),
    )
    beat = read_status(folder / "records").heartbeat or {}
    for refused in beat.get("refused", []):
        heading(out, f"Refused: {refused['name']}")
        lines(out, [refused["problem"]])
    for number, message in enumerate(mails, start=1):
        heading(out, f"Mail {number} of {len(mails)}, to {message['To']}")
        part = message.get_body(("plain",))
        body = "" if part is None else unfolded(part.get_content().replace("\r\n", "\n")).rstrip()
        lines(out, [f"Subject: {message['Subject']}", "", body])
    heading(out, "Files")
    config = folder / "config.yaml"
    lines(out, [str(file) for file in sorted(folder.glob("results/*/*"))])
    lines(
        out,
        [
            "",
            f"Open in a browser: {folder / 'results' / 'index.html'}",
            f"Settings and layouts to learn from: {config}, {folder / 'layouts'}",
            "Try next:",
        ],
    )
    # unwrapped, so that it can be copied as it stands
    command = _command("explain", str(folder / "exports" / "FL-0413.csv"), "--config", str(config))
    out.print(Text(command), soft_wrap=True)


def _command(*arguments: str) -> str:
    """Return a command line that works in the shell from which the demonstration was started."""
    program = [sys.executable, "-m", "watcher"] if sys.argv[0].endswith("__main__.py") else [sys.argv[0]]
    return shlex.join([*program, *arguments])


def _rows(records: list[dict[str, Any]]) -> Iterator[tuple[str | Text, ...]]:
    for record in records:
        name = record["export"]["name"]
        for series in record["series"]:
            sample = " ".join(part for part in (series["sample"], series["analyte"], series["channel"]) if part)
            yield name, sample, word(series["verdict"]), short(series["result"]["text"])
            name = ""
