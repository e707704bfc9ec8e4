"""Result files: columns, form and keys that spreadsheets and scripts rely on, and bytes that depend on nothing else."""

from __future__ import annotations

import csv
import hashlib
import io
import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher import results
from watcher.disk import Disk
from watcher.evaluation import Evaluated, Job, evaluate_job, stage
from watcher.settings import File, Settings, Snapshot, compile_snapshot, read_files

if TYPE_CHECKING:
    from collections.abc import Iterator

LABORATORY = Path(__file__).parents[2] / "watcher" / "laboratory"
ACCEPTED = "2026-12-01T04:30:00.000000Z"
COLUMNS = [
    "sample",
    "analyte",
    "channel",
    "attempt",
    "result",
    "unit",
    "expanded_uncertainty",
    "coverage_factor",
    "low",
    "high",
    "result_by",
    "slope",
    "intercept",
    "correlation",
    "n_levels",
    "matrix_effect",
    "recovery",
    "verdict",
    "reasons",
    "next_step",
    "export",
    "export_lines",
    "revision",
    "accepted_at",
]
TEXTS = {
    "sample",
    "analyte",
    "channel",
    "unit",
    "result_by",
    "verdict",
    "reasons",
    "next_step",
    "export",
    "export_lines",
}
CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results}
layouts: [plain.yaml]
report: additions
blank: none
units: {export: mg/L, result: mg/L}
limits: {recovery: 75 to 125 %}
mail: none
"""
LAYOUT = """\
layout: plain bench
claims: {file: '*.csv'}
separator: ';'
columns:
  label: Label
  analyte: Element
  signal: [R1, R2]
  added: {from: Added, optional: yes}
labels:
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: 'BLK *', role: blank}
  - {pattern: '(?P<sample>.+) spiked$', role: spiked}
  - {like: '{sample}', role: unspiked}
