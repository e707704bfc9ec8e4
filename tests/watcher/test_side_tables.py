"""Side tables and examples lie beside their layout: they are adopted with it, hashed with it, and checked."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pytest
from click.testing import CliRunner

from watcher.commands import main
from watcher.evaluation import Job, evaluate_job
from watcher.settings import SettingsInvalid, Snapshot, compile_snapshot, read_files

if TYPE_CHECKING:
    from pathlib import Path

    from click.testing import Result

CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results}
layouts: [layouts/iron.yaml]
stocks: [{name: FE-11, contains: {Fe: 11.1 mg/L}}]
bench: {aliquot: 10 mL, made_up_to: 50 mL}
report: additions
units: {export: mg/L, result: mg/L}
mail: none
"""
LAYOUT = """\
layout: iron bench
claims: {file: 'FE-*.csv'}
separator: ','
columns: {label: Label, position: No, analyte: {constant: Fe}, signal: Absorbance}
lookup:
  - {file: bench.csv, by: position, columns: {sample: Sample, spike_volume: {from: Std, unit: mL}}}
examples:
  - {export: FE-1.csv, expected: FE-1.expected.csv}
"""
TABLE = "No,Sample,Std\n1,RIV-17,0\n2,RIV-17,5\n3,RIV-17,10\n"
EXPORT = "No,Label,Absorbance\n1,a,0.24\n2,b,0.437\n3,c,0.621\n"
EXPECTED = "sample,role,signal\nRIV-17,unspiked,0.24\nRIV-17,spiked,0.437\nRIV-17,spiked,0.621\n"


@pytest.fixture
def config(tmp_path: Path) -> Path:
    """A laboratory whose layout has a side table and an example."""
    for folder in ("layouts", "exports"):
        (tmp_path / folder).mkdir()
    written = {
        "config.yaml": CONFIG,
        "layouts/iron.yaml": LAYOUT,
        "layouts/bench.csv": TABLE,
        "layouts/FE-1.csv": EXPORT,
        "layouts/FE-1.expected.csv": EXPECTED,
    }
    for name, text in written.items():
        (tmp_path / name).write_text(text, "utf-8")
    return tmp_path / "config.yaml"


def _check(config: Path) -> Result:
    return CliRunner().invoke(main, ["check", "--config", str(config)], catch_exceptions=False)


def test_an_export_is_read_with_its_side_table(config: Path) -> None:
    """What the bench sheet says of a position reaches the result."""
    settings = compile_snapshot(read_files(config))
    job = Job("FE-1.csv", EXPORT.encode(), 1, "2026-12-01T08:00:00.000000Z")

    readings = evaluate_job(settings, job, final=True).outcomes.case.readings

    assert set(readings.sample.names) == {"RIV-17"}
    assert readings.spike_volume.values.tolist() == [0.0, 5.0, 10.0]


def test_the_side_table_is_adopted_whole(config: Path) -> None:
    """The snapshot holds its text, gives it back, and its hash is another when the table is."""
    snapshot = read_files(config)
    (config.parent / "layouts" / "bench.csv").write_text(TABLE.replace("5\n", "6\n"), "utf-8")

    again = Snapshot.of_plain(json.loads(snapshot.body))

    assert [table.path for table in again.tables] == ["layouts/bench.csv"]
    assert compile_snapshot(again).layouts[0][0].side_tables[0].entries["spike_volume"]["2"] == "5"
    assert read_files(config).sha256 != snapshot.sha256


def test_settings_without_side_tables_keep_their_hash(config: Path) -> None:
    """The body of settings that need none has no word of them."""
    (config.parent / "layouts" / "iron.yaml").write_text(LAYOUT.partition("lookup")[0], "utf-8")

    assert "tables" not in json.loads(read_files(config).body)


def test_a_missing_side_table_is_a_fault_of_its_layout(config: Path) -> None:
    """It is named with file, line and key, beside what is wrong elsewhere."""
    (config.parent / "layouts" / "bench.csv").unlink()

    with pytest.raises(
        SettingsInvalid, match=r"iron.yaml, line 6, lookup\[1\].file: expected the side table 'bench.csv'"
    ):
        compile_snapshot(read_files(config))


def test_check_runs_the_examples(config: Path) -> None:
    """`check` ends with 0 where the example is read as it says, and with 2 where it is not, and says where."""
    assert _check(config).exit_code == 0

    (config.parent / "layouts" / "FE-1.expected.csv").write_text(EXPECTED.replace("0.437", "0.438"), "utf-8")
    done = _check(config)

    assert done.exit_code == 2
    said = " ".join(done.stderr.split())
    assert (
        "layouts/iron.yaml, line 8, examples[1]: FE-1.expected.csv, reading 2 (line 3 of the export), signal:" in said
    )
    assert "expected '0.438', got '0.437'" in said


@pytest.mark.parametrize(
    ("name", "content", "expected"),
    [
        ("FE-1.csv", None, "no such file or directory. The example proves nothing."),
        ("FE-1.csv", b"nothing\n", "examples[1]: FE-1.csv"),
        ("FE-1.expected.csv", b"\xff\xfe", "expected UTF-8 text in FE-1.expected.csv"),
    ],
)
def test_check_names_an_example_that_cannot_be_run(
    config: Path, name: str, content: bytes | None, expected: str
) -> None:
    """A missing file, a refused export and a table that is no text are named."""
    path = config.parent / "layouts" / name
    path.unlink()
    if content is not None:
        path.write_bytes(content)

    done = _check(config)

    assert done.exit_code == 2
    assert expected in " ".join(done.stderr.split())
