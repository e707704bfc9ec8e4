"""A calibration, the samples and the closing check standard in exports of their own, in whatever order they arrive."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

TIMED = """\
layout: timed bench
claims: {file: 'TB-*.csv'}
separator: ';'
columns:
  label: Label
  analyte: {constant: Zn}
  signal: Reading
  measured_at: {from: Time, format: '%Y-%m-%d %H:%M'}
labels:
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: '{sample} +{level}', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
STANDARDS = [("STD 0", 0.0003), ("STD 1", 0.1836), ("STD 2", 0.3678), ("STD 3", 0.5523)]
EXPORTS = {
    "TB-1.csv": ("08", [*STANDARDS, ("CHK 1", 0.185)]),
    "TB-2.csv": ("10", [("SED-12", 0.1107), ("SED-12 +A1", 0.2020), ("SED-12 +A2", 0.2942), ("SED-12 +A3", 0.3867)]),
    "TB-3.csv": ("12", [("CHK 1", 0.186)]),
}


def land(laboratory: Any, name: str) -> None:
    """Let one of the exports land."""
    hour, rows = EXPORTS[name]
    lines = [f"{label};{signal};2026-03-02 {hour}:{10 + k}" for k, (label, signal) in enumerate(rows)]
    laboratory.write(f"exports/{name}", "\n".join(["Label;Reading;Time", *lines]) + "\n")


def latest(laboratory: Any, export: str) -> Any:
    """The record of an export's newest revision."""
    records = laboratory.records()
    return records[max(name for name in records if name.startswith(f"{export}.r"))]


@pytest.fixture
def laboratory(make_laboratory: Callable[[], Any]) -> Any:
    """A laboratory whose calibrations and check standards may lie in other exports."""
    made = make_laboratory()
    made.write("timed.yaml", TIMED)
    made.change("config.yaml", "[flame.yaml]", "[timed.yaml]")
    made.change("config.yaml", "report: additions", "report: calibration")
    made.write("config.yaml", (made.folder / "config.yaml").read_text() + "pair_within: 6 h\ncalibration_within: 6 h\n")
    return made


@pytest.mark.parametrize("order", ["321", *(pytest.param(each, marks=pytest.mark.proof) for each in ("123", "213"))])
def test_the_order_of_arrival_does_not_matter(laboratory: Any, order: str) -> None:
    """In any order the samples end with the same numbers, the bracket closed, and what was lent named by its hash."""
    codes = []
    for number in order:
        land(laboratory, f"TB-{number}.csv")
        codes.append(laboratory.run("once").returncode)

    record = latest(laboratory, "TB-2.csv")
    (series,) = record["series"]
    # (0.1107 - a)/b by numpy.polyfit of the standards, times 5 for 10 mL in 50 mL
    assert series["result"]["value"] == pytest.approx(3.0086, abs=0.0005)
    assert series["verdict"] == "pass", [check["sentence"] for check in series["checks"]]
    assert [(other["name"], other["lends"]) for other in record["others"]] == [
        ("TB-1.csv", ["calibration of Zn"]),
        ("TB-3.csv", ["check standard of Zn"]),
    ]
    assert record["others"][0]["sha256"] == latest(laboratory, "TB-1.csv")["export"]["sha256"]
    assert codes[-1] == 0


def test_an_export_that_nothing_new_reaches_keeps_its_results(laboratory: Any) -> None:
    """A further export that lends nothing makes no new revision of those that borrowed before."""
    for name in EXPORTS:
        land(laboratory, name)
        laboratory.run("once")
    before = latest(laboratory, "TB-2.csv")

    laboratory.write("exports/TB-4.csv", "Label;Reading;Time\nROOF-7;0.1;2026-03-02 12:40\n")
    laboratory.run("once")

    assert latest(laboratory, "TB-2.csv") == before


def test_revisions_follow_each_other(laboratory: Any) -> None:
    """Each time something more is lent the next revision is written, and the earlier ones stay."""
    for name in ("TB-2.csv", "TB-1.csv", "TB-3.csv"):
        land(laboratory, name)
        laboratory.run("once")

    found = sorted(path.name for path in (laboratory.folder / "results").rglob("TB-2.csv.r*.json"))
    assert found == ["TB-2.csv.r1.json", "TB-2.csv.r2.json", "TB-2.csv.r3.json"]
