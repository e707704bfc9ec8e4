"""Published examples recomputed: agreement, misprints, what a wrong value does, and the record that stays."""

from __future__ import annotations

import csv
import hashlib
import json
import shutil
from datetime import UTC, datetime
from math import log10
from pathlib import Path

import pytest
from click.testing import CliRunner
from hypothesis import given
from hypothesis import strategies as st

from rules import additions, calibration, interval, lack_of_fit, line
from watcher import prove
from watcher.commands import main
from watcher.verification.comparison import MOST_DIGITS, Comparison, digits
from watcher.verification.examples import EXAMPLES, recompute
from watcher.verification.inputs import Inputs, PublishedUnusable, Value

ROOT = Path(__file__).parents[2]
PUBLISHED = ROOT / "watcher" / "published"
CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results, records: ./kept}
layouts: [flame.yaml]
report: calibration
units: {export: mg/L, result: mg/L}
mail: none
"""
LAYOUT = """\
layout: flame bench
claims: {file: 'FL-*.csv'}
separator: ';'
columns: {label: Label, analyte: Element, signal: R1, added: Added}
"""


class Noon:
    """Noon of one day."""

    def now(self) -> datetime:
        """The time."""
        return datetime(2026, 12, 1, 12, 0, 5, 999999, tzinfo=UTC)

    def monotonic(self) -> float:
        """No time passes."""
        return 0.0


@pytest.fixture(scope="module")
def recomputed():
    """Every comparison and every refutation."""
    return recompute(Inputs())


@pytest.fixture
def altered(tmp_path):
    """A function that copies the examples with one text replaced in one file."""

    def alter(file: str, old: str, new: str) -> Inputs:
        folder = tmp_path / "published"
        shutil.copytree(PUBLISHED, folder)
        text = (folder / file).read_text(encoding="utf-8")
        assert text.count(old) == 1
        (folder / file).write_text(text.replace(old, new), encoding="utf-8")
        return Inputs(folder)

    return alter


def run(folder: Path, capsys, **more) -> tuple[int, str, str]:
    """Run without settings; return exit code, output and errors."""
    code = prove.run(None, folder, **({"as_json": False, "clock": Noon()} | more))
    return code, *capsys.readouterr()


def test_at_least_150_published_values_agree(recomputed):
    """Every published value is met within its tolerance, and at least 150 have a source outside."""
    comparisons, _ = recomputed

    assert [one for one in comparisons if not one.agrees] == []
    assert sum(one.value.origin != "derived" for one in comparisons) >= 150


def test_certified_regressions_are_met_to_nine_digits(recomputed):
    """NIST's values agree in nine digits at least; lines through zero, and Norris where it allows, in twelve."""
    certified = [one for one in recomputed[0] if one.value.source.startswith("NIST StRD")]

    assert len(certified) == 15
    assert min(one.digits for one in certified) >= 9
    assert min(one.digits for one in certified if "Pontius" not in one.value.source) >= 12


def test_misprints_are_not_reproduced(recomputed):
    """Iron's 0.12 without covariance and aluminium's 0.6477 with a read-back's term do not come out."""
    found = {(one.misprint.correct.example, one.misprint.printed): one for one in recomputed[1]}

    iron, aluminium = found["iron flasks", "0.12"], found["aluminium in gum", "0.6477"]

    assert iron.computed == pytest.approx(0.158742391474554, rel=1e-9)
    assert iron.computed != pytest.approx(0.12, abs=0.02)
    assert aluminium.computed == pytest.approx(0.5174326501719, rel=1e-9)
    assert aluminium.computed != pytest.approx(0.6477, abs=0.05)
    assert all(one.agrees for one in found.values())


def test_everything_computed_is_compared(recomputed):
    """Every number that an example computes stands beside a published value or a misprint, but for stated ones."""
    listed = {(one.value.example, one.value.quantity) for one in recomputed[0]}
    listed |= {(one.misprint.correct.example, one.misprint.correct.quantity) for one in recomputed[1]}
    computed = {(name, quantity) for name, compute in EXAMPLES.items() for quantity in compute(Inputs())}

    # the manual prints no standard deviations of its line
    assert computed - listed == {("variable volume", "sd of slope"), ("variable volume", "sd of intercept")} | {
        ("silver", "sd of slope"),
        ("silver", "sd of intercept"),
        ("iron flasks", "residual sd"),
    }
    assert listed <= computed


def test_every_source_is_given_in_full():
    """Each short source of the tables stands in the README beside them, and each example has one origin word known."""
    readme = (PUBLISHED / "README.md").read_text(encoding="utf-8")
    rows = [row for name in ("values", "misprints") for row in _rows(PUBLISHED / f"{name}.csv")]

    assert {row["source"] for row in rows if row["source"] not in readme} == set()
    assert {row["origin"] for row in rows} == {"found", "data", "answer", "memory", "derived"}


