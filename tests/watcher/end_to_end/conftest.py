"""A laboratory in a folder, worked on by the real program in processes of its own."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import os
import queue
import socket
import subprocess
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from click.testing import CliRunner

from watcher.commands import main

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from click.testing import Result

#: Far above what a command takes here; only a failing test waits so long.
DEADLINE_SECONDS = 60.0
#: Set in the environment: services of these tests find exports by looking alone.
WITHOUT_EVENTS = "SPIKEWARDEN_TESTS_WITHOUT_EVENTS"
ROOT = Path(__file__).parents[3]

CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results}
layouts: [flame.yaml]
stocks:
  - {name: ZN-5, contains: {Zn: 5 mg/L}}
bench:
  aliquot: 10 mL
  made_up_to: 50 mL
  levels: {A1: 5 mL, A2: 10 mL, A3: 15 mL}
report: additions
blank: none
units: {export: mg/L, result: mg/L}
limits: {recovery: 75 to 125 %}
mail: none
watching: {settle: 100 ms, scan: 100 ms}
"""
FLAME = """\
layout: flame bench
claims: {file: 'FL-*.csv'}
separator: ';'
columns:
  label: Label
  analyte: Element
  signal: [R1, R2, R3]
labels:
  - {like: 'BLK *', role: blank}
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: '{sample} +{level}', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
HEADER = "Label;Element;R1;R2;R3"
#: Signal of 1 mg/L in the vessel without matrix.
SENSITIVITY = 0.184
#: Added to the aliquot by A1, A2, A3 in mg/L, as the bench above prepares them, and what 10 mL in 50 mL leaves of it.
ADDITIONS = {"": 0.0, " +A1": 2.5, " +A2": 5.0, " +A3": 7.5}
DILUTION = 0.2
#: Scatter of the preparations, so that every line has some.
SCATTER = (0.0003, -0.0004, -0.0002, 0.0003)


def row(label: str, signal: float) -> str:
    """A row with three readings around a signal."""
    return ";".join([label, "Zn", *(f"{signal + offset:.5f}" for offset in (-0.0004, 0.0001, 0.0003))])


def additions(sample: str, native: float = 3.0, recovery: float = 1.0, only: str = "0123") -> list[str]:
    """Rows of a sample with `native` mg/L, unspiked (0) and with A1 to A3, of which a part of the added is found."""
    return [
        row(sample + level, SENSITIVITY * DILUTION * recovery * (native + added) + SCATTER[number])
        for number, (level, added) in enumerate(ADDITIONS.items())
        if str(number) in only
    ]


def standards() -> list[str]:
    """Rows of a calibration, and a blank, above which readings count as large enough for a relative scatter."""
    nominal = ("0", "0.5", "1", "2", "3")
    measured = [row(f"STD {c}", SENSITIVITY * float(c) + s) for c, s in zip(nominal, (*SCATTER, 0.0001), strict=True)]
    return [*measured, row("BLK 1", 0.0005)]


def export_text(*rows: str) -> str:
    """An export of the flame bench."""
    return "".join(f"{line}\n" for line in (HEADER, *rows))


class Laboratory:
    """A folder with settings, layouts and exports, and what the program makes of them."""

    additions = staticmethod(additions)
    standards = staticmethod(standards)
    text = staticmethod(export_text)
    row = staticmethod(row)

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.config = "config.yaml"
        self.processes: list[subprocess.Popen[str]] = []
        (folder / "exports").mkdir(parents=True)
        self.write("config.yaml", CONFIG)
        self.write("flame.yaml", FLAME)

    def write(self, name: str, text: str) -> Path:
        """Write a file of the laboratory."""
        path = self.folder / name
        path.write_text(text, "utf-8")
        return path

    def change(self, name: str, old: str, new: str) -> None:
        """Replace a piece of settings that stands there once."""
        text = (self.folder / name).read_text("utf-8")
        assert text.count(old) == 1
        self.write(name, text.replace(old, new))

    def export(self, name: str, *rows: str) -> Path:
        """Let an export of the flame bench land."""
        return self.write(f"exports/{name}", export_text(*rows))

    def mail_to(self, port: int) -> None:
        """Send mails to a local server."""
        self.change(
            "config.yaml",
            "mail: none",
            f"mail: {{server: 127.0.0.1, port: {port}, security: none, from: bench@example, to: lead@example}}",
        )

    def start(self, command: str, *arguments: str, **environment: str) -> subprocess.Popen[str]:
        """Start a command in a process of its own."""
        config = (self.folder / "config.yaml").read_text("utf-8")
        if os.environ.get(WITHOUT_EVENTS) and "scan: 100 ms" in config and "events:" not in config:
            self.write("config.yaml", config.replace("scan: 100 ms", "scan: 100 ms, events: no"))
        process = subprocess.Popen(
            [sys.executable, "-m", "watcher", command, *arguments, "--config", str(self.folder / self.config)],
            cwd=ROOT,
            env=os.environ | {"COLUMNS": "80", "PYTHONWARNINGS": "error"} | environment,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self.processes.append(process)
        return process

    def run(self, command: str, *arguments: str) -> subprocess.CompletedProcess[str]:
        """Run a command to its end."""
        process = self.start(command, *arguments)
        out, err = process.communicate(timeout=DEADLINE_SECONDS)
        return subprocess.CompletedProcess(process.args, process.returncode, out, err)

    def records(self) -> dict[str, Any]:
        """The JSON records by result file name, without the month's folder."""
        return {path.name: json.loads(path.read_bytes()) for path in self.folder.glob("results/*/*.json")}

    def record(self, export: str) -> Any:
        """The record of an export's first revision."""
        return self.records()[f"{export}.r1.json"]

    def series(self, export: str) -> dict[str, Any]:
        """The series of an export by sample and analyte, which must be one of a kind."""
        found = self.record(export)["series"]
        named = {f"{one['sample']} {one['analyte']}": one for one in found}
        assert len(named) == len(found)
        return named

    def csv_rows(self, export: str) -> list[dict[str, str]]:
        """The rows of an export's CSV."""
        (path,) = self.folder.glob(f"results/*/{export}.r1.csv")
        return list(csv.DictReader(io.StringIO(path.read_bytes().decode("utf-8-sig"), newline="")))

    def status(self) -> dict[str, Any]:
        """Return the last heartbeat."""
        try:
            return json.loads((self.folder / "records" / "status.json").read_text("utf-8"))
        except FileNotFoundError:
            return {}

    def contents(self) -> dict[str, bytes]:
        """Every file of the folder."""
        return {str(path): path.read_bytes() for path in self.folder.rglob("*") if path.is_file()}

    def close(self) -> None:
        """End what still runs."""
        for process in self.processes:
            if process.poll() is None:
                process.kill()
            process.communicate(timeout=DEADLINE_SECONDS)


