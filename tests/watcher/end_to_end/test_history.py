"""`history` and `status` show what came of exports over time, the same numbers as the result files."""

from __future__ import annotations

import json
from statistics import median
from typing import Any

import pytest
from click.testing import CliRunner

from watcher.commands import main


def ask(laboratory: Any, *arguments: str) -> Any:
    """Run a command of the real command line in this process."""
    return CliRunner().invoke(main, [*arguments, "--config", str(laboratory.folder / "config.yaml")])


@pytest.fixture(scope="module")
def past(make_laboratory: Any) -> Any:
    """A laboratory with five samples of known recovery in two exports, one of which failed."""
    made = make_laboratory()
    found = {"SED-1": 1.0, "SED-2": 0.95, "SED-3": 0.9}
    made.export(
        "FL-1.csv", *made.standards(), *(r for s, share in found.items() for r in made.additions(s, 3.0, share))
    )
    made.export("FL-2.csv", *made.standards(), *made.additions("RIV-1", 3.0, 0.85), *made.additions("RIV-2", 3.0, 0.6))
    assert made.run("once").returncode in (0, 1)
    return made


def test_the_figures_of_a_month_are_those_of_the_result_files(past: Any) -> None:
    """Median, lowest and highest recovery and slope agree with the CSVs, which are written by other code."""
    rows = [row for name in ("FL-1.csv", "FL-2.csv") for row in past.csv_rows(name)]

    (month,) = json.loads(ask(past, "history", "--json").stdout)["months"]

    assert (month["analyte"], month["series"]) == ("Zn", 5)
    assert month["failed"] == sum(row["verdict"] == "fail" for row in rows) == 1
    for column, key in (("recovery", "recovery"), ("slope", "slope")):
        values = [float(row[column]) for row in rows]
        assert month[key]["n"] == 5
        assert month[key]["median"] == pytest.approx(median(values))
        assert (month[key]["low"], month[key]["high"]) == pytest.approx((min(values), max(values)))


@pytest.mark.parametrize(("limit", "would"), [("80 to 120 %", 1), ("92 to 108 %", 3), ("50 to 150 %", 0), ("off", 0)])
def test_another_limit_is_tried_on_what_was_judged(past: Any, limit: str, would: int) -> None:
    """Recoveries of 100, 95, 90, 85 and 60 % are counted against limits that were not in force."""
    (tried,) = json.loads(ask(past, "history", "--json", "--limit", f"recovery={limit}").stdout)["limits"]

    assert (tried["judged"], tried["would_fail"]) == (5, would)


def test_only_what_was_asked_for_is_shown(past: Any) -> None:
    """An analyte that was not measured and a month to come have no series, and the table says so."""
    for wish in (("--analyte", "Cu"), ("--since", "2999-01")):
        assert "No series in the records" in " ".join(ask(past, "history", *wish).stdout.split())
    assert max(map(len, ask(past, "history", "--limit", "recovery=80 to 120 %").stdout.splitlines())) <= 80


def test_a_limit_that_is_none_is_refused(past: Any) -> None:
    """A misspelt check or an unreadable limit ends with 2 and says what is expected."""
    for limit in ("recover=80 to 120 %", "recovery=80-120", "bracket=80 to 120 %"):
        done = ask(past, "history", "--limit", limit)
        assert done.exit_code == 2
        assert "expected" in done.stderr


def test_a_broken_record_is_named_and_the_rest_is_shown(past: Any) -> None:
    """A record that was damaged is left out, by name, and the exit code says that something could not be read."""
    (folder,) = past.folder.glob("results/*/")
    broken = folder / "FL-9.csv.r1.json"
    broken.write_text("{")
    try:
        done = ask(past, "history", "--json")
    finally:
        broken.unlink()

    assert done.exit_code == 2
    assert "FL-9.csv.r1.json" in "".join(done.stderr.split())
    assert json.loads(done.stdout)["months"][0]["series"] == 5


def test_status_lists_open_failures_and_the_latest_exports(past: Any) -> None:
    """The failing sample stands there with its export, the newest export first, for people and for machines."""
    shown, plain = ask(past, "status"), json.loads(ask(past, "status", "--json").stdout)

    assert "Open failures: 1" in shown.stdout
    assert "RIV-2 Zn" in shown.stdout
    assert max(map(len, shown.stdout.splitlines())) <= 80
    assert [each["sample"] for each in plain["heartbeat"]["open_failures"]] == ["RIV-2"]
    assert {each["name"] for each in plain["heartbeat"]["latest"]} == {"FL-1.csv", "FL-2.csv"}
    assert (plain["running"], plain["exit"]) == (False, 2)
