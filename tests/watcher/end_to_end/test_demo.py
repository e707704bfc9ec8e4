"""The demonstration, as somebody runs it who has just installed the program."""

from __future__ import annotations

import os
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

from parsers.read import claims
from watcher.demo import EXPORTS
from watcher.settings import compile_snapshot, read_files

ROOT = Path(__file__).parents[3]


def demo(folder: Path) -> subprocess.CompletedProcess[str]:
    """Run the demonstration in a folder."""
    return subprocess.run(
        [sys.executable, "-m", "watcher", "demo", str(folder)],
        cwd=ROOT,
        env=os.environ | {"COLUMNS": "80"},
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
    )


@pytest.fixture(scope="module")
def shown(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, subprocess.CompletedProcess[str]]:
    """The demonstration run twice in one folder: the folder and what the second run showed."""
    folder = tmp_path_factory.mktemp("demo") / "spikewarden-demo"
    first, second = demo(folder), demo(folder)
    assert first.returncode == 0, first.stderr
    return folder, second


def test_demo_shows_the_main_job(shown: tuple[Path, subprocess.CompletedProcess[str]]) -> None:
    """It ends with 0, also a second time, and shows results, the FAIL mail with what to do, and the refused export."""
    _, done = shown

    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    assert "Subject: FAIL RIV-17 Zn: recovery 61 % (limits 75 to 125)" in done.stdout
    assert "\nDO\nKeep the vials: check the spike volume" in done.stdout
    assert "Refused: FL-0414.csv" in done.stdout
    assert "FL-0414.csv, line 15: expected 8 fields as in the header, got 5" in done.stdout
    rows = [line.split() for line in done.stdout.splitlines()]
    assert ["RIV-17", "Zn", "fail", "4.25", "±", "0.19", "mg/L"] in rows
    shown_lines = done.stdout.partition("Try next:")[0].splitlines()
    assert max(len(line) for line in shown_lines if " " in line.strip()) <= 80


def test_demo_leaves_files_to_look_at(shown: tuple[Path, subprocess.CompletedProcess[str]]) -> None:
    """Settings, layouts, exports and results stay in the folder, and the suggested command works on them."""
    folder, done = shown
    suggested = shlex.split(done.stdout.partition("Try next:\n")[2])

    explained = subprocess.run(suggested, cwd=ROOT, capture_output=True, text=True, timeout=60, check=False)

    assert explained.returncode == 1, explained.stderr
    assert "RIV-17 Zn: fail" in explained.stdout
    assert len(list(folder.glob("results/*/*.csv"))) == 4
    assert sorted(path.name for path in (folder / "layouts").iterdir()) == ["brine.yaml", "flame.yaml", "panel.yaml"]


def test_demo_leaves_a_foreign_folder_alone(tmp_path: Path) -> None:
    """A folder that holds something else is refused with its name and stays untouched."""
    (tmp_path / "config.yaml").write_text("laboratory: another\n")
    (tmp_path / "notes.txt").write_text("keep\n")

    done = demo(tmp_path)

    assert done.returncode == 2
    assert "holds something else than an earlier demonstration. Nothing was changed." in " ".join(done.stderr.split())
    assert {path.name: path.read_text() for path in tmp_path.iterdir()} == {
        "config.yaml": "laboratory: another\n",
        "notes.txt": "keep\n",
    }


def test_demo_exports_are_what_the_pages_say() -> None:
    """The exports of the demonstration are those that its account names, each claimed by one layout only."""
    laboratory = ROOT / "watcher" / "laboratory"
    settings = compile_snapshot(read_files(laboratory / "config.yaml"))
    exports = {path.name: path.read_bytes() for path in (laboratory / "exports").iterdir()}

    claiming = {
        name: [layout.layout for layout, _ in settings.layouts if claims(layout, name, data)]
        for name, data in exports.items()
    }

    assert claiming.keys() == EXPORTS.keys()
    assert {len(names) for names in claiming.values()} == {1}
