"""`explain` shows what became of every line, label and cell, for people and for machines."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

import pytest
from click.testing import CliRunner

from watcher import explanation_json
from watcher.commands import main

if TYPE_CHECKING:
    from pathlib import Path


def explained(laboratory: Any, export: Path, *options: str) -> Any:
    """Run `explain` in this process."""
    config = str(laboratory.folder / "config.yaml")
    return CliRunner().invoke(main, ["explain", str(export), "--config", config, *options])


@pytest.fixture
def broken_cell(laboratory: Any) -> Path:
    """An export in which one reading of a spiked vial cannot be read, and one label stands alone."""
    rows = [*laboratory.standards(), *laboratory.additions("RIV-17")]
    at = next(number for number, row in enumerate(rows) if "RIV-17 +A2" in row)
    cells = rows[at].split(";")
    cells[3] = "0.19x4"
    rows[at] = ";".join(cells)
    laboratory.export("FL-0601.csv", *rows)
    return laboratory.folder / "exports" / "FL-0601.csv"


def test_a_cell_that_cannot_be_read_is_explained(laboratory: Any, broken_cell: Path, squeezed: Any) -> None:
    """Line, column, cell, what was expected, what follows and what to do stand there, and the code is 1."""
    line = next(at for at, text in enumerate(broken_cell.read_text().splitlines(), 1) if "0.19x4" in text)

    done = explained(laboratory, broken_cell)

    assert done.exit_code == 1, done.output
    told = squeezed(done.stdout)
    assert f"0.19x4 R2 {line} cannot be read" in told
    assert f"line {line}, column 'R2': expected a number with decimal point, got '0.19x4'." in told
    assert "Its series is not evaluated. Correct the export, or explain such cells in the layout" in told


def test_a_broken_row_is_explained_by_its_line(laboratory: Any, squeezed: Any) -> None:
    """A row of another length refuses the export with line, expected and found, and what to do; the code is 2."""
    laboratory.export("FL-0602.csv", *laboratory.standards(), "RIV-19;Zn;0.1")
    export = laboratory.folder / "exports" / "FL-0602.csv"
    line = len(export.read_text().splitlines())

    done = explained(laboratory, export)
    plain = json.loads(explained(laboratory, export, "--json").stdout)

    assert done.exit_code == plain["exit"] == 2
    assert f"FL-0602.csv, line {line}: expected 5 fields as in the header, got 3" in squeezed(done.stderr)
    assert plain["refused"]["line"] == line
    assert plain["refused"]["remedy"].startswith("Correct the row")


def test_every_line_has_a_fate(laboratory: Any, broken_cell: Path) -> None:
    """With --lines each line of the export stands there once, with its number, its fate and the reason."""
    plain = json.loads(explained(laboratory, broken_cell, "--json", "--lines").stdout)
    shown = explained(laboratory, broken_cell, "--lines").stdout

    fates = plain["line_fates"]
    assert [one["line"] for one in fates] == list(range(1, plain["lines"]["total"] + 1))
    counts = {fate: sum(one["fate"] == fate for one in fates) for fate in ("read", "fault", "set aside")}
    assert counts["fault"] == plain["lines"]["faults"] == 1
    assert counts["read"] + counts["fault"] == plain["lines"]["read"]
    assert counts["set aside"] == plain["lines"]["set_aside"]
    assert all(one["why"] for one in fates)
    assert ["1", "set", "aside", "header"] in [line.split() for line in shown.splitlines()]


def test_the_json_has_the_keys_that_are_documented(laboratory: Any, broken_cell: Path) -> None:
    """Every key of the documentation is there, read or refused, and no other."""
    documented = {
        line.split()[0]
        for line in (explanation_json.__doc__ or "").splitlines()
        if line.startswith("    ") and line[4:5].isalpha()
    }
    laboratory.export("XR-0603.csv", "nothing")

    read = json.loads(explained(laboratory, broken_cell, "--json").stdout)
    unclaimed = json.loads(explained(laboratory, laboratory.folder / "exports" / "XR-0603.csv", "--json").stdout)

    assert set(read) == set(unclaimed) == documented
    assert read["line_fates"] is None
    assert unclaimed["refused"]["sentence"].startswith("XR-0603.csv: no layout claims it")


def test_series_and_labels_are_told(laboratory: Any, broken_cell: Path) -> None:
    """Every distinct label has its role, sample and level, and each series the solutions that it was made of."""
    plain = json.loads(explained(laboratory, broken_cell, "--json").stdout)

    labels = {label["label"]: (label["role"], label["sample"], label["level"]) for label in plain["labels"]}
    assert labels["RIV-17 +A2"] == ("spiked", "RIV-17", "A2")
    (series,) = plain["series"]
    assert (series["sample"], series["unspiked"], series["spiked"]) == ("RIV-17", 1, 3)
    assert len(series["lines"]) == 4
    assert plain["cells"] == [
        {"cell": "0.19x4", "column": "R2", "taken_for": "cannot be read", "lines": series["lines"][2:3]}
    ]


def test_a_mail_is_shown_with_its_address(laboratory: Any, unused_port: int) -> None:
    """Each mail that would go stands there with the addresses of the settings, its subject and its text."""
    laboratory.mail_to(unused_port)
    laboratory.export("FL-0604.csv", *laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.6))
    export = laboratory.folder / "exports" / "FL-0604.csv"

    plain = json.loads(explained(laboratory, export, "--json").stdout)
    shown = explained(laboratory, export).stdout

    (letter,) = plain["mails"]
    assert letter["to"] == ["lead@example"]
    assert letter["subject"].startswith("FAIL RIV-17 Zn")
    assert "\nDO\n" in letter["text"]
    assert "To: lead@example\nSubject: FAIL RIV-17 Zn" in shown


def test_explain_fits_a_terminal(laboratory: Any, broken_cell: Path) -> None:
    """No line is wider than 80 columns, and nothing in it acts on a terminal."""
    shown = explained(laboratory, broken_cell, "--lines").stdout

    assert max(map(len, shown.splitlines())) <= 80
    assert "\x1b" not in shown