def test_shipped_inputs_are_those_of_the_tests():
    """An example that tests and program both hold is the same in both."""
    shared = {file.name for file in PUBLISHED.glob("*.csv")} & {
        file.name for file in (ROOT / "tests" / "reference").glob("*.csv")
    }

    assert len(shared) == 16
    for name in shared:
        assert _rows(PUBLISHED / name) == _rows(ROOT / "tests" / "reference" / name), name


def test_a_value_that_disagrees_is_named_and_fails(tmp_path, capsys, altered):
    """A published value that the program does not meet gives exit 1, stands out in the table and is on record."""
    inputs = altered("values.csv", "iron flasks,slope,0.0382,", "iron flasks,slope,0.0392,")

    code, out, _ = run(tmp_path, capsys, inputs=inputs)

    record = json.loads((tmp_path / "prove-20261201T120005Z.json").read_text(encoding="utf-8"))
    assert code == 1
    assert "DISAGREES: published 0.0392, computed 0.0382, tolerance 5e-06" in out
    assert "1 DISAGREE." in out
    assert "Do not report results computed on this machine" in out
    assert record["agrees"] is False
    assert [one["quantity"] for one in record["values"] if not one["agrees"]] == ["slope"]


def test_an_input_that_was_altered_is_noticed(tmp_path, capsys, altered):
    """A changed reading of an example makes its values disagree and changes the hash of the examples."""
    inputs = altered("silver_additions.csv", "15,0.6\n", "15,0.9\n")

    code, out, _ = run(tmp_path, capsys, inputs=inputs)

    assert code == 1
    assert "DISAGREES" in out
    assert inputs.sha256() != Inputs().sha256()


def test_a_misprint_that_comes_out_fails(tmp_path, capsys, altered):
    """If the correct value were the printed one, the misprint would be reproduced, and that is exit 1."""
    inputs = altered("misprints.csv", "0.12,0.1587,0.00005", "0.15874,0.1587,0.00005")

    code, out, _ = run(tmp_path, capsys, inputs=inputs)

    assert code == 1
    assert "misprint: printed 0.15874, correct 0.1587, computed 0.158742" in out
    assert "11 known misprints: 1 DISAGREE" in out


def test_the_record_says_what_where_and_when(tmp_path, capsys):
    """The record holds time, versions, platform and hashes; the result's hash follows from its values."""
    code, out, err = run(tmp_path, capsys)

    record = json.loads((tmp_path / "prove-20261201T120005Z.json").read_text(encoding="utf-8"))
    content = {"values": record["values"], "misprints": record["misprints"]}
    canonical = json.dumps(content, sort_keys=True, ensure_ascii=False, separators=(",", ":"))
    assert code == 0
    assert record["verified_at"] == "2026-12-01T12:00:05Z"
    assert record["result_sha256"] == hashlib.sha256(canonical.encode()).hexdigest()
    assert record["examples_sha256"] == Inputs().sha256()
    assert {"numpy", "pandas", "scipy"} <= set(record["libraries"])
    assert record["counts"] == {
        "published": 186,
        "derived": 13,
        "values_disagreeing": 0,
        "misprints": 11,
        "misprints_disagreeing": 0,
    }
    assert (tmp_path / "prove-20261201T120005Z.txt").read_text(encoding="utf-8") == out
    assert "prove-20261201T120005Z.json and .txt" in err


def test_a_record_is_never_written_over(tmp_path, capsys):
    """Two runs within one second leave two records with the same result."""
    run(tmp_path, capsys)
    run(tmp_path, capsys)

    first, second = (
        json.loads((tmp_path / f"prove-20261201T120005Z{number}.json").read_text(encoding="utf-8"))
        for number in ("", "-2")
    )
    assert len(list(tmp_path.iterdir())) == 4
    assert first == second


def test_the_table_is_plain_and_fits_eighty_columns(tmp_path, capsys):
    """Where nobody looks, the table holds no control characters and no line is longer than 80."""
    _, out, _ = run(tmp_path, capsys)

    assert max(len(line) for line in out.splitlines()) <= 80
    assert all(character.isprintable() or character == "\n" for character in out)
    assert any(line.split() == ["C,", "mg/L", "7.01", "7.0087", "3.7", "data"] for line in out.splitlines())
    assert "186 published values and 13 derived ones: all agree within their tolerance." in out


def test_machines_get_the_record_itself(tmp_path, capsys):
    """With --json standard output is the record, byte for byte as it was written."""
    code, out, err = run(tmp_path, capsys, as_json=True)

    assert code == 0
    assert out == (tmp_path / "prove-20261201T120005Z.json").read_text(encoding="utf-8")
    assert err.startswith("Record: ")


def test_the_command_writes_into_the_records_folder(tmp_path):
    """With settings the record goes into prove/ of the records folder that they name."""
    (tmp_path / "config.yaml").write_text(CONFIG, encoding="utf-8")
    (tmp_path / "flame.yaml").write_text(LAYOUT, encoding="utf-8")

    done = CliRunner().invoke(main, ["prove", "--config", str(tmp_path / "config.yaml")])

    assert done.exit_code == 0, done.output
    assert sorted(file.suffix for file in (tmp_path / "kept" / "prove").iterdir()) == [".json", ".txt"]


