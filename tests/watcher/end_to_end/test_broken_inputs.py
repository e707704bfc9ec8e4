"""Broken exports, cells and settings: each is named with place, cause and remedy, and nothing else suffers."""

from __future__ import annotations

import email
import email.policy
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

BENCH_LAYOUT = """\
layout: volumes bench
claims: {file: 'VB-*.csv'}
separator: ';'
columns:
  label: Vial
  analyte: {constant: Zn}
  signal: Signal
  aliquot: {from: Aliquot, unit: mL}
  spike_volume: {from: Std, unit: mL}
  made_up_to: {from: Flask, unit: mL}
labels:
  - {pattern: '^(?P<sample>[A-Z]+-\\d+)$', role: unspiked}
  - {pattern: '^(?P<sample>[A-Z]+-\\d+) spiked$', role: spiked}
"""
VOLUMES_HEADER = "Vial;Signal;Aliquot;Std;Flask"


def volumes(sample: str, **changed: str) -> list[str]:
    """Rows of a sample with its volumes; one cell of the second spiked solution may be changed."""
    rows = []
    for number, std in enumerate(("0", "5", "10", "15")):
        signal = 0.184 * (3 * 10 + 5 * float(std)) / 50 + (0.0002, -0.0003, 0.0001, 0)[number]
        cells = {"Signal": f"{signal:.5f}", "Aliquot": "10", "Std": std, "Flask": "50"}
        cells |= changed if number == 2 else {}
        rows.append(";".join([sample + (" spiked" if number else ""), *cells.values()]))
    return rows


#: Name to content of an export that cannot be read, and to what standard error must say of it.
BROKEN: dict[str, tuple[Callable[[Any], bytes], list[str]]] = {
    "FL-0601.csv": (
        lambda lab: lab.text(*lab.additions("RIV-16"), "RIV-19;Zn;0.1").encode(),
        ["FL-0601.csv, line 6: expected 5 fields as in the header, got 3 in 'RIV-19;Zn;0.1'", "Correct the row"],
    ),
    "FL-0602.csv": (
        lambda lab: lab.text(*lab.additions("RIV-16"), "RIV-19;Zn;0.1;0.1;0.1;0.1").encode(),
        ["FL-0602.csv, line 6: expected 5 fields as in the header, got 6", "Correct the row"],
    ),
    "FL-0603.csv": (
        lambda lab: lab.text('"RIV-19;Zn;0.1;0.1;0.1', *lab.additions("RIV-16")).encode(),
        ["FL-0603.csv, line 2", "quote"],
    ),
    "FL-0604.csv": (
        lambda lab: lab.text(*lab.additions("RIV-16")).replace("R2", "R 2").encode(),
        ["FL-0604.csv, line 1", "expected the columns 'R2' (for signal)", "'R 2'", "Correct the names"],
    ),
    "FL-0605.csv": (lambda _: b"", ["FL-0605.csv", "expected", "got"]),
    "FL-0606.csv": (
        lambda lab: lab.text().encode(),
        ["FL-0606.csv, line 1", "expected rows under the header, got none"],
    ),
    "FL-0607.csv": (
        lambda lab: lab.text(*lab.additions("RIV-16")).encode("utf-16-le"),
        ["FL-0607.csv, line 1: expected text, got a NUL character", "declare utf-16-le"],
    ),
    "FL-0608.csv": (
        lambda lab: lab.text(*lab.additions("RIV-16")).replace("R2", "R1").encode(),
        ["FL-0608.csv, line 1, column 'R1'", "expected one column of this name for signal, got 2"],
    ),
    "VB-0609.csv": (
        lambda _: "\n".join([VOLUMES_HEADER, *volumes("RIV-16"), "RIV 17;0.1;10;0;50"]).encode(),
        [
            "VB-0609.csv, line 6, column 'Vial'",
            "expected every label to match a rule, got 'RIV 17' (line 6)",
            "add rules",
        ],
    ),
    "FL-0610.txt": (lambda lab: lab.text().encode(), ["FL-0610.txt", "no layout claims it", "'flame bench'"]),
    "VB-0611-twice.csv": (
        lambda _: "\n".join([VOLUMES_HEADER, *volumes("RIV-16")]).encode(),
        [
            "VB-0611-twice.csv",
            "expected one layout to claim it, got 'volumes bench' (volumes.yaml) and 'second'",
            "Narrow",
        ],
    ),
}