"""


def plain_settings(more: str = "") -> Settings:
    """Return the settings of a plain bench."""
    snapshot = Snapshot("/laboratory", File("config.yaml", CONFIG + more), (File("plain.yaml", LAYOUT),))
    return compile_snapshot(snapshot)


def evaluated(rows: list[str], name: str = "PL-1.csv", more: str = "") -> tuple[Settings, Evaluated]:
    """Evaluate an export of these rows."""
    settings = plain_settings(more)
    data = "\n".join(["Label;Element;R1;R2;Added", *rows]).encode()
    return settings, evaluate_job(settings, Job(name, data, 1, ACCEPTED), final=True)


def additions(sample: str, native: float = 2.0, analyte: str = "Zn") -> list[str]:
    """Rows of a sample with additions of 1, 2 and 3 mg/L."""
    rows = []
    for number, scatter in enumerate((0.002, -0.003, -0.001, 0.002)):
        signal = 0.1 * (native + number) + scatter
        label = f"{sample} spiked" if number else sample
        rows.append(f"{label};{analyte};{signal - 0.001:.4f};{signal + 0.001:.4f};{number or ''}")
    return rows


STANDARDS = [f"STD {c};Zn;{0.1 * c + 0.001:.4f};{0.1 * c + 0.002:.4f};" for c in (0, 1, 2, 4)]
BATCH = [*STANDARDS, "BLK 1;Zn;0.001;0.002;", "CHK 2;Zn;0.2;0.201;"]
#: Exports of every kind of outcome: pass, not detected, incomplete, faulty, single addition, ordinary, no calibration.
KINDS = {
    "pass": [*BATCH, *additions("SED-12")],
    "not detected": additions("ROOF-7", native=0.001),
    "incomplete": additions("BRN-3")[1:],
    "faulty": [*BATCH, *additions("RIV-17"), "RIV-17 spiked;Zn;lost;0.1;5"],
    "single addition": additions("RIV-18")[:2],
    "ordinary": [*BATCH, "RIV-19;Zn;0.15;0.151;"],
    "ordinary without calibration": ["RIV-19;Zn;0.15;0.151;"],
    "row without sample": [*additions("RIV-16"), ";Zn;0.1;0.1;"],
    "falling line": [";".join([*row.split(";")[:2], str(1 / (n + 1)), str(1 / (n + 1)), str(n or "")])
                     for n, row in enumerate(additions("RIV-20"))],
}  # fmt: skip


def csv_of(settings: Settings, found: Evaluated) -> bytes:
    """Return the CSV."""
    return b"".join(results.csv_pieces(found.outcomes, found.export, settings.file.csv))


def json_of(found: Evaluated) -> Any:
    """Return the JSON record, read back."""
    return json.loads(b"".join(results.json_pieces(found.outcomes, found.export, found.problems)))


# -- CSV -----------------------------------------------------------------------------------------------------------


def test_the_csv_has_its_columns_mark_and_line_ends() -> None:
    """The CSV is UTF-8 with a mark, its lines end with CRLF, and its columns stand in their order."""
    data = csv_of(*evaluated(KINDS["pass"]))

    assert data.startswith(b"\xef\xbb\xbfsample,analyte,")
    lines = data.decode("utf-8-sig").split("\r\n")
    assert lines[0].split(",") == COLUMNS
    assert lines[-1] == ""
    assert not any("\n" in line or "\r" in line for line in lines)


@pytest.mark.parametrize("kind", KINDS)
def test_csv_and_json_say_the_same(kind: str) -> None:
    """Each row of the CSV holds the numbers of its series in the JSON record, in full, and never NaN or infinity."""
    settings, found = evaluated(KINDS[kind])
    rows = list(csv.DictReader(io.StringIO(csv_of(settings, found).decode("utf-8-sig"), newline="")))

    for row, series in zip(rows, json_of(found)["series"], strict=True):
        result = series["result"]
        for column in ("low", "high"):
            assert row[column] == ("" if result[column] is None else repr(result[column]))
        if row["result"].startswith("< "):
            assert (kind, float(row["result"][2:])) == ("not detected", pytest.approx(result["high"], rel=0.05))
        else:
            assert row["result"] == ("" if result["value"] is None else repr(result["value"]))
        assert (row["verdict"], row["unit"], row["result_by"]) == (series["verdict"], "mg/L", result["by"])
        assert row["next_step"] == (series["next_step"]["sentence"] or "")
        assert not {"nan", "inf", "-inf"} & {cell.lower() for cell in row.values()}


def test_a_decimal_comma_is_for_numbers_only() -> None:
    """With `csv: {separator: ';', decimal: ','}` numbers get commas, texts stay, and the values are the same."""
    settings, found = evaluated(KINDS["pass"])
    german, _ = evaluated(KINDS["pass"], more="csv: {separator: ';', decimal: ','}\n")
    points = list(csv.DictReader(io.StringIO(csv_of(settings, found).decode("utf-8-sig"))))
    commas = list(csv.DictReader(io.StringIO(csv_of(german, found).decode("utf-8-sig")), delimiter=";"))

    for with_points, with_commas in zip(points, commas, strict=True):
        for column in COLUMNS:
            text = column in TEXTS | {"accepted_at"}
            assert with_commas[column] == (with_points[column] if text else with_points[column].replace(".", ","))
    assert "," in commas[0]["result"]


@pytest.mark.parametrize(
    "sample", ["=1+1", "@SUM(A1)", "+SED-12", "-5", "=cmd|' /C calc'!A0", "＝1+1", "\u00a0=1", "SED-12"]
)
def test_a_hostile_sample_is_inert_in_the_csv_and_whole_in_the_json(sample: str) -> None:
    """A sample ID that a spreadsheet would run is made inert by one mark in the CSV; the JSON keeps it as it was."""
    settings, found = evaluated(additions(sample))
    (row,) = csv.DictReader(io.StringIO(csv_of(settings, found).decode("utf-8-sig")))
    (series,) = json_of(found)["series"]

    assert series["sample"] == sample.strip()
    assert row["sample"] == (sample if sample == "SED-12" else f"'{sample.strip()}")


def test_negative_numbers_are_no_formulas() -> None:
    """A negative number stays a number in the CSV."""
    settings, found = evaluated(KINDS["not detected"])
    (row,) = csv.DictReader(io.StringIO(csv_of(settings, found).decode("utf-8-sig")))

    assert float(row["low"]) < 0


@given(st.text(max_size=20))
def test_no_text_begins_a_formula(text: str) -> None:
    """Whatever a text holds, the cell does not begin like a formula, and nothing but one mark was added."""
    cell = results.inert(text)

    assert cell in (text, f"'{text}")
    assert cell.lstrip()[:1] not in ("=", "+", "-", "@") or not cell.lstrip()
    assert not cell.startswith(("\t", "\r"))


# -- JSON ----------------------------------------------------------------------------------------------------------

RECORD = {"format", "export", "series", "blanks", "check_standards", "calibrations"} | {
    "spiked_blanks",
    "others",
    "set_aside",
    "problems",
    "seal",
}
EXPORT = {"name", "sha256", "bytes", "revision", "accepted_at", "layout", "settings", "program"}
SERIES = {
    "sample", "analyte", "channel", "attempt", "verdict", "confidence", "result", "additions_result",
    "calibration_result", "fit", "solutions", "recoveries", "matrix_effect", "budget", "checks", "detection",
    "next_step",
}  # fmt: skip
RESULT = {
    "value", "unit", "standard_uncertainty", "expanded_uncertainty", "coverage_factor", "low", "high", "effective_dof",
    "by", "text",
}  # fmt: skip
FIT = {"slope", "intercept", "correlation", "residual_sd", "n", "dof", "variance", "g", "u_line"}
FIT |= {"intercept_variance", "slope_variance", "covariance"}
SOLUTION = {"label", "role", "added", "dilution", "signal", "readings", "position", "measured_at", "export_lines"}
SOLUTION |= {"predilution", "residual_percent", "run_order"}
CHECK = {"check", "value", "limit", "unit", "outcome", "sentence", "export_lines"}


@pytest.mark.parametrize("kind", KINDS)
def test_every_key_is_always_there(kind: str) -> None:
    """Every key of the record is there whatever became of the export; `result` is always an object."""
    _, found = evaluated(KINDS[kind])
    record = json_of(found)

    assert record["format"] == 1
    assert record.keys() == RECORD
    assert record["export"].keys() == EXPORT
    assert record["series"]
    for series in record["series"]:
        assert series.keys() == SERIES
        for part in ("result", "additions_result", "calibration_result"):
            assert series[part] is None or series[part].keys() == RESULT
        assert series["result"] is not None
        assert series["result"]["text"]
        assert series["fit"] is None or series["fit"].keys() == FIT
        assert all(solution.keys() == SOLUTION for solution in series["solutions"])
        assert all(check.keys() == CHECK for check in series["checks"])
        assert series["next_step"].keys() == {"sentence", "plan"}
        assert (series["verdict"] in ("pass", "not spiked")) or series["next_step"]["sentence"]


@pytest.mark.parametrize("kind", KINDS)
def test_there_is_no_number_that_is_none(kind: str) -> None:
    """The JSON text holds neither NaN nor infinity, which no reader of JSON has to understand."""
    _, found = evaluated(KINDS[kind])

    def refuse(constant: str) -> None:
        raise AssertionError(constant)

    json.loads(b"".join(results.json_pieces(found.outcomes, found.export, found.problems)), parse_constant=refuse)


def test_a_line_that_falls_gives_no_number() -> None:
    """Where the signal falls with the additions there is no number; the line itself is kept, and the text says why."""
    _, found = evaluated(KINDS["falling line"])
    (series,) = json_of(found)["series"]

    assert [series["result"][key] for key in ("value", "expanded_uncertainty", "low", "high")] == [None] * 4
    assert series["fit"]["slope"] < 0
    assert series["verdict"] == "fail"


@pytest.mark.parametrize("kind", KINDS)
def test_bytes_do_not_depend_on_when(kind: str) -> None:
    """Evaluating the same bytes with the same settings again gives the same bytes of both files."""
    settings, first = evaluated(KINDS[kind])
    again, second = evaluated(KINDS[kind])

    assert csv_of(settings, first) == csv_of(again, second)
    assert list(results.json_pieces(first.outcomes, first.export, first.problems)) == list(
        results.json_pieces(second.outcomes, second.export, second.problems)
    )


def _demonstration() -> Iterator[tuple[Settings, str]]:
    settings = compile_snapshot(read_files(LABORATORY / "config.yaml"))
    for path in sorted((LABORATORY / "exports").iterdir()):
        if path.name != "FL-0414.csv":  # the one that is broken
            yield settings, path.name


@pytest.mark.parametrize(("settings", "name"), list(_demonstration()), ids=[name for _, name in _demonstration()])
def test_staged_files_are_what_was_announced(settings: Settings, name: str, tmp_path: Path) -> None:
    """Result files lie durably in the records with the hashes that the reply gives, and name their targets."""
    data = (LABORATORY / "exports" / name).read_bytes()
    found = evaluate_job(settings, Job(name, data, 3, ACCEPTED), final=True)

    files = stage(found, settings, tmp_path, Disk())

    assert [file["target"] for file in files] == [f"2026-12/{name}.r3.csv", f"2026-12/{name}.r3.json"]
    for file in files:
        path = Path(file["staged"])
        assert path.parent == tmp_path
        assert hashlib.sha256(path.read_bytes()).hexdigest() == file["sha256"]
    record = json.loads(Path(files[1]["staged"]).read_bytes())
    assert record["export"]["sha256"] == hashlib.sha256(data).hexdigest()
    assert record["export"]["settings"] == settings.sha256


def test_effective_degrees_of_freedom_are_those_of_welch_and_satterthwaite() -> None:
    """ν = u⁴ / Σ u_i⁴/ν_i over the budget, given for information beside U."""
    _, found = evaluated(KINDS["pass"])
    (series, *_) = json_of(found)["series"]

    parts = [share for share in series["budget"] if share["standard_uncertainty"] and share["dof"]]
    fourth = sum(share["standard_uncertainty"] ** 4 / share["dof"] for share in parts)
    assert series["result"]["effective_dof"] == pytest.approx(series["result"]["standard_uncertainty"] ** 4 / fourth)