@pytest.fixture(scope="module")
def make_laboratory(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Callable[[], Laboratory]]:
    """Make laboratories that a whole file of tests may share; their processes end with it."""
    made: list[Laboratory] = []

    def make() -> Laboratory:
        made.append(Laboratory(tmp_path_factory.mktemp("laboratory") / "skerry point"))
        return made[-1]

    yield make
    for laboratory in made:
        laboratory.close()


@pytest.fixture
def laboratory(make_laboratory: Callable[[], Laboratory]) -> Laboratory:
    """A laboratory of a test's own."""
    return make_laboratory()


@pytest.fixture
def squeezed() -> Callable[[str], str]:
    """Return a text without its line breaks, to look for sentences that were wrapped."""
    return lambda text: " ".join(text.split())


@pytest.fixture
def run_here(monkeypatch: pytest.MonkeyPatch) -> Callable[[str, str | None, Laboratory], Result]:
    """Run a command of the real command line in this process, which is quicker."""
    monkeypatch.setenv("COLUMNS", "80")

    def run(command: str, argument: str | None, laboratory: Laboratory) -> Result:
        arguments = [] if argument is None else [argument]
        config = str(laboratory.folder / "config.yaml")
        return CliRunner().invoke(main, [command, *arguments, "--config", config], catch_exceptions=False)

    return run


@pytest.fixture
def unused_port() -> int:
    """A port that nobody listens on."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@pytest.fixture
def pause() -> Callable[[float], None]:
    """Wait between two looks at something that takes minutes."""
    nothing = queue.SimpleQueue[None]()

    def wait(seconds: float) -> None:
        with contextlib.suppress(queue.Empty):
            nothing.get(timeout=seconds)

    return wait