#: A cell that must fail its own series: what stands in it, where, and what the sentence says of it.
READINGS = {
    "": "expected a number, got an empty cell",
    "NaN": "got 'NaN'",
    "lost": "got 'lost'",
    "0,1": "expected a number with decimal point, got '0,1'",
    "1e999": "expected a number that a computer can hold",
    "inf": "got 'inf'",
    "1_000": "got '1_000'",
    "<0.01": "cells.below",
}
VOLUMES = {
    ("Std", ""): "a spiked solution without addition",
    ("Std", "0"): "a spiked solution to which 0 was added",
    ("Std", "-5"): "spike_volume is -5, which cannot be",
    ("Std", "five"): "got 'five'",
    ("Aliquot", "0"): "aliquot is 0, which cannot be",
    ("Aliquot", "-10"): "aliquot is -10, which cannot be",
    ("Aliquot", ""): "expected a number, got an empty cell",
    ("Flask", "0"): "made_up_to is 0, which cannot be",
    ("Flask", "-50"): "made_up_to is -50, which cannot be",
    ("Flask", "12"): "do not fit into made_up_to 12 mL",
    ("Signal", ""): "expected a number, got an empty cell",
}


@pytest.fixture(scope="module")
def evaluated(make_laboratory: Callable[[], Any]) -> Any:
    """A laboratory after one `once` over everything that is broken, and two samples that are not."""
    laboratory = make_laboratory()
    second = "layout: second\nclaims: {file: '*-twice.csv'}\nseparator: ';'\ncolumns:\n  label: Vial\n"
    second += "  analyte: {constant: Zn}\n  signal: Signal\n  added: Std\n"
    laboratory.write("volumes.yaml", BENCH_LAYOUT)
    laboratory.write("second.yaml", second)
    laboratory.change("config.yaml", "layouts: [flame.yaml]", "layouts: [flame.yaml, volumes.yaml, second.yaml]")
    for name, (content, _) in BROKEN.items():
        (laboratory.folder / "exports" / name).write_bytes(content(laboratory))
    readings = [
        row.replace(row.split(";")[3], cell)
        for number, cell in enumerate(READINGS)
        for row in laboratory.additions(f"RIV-{number}", only="0")
    ]
    spiked = [row for number in range(len(READINGS)) for row in laboratory.additions(f"RIV-{number}", only="123")]
    laboratory.export("FL-0620.csv", *laboratory.standards(), *readings, *spiked, *laboratory.additions("SED-12"))
    rows = [row for n, (column, cell) in enumerate(VOLUMES) for row in volumes(f"BRN-{n}", **{column: cell})]
    laboratory.write("exports/VB-0621.csv", "\n".join([VOLUMES_HEADER, *rows, *volumes("SED-13")]) + "\n")
    laboratory.done = laboratory.run("once")
    return laboratory


@pytest.mark.parametrize("name", BROKEN)
def test_a_broken_export_is_named_with_place_cause_and_remedy(evaluated: Any, squeezed: Any, name: str) -> None:
    """Standard error names a broken export with line, column, what was expected and what to do."""
    told = squeezed(evaluated.done.stderr)

    assert evaluated.done.returncode == 2
    for piece in BROKEN[name][1]:
        assert piece in told
    assert f"{name}.r1.json" not in evaluated.records()


def test_the_others_are_evaluated_all_the_same(evaluated: Any) -> None:
    """Sound samples pass in the same run, beside broken exports and beside broken rows of their own export."""
    assert evaluated.series("FL-0620.csv")["SED-12 Zn"]["verdict"] == "pass"
    assert evaluated.series("VB-0621.csv")["SED-13 Zn"]["result"]["value"] == pytest.approx(3.0, abs=0.03)
    assert evaluated.series("VB-0621.csv")["SED-13 Zn"]["verdict"] == "pass"


def faulty(series: Any) -> str:
    """Check that a series failed its inputs without any number, and return the sentence."""
    assert series["verdict"] == "fail"
    assert [series["result"][key] for key in ("value", "expanded_uncertainty", "low", "high")] == [None] * 4
    assert series["result"]["text"] == "no result: the inputs are faulty"
    (check,) = [one for one in series["checks"] if one["check"] == "inputs"]
    assert check["outcome"] == "fail"
    return check["sentence"]


@pytest.mark.parametrize(("number", "cell"), list(enumerate(READINGS)), ids=[repr(cell) for cell in READINGS])
def test_a_reading_that_is_none_fails_its_series(evaluated: Any, number: int, cell: str) -> None:
    """A reading that is missing or no number fails its own series, with line and column, and is never left out."""
    sentence = faulty(evaluated.series("FL-0620.csv")[f"RIV-{number} Zn"])

    assert f"line {8 + number}, column 'R2'" in sentence
    assert READINGS[cell] in sentence


@pytest.mark.parametrize(("number", "place"), list(enumerate(VOLUMES)), ids=[" ".join(place) for place in VOLUMES])
def test_a_volume_that_cannot_be_fails_its_series(evaluated: Any, number: int, place: tuple[str, str]) -> None:
    """A volume that is zero, negative, too large, missing or a text fails its own series and says in which line."""
    sentence = faulty(evaluated.series("VB-0621.csv")[f"BRN-{number} Zn"])

    assert f"line {2 + 4 * number + 2}" in sentence
    assert VOLUMES[place] in sentence


