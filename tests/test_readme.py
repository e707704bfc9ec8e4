"""The README is true: its two commands have the agreed form, and its first layout gives the result it shows."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from rules.limits import DEFAULTS
from watcher.evaluation import Job, evaluate_job
from watcher.schema import SettingsFile
from watcher.settings import compile_snapshot, read_files

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")


@pytest.fixture
def laboratory(tmp_path):
    """The laboratory of "A first layout in ten minutes", written from the README's own blocks."""
    (tmp_path / "layouts").mkdir()
    for name, block in re.findall(r"<!-- test: (\S+) -->\n```\w+\n(.*?)```", README, re.DOTALL):
        (tmp_path / name).write_text(block, "utf-8")
    return tmp_path


def test_first_block_holds_the_two_commands():
    """The first fenced block is marked bash and holds exactly two commands, one line each."""
    marker, block = re.search(r"```(\w*)\n(.*?)```", README, re.DOTALL).groups()

    assert marker == "bash"
    assert len(block.strip().splitlines()) == 2


def test_first_layout_reads_the_first_export(laboratory):
    """The smallest settings and layout give the result that the README shows."""
    settings = compile_snapshot(read_files(laboratory / "config.yaml"))
    data = (laboratory / "FE-0301.csv").read_bytes()

    job = Job("FE-0301.csv", data, 1, "2026-12-01T08:00:00.000000Z")
    outcomes = evaluate_job(settings, job, final=True).outcomes

    assert outcomes.text(0).startswith("7.01 ± 0.51 mg/L")
    assert "7.01 ± 0.51 mg/L" in README


def test_first_layout_is_short(laboratory):
    """The simple case needs no more than 12 lines of layout."""
    assert len((laboratory / "layouts" / "iron.yaml").read_text("utf-8").splitlines()) <= 12


@pytest.mark.parametrize("check", ["inputs", "linear_evidence", "detection", *DEFAULTS])
def test_every_check_is_documented(check):
    """Each check that can appear in a result stands in the README's table."""
    assert f"| `{check}` |" in README


def _keys(model, prefix=""):
    for name, field in model.model_fields.items():
        key = field.alias or name
        if key != "password":
            yield key
        for part in (field.annotation, *getattr(field.annotation, "__args__", ())):
            if hasattr(part, "model_fields"):
                yield from _keys(part)


@pytest.mark.parametrize("key", sorted(set(_keys(SettingsFile))))
def test_every_setting_stands_in_the_example(key):
    """The example settings hold every key, so that nobody has to read the schema."""
    example = (ROOT / "config.example.yaml").read_text("utf-8")
    named_elsewhere = set(DEFAULTS) | {"uncertainty"}

    assert re.search(rf"\b{key}\b", example) or key in named_elsewhere


def test_example_settings_load(tmp_path):
    """The example settings are valid together with the demonstration's layouts."""
    (tmp_path / "config.yaml").write_bytes((ROOT / "config.example.yaml").read_bytes())
    (tmp_path / "layouts").mkdir()
    for layout in (ROOT / "watcher" / "laboratory" / "layouts").iterdir():
        (tmp_path / "layouts" / layout.name).write_bytes(layout.read_bytes())

    settings = compile_snapshot(read_files(tmp_path / "config.yaml"))

    assert {"recovery", "correlation"} <= set(settings.file.limits.stated())