def test_settings_that_cannot_be_used_stop_it(tmp_path):
    """Faulty settings give exit 2 and their faults: nobody should look for a record where none can be."""
    (tmp_path / "config.yaml").write_text(CONFIG + "recrods: x\n", encoding="utf-8")
    (tmp_path / "flame.yaml").write_text(LAYOUT, encoding="utf-8")

    done = CliRunner().invoke(main, ["prove", "--config", str(tmp_path / "config.yaml")])

    assert done.exit_code == 2
    assert "recrods" in done.output
    assert not (tmp_path / "kept").exists()


def test_a_record_that_cannot_be_written_is_said(tmp_path, capsys):
    """A folder that is a file gives exit 2, what follows and what to do, after the table."""
    (tmp_path / "taken").write_text("", encoding="utf-8")

    code, out, err = run(tmp_path / "taken", capsys)

    assert code == 2
    assert "Conclusion" in out
    words = " ".join(err.split())
    assert "expected a folder to write the record into, got: " in words
    assert words.endswith("not on record. Make the folder writable, or run prove in another one.")


@pytest.mark.parametrize(
    ("module", "function", "factor", "example"),
    [
        (line, "_mean", 1 + 1e-8, "Norris"),
        (lack_of_fit, "fdtrc", 1.2, "bank branches"),
        (interval, "stdtrit", 1.001, "Student's t"),
        (calibration, "student_t", 1.1, "fluorescein"),
        (additions, "student_t", 1.1, "silver"),
    ],
    ids=["means", "p of lack of fit", "t", "t of read-backs", "t of additions"],
)
def test_what_runs_in_service_is_what_is_verified(monkeypatch, module, function, factor, example):
    """A defect put into the calculation that serves the laboratory shows as disagreement."""
    right = getattr(module, function)
    monkeypatch.setattr(module, function, lambda *given: right(*given) * factor)

    comparisons, _ = recompute(Inputs())

    assert example in {one.value.example for one in comparisons if not one.agrees}


@pytest.mark.parametrize(
    ("file", "old", "new", "sentence"),
    [
        (
            "values.csv",
            "iron flasks,slope,0.0382,",
            "iron flasks,slope,0.0382x,",
            r"number in published, got '0.0382x'",
        ),
        ("values.csv", "slope,0.0382,5e-06", "slope,0.0382,0", r"expected a tolerance above 0, got '0'"),
        ("values.csv", "iron flasks,slope,", "iron flasks,incline,", r"program computes, got iron flasks: incline"),
        ("misprints.csv", "0.00005,data", "0.00005,hearsay", r"expected origin found, .* got 'hearsay'"),
        ("iron_flasks.csv", "5,0.437", "5,O.437", r"expected numbers, .*O\.437"),
    ],
)
def test_damaged_examples_are_refused(altered, file, old, new, sentence):
    """Examples that cannot be used are refused with file and cause, and the remedy."""
    inputs = altered(file, old, new)

    with pytest.raises(PublishedUnusable, match=rf"^{file}.*{sentence}.*Install the program again\.$"):
        recompute(inputs)


def test_a_table_cut_short_is_refused(altered):
    """Values that are not there agree with nothing: a table that lost its end is refused, and says what is gone."""
    inputs = altered("values.csv", "iron flasks,slope,", "iron flasks,slope,")
    table = Path(str(inputs.folder)) / "values.csv"
    text = table.read_text(encoding="utf-8")
    table.write_text(text[: text.index("near the limit,")], encoding="utf-8")

    with pytest.raises(PublishedUnusable, match=r"got none of thermometer, near the limit\. .*Install"):
        recompute(inputs)


def test_a_missing_input_is_refused(tmp_path, capsys):
    """An installation without the examples gives exit 2 and names the file."""
    code, _, err = run(tmp_path, capsys, inputs=Inputs(tmp_path / "nowhere"))

    assert code == 2
    assert "values.csv: expected a file of published examples" in " ".join(err.split())


@given(st.floats(1e-6, 1e6), st.integers(1, 12))
def test_digits_count_the_agreement(published, places):
    """A relative difference of 10 to the minus n is n digits; equality gives all, nothing computed gives none."""
    computed = published * (1 + 10.0**-places)

    assert digits(computed, published) == pytest.approx(places, abs=10.0 ** (places - 14))
    assert digits(published, published) == MOST_DIGITS
    assert digits(float("nan"), published) == 0
    assert log10(2) < MOST_DIGITS


@given(st.floats(-1e3, 1e3), st.floats(1e-6, 1e3))
def test_nothing_but_a_number_within_tolerance_agrees(published, tolerance):
    """Inside the tolerance agrees, outside and NaN and infinity do not."""
    value = Value("silver", "slope", repr(published), tolerance, "found", "a source")

    assert Comparison(value, published + 0.99 * tolerance).agrees
    assert not Comparison(value, published - 1.01 * tolerance - 1e-9).agrees
    assert not Comparison(value, float("nan")).agrees
    assert not Comparison(value, float("inf")).agrees


def _rows(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))