def test_every_faulty_series_stands_in_the_csv(evaluated: Any) -> None:
    """Series without result have their row in the CSV, with verdict and reason."""
    for export in ("FL-0620.csv", "VB-0621.csv"):
        rows = {f"{row['sample']} {row['analyte']}": row for row in evaluated.csv_rows(export)}
        assert rows.keys() == evaluated.series(export).keys()
        for name, series in evaluated.series(export).items():
            assert rows[name]["verdict"] == series["verdict"]
            assert bool(rows[name]["reasons"]) == (series["verdict"] == "fail")
            assert bool(rows[name]["result"]) == (series["verdict"] != "fail")


def test_a_row_without_sample_is_told_three_times(laboratory: Any, mail_server: Any, squeezed: Any) -> None:
    """A row without sample ID is named with its line on standard error, in the JSON and by mail; the rest passes."""
    laboratory.mail_to(mail_server.port)
    laboratory.export("FL-0630.csv", *laboratory.standards(), *laboratory.additions("SED-12"), ";Zn;0.1;0.1;0.1")
    sentence = "line 12, column 'Label': expected a sample ID, got an empty cell in ';Zn;0.1;0.1;0.1'."

    done = laboratory.run("once")

    ((_, received),) = mail_server.mailbox.received
    message = email.message_from_string(received, policy=email.policy.default)
    record = laboratory.record("FL-0630.csv")
    assert done.returncode == 2
    assert sentence in squeezed(done.stderr)
    assert [problem for problem in record["problems"] if sentence in problem] == record["problems"]
    assert message["Subject"].startswith("PROBLEM FL-0630.csv: line 12, column 'Label'")
    assert sentence in squeezed(message.get_body(("plain",)).get_content())
    assert [one["line"] for one in record["set_aside"]] == [1, 12]
    assert [one["verdict"] for one in record["series"]] == ["pass"]


def test_check_names_an_export_that_two_layouts_claim(laboratory: Any, run_here: Any, squeezed: Any) -> None:
    """`check` looks at the exports that are there and names each one that two layouts would claim."""
    laboratory.write("flame-2.yaml", (laboratory.folder / "flame.yaml").read_text().replace("flame bench", "flame 2"))
    laboratory.change("config.yaml", "[flame.yaml]", "[flame.yaml, flame-2.yaml]")
    laboratory.export("FL-0640.csv", *laboratory.additions("SED-12"))

    done = run_here("check", None, laboratory)

    assert done.exit_code == 2
    assert "FL-0640.csv: expected one layout to claim it, got flame bench and flame 2." in squeezed(done.stderr)


def test_all_faults_of_all_files_are_named_at_once(laboratory: Any, run_here: Any, squeezed: Any) -> None:
    """Unknown keys and wrong types, in configuration and layout, are named in one go with file and line."""
    laboratory.change("config.yaml", "blank: none", "blank: nothing\nblnk: none")
    laboratory.change("config.yaml", "mail: none", "mail: [none]")
    laboratory.change("config.yaml", "folders: {exports: ./exports, results: ./results}", "folders: ./exports")
    laboratory.change("config.yaml", "aliquot: 10 mL", "aliquot: 10")
    laboratory.change("flame.yaml", "separator: ';'", "separatr: ';'")
    laboratory.change("flame.yaml", "  signal: [R1, R2, R3]", "  signal: {colum: R1}")
    expected = [
        "config.yaml, line 2, folders: expected keys and values, got './exports'.",
        "config.yaml, line 7, bench.aliquot: ",
        "config.yaml, line 11, blank: expected one of 'subtract', 'preparation', 'none', got 'nothing'.",
        (
            "config.yaml, line 12, blnk: unknown key 'blnk'. Nothing is evaluated with these settings. "
            "Did you mean 'blank'?"
        ),
        "config.yaml, line 15, mail: ",
        (
            "flame.yaml, line 3, separatr: unknown key 'separatr'. No export can be read with this layout. "
            "Did you mean 'separator'?"
        ),
        "flame.yaml, line 7, columns.signal: ",
    ]

    done = run_here("check", None, laboratory)

    told = squeezed(done.stderr)
    assert done.exit_code == 2
    assert [sentence for sentence in expected if sentence not in told] == []
    assert told.endswith(" faults in all.")


@pytest.mark.parametrize(("file", "key"), [("config.yaml", "report: additions"), ("flame.yaml", "layout: flame bench")])
def test_a_repeated_key_is_named_with_both_lines(
    laboratory: Any, run_here: Any, squeezed: Any, file: str, key: str
) -> None:
    """A key that stands twice in a file is a fault: neither of its values is taken."""
    text = (laboratory.folder / file).read_text()
    first = text[: text.index(key)].count("\n") + 1
    laboratory.write(file, f"{text}{key}\n")

    done = run_here("check", None, laboratory)

    assert done.exit_code == 2
    name, line = key.partition(":")[0], text.count("\n") + 1
    assert f"{file}, line {line}, {name}: the key stands here again, first in line {first}." in squeezed(done.stderr)
