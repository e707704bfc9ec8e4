"""Samples and analytes that nothing was added to: reported and judged by their batch, never by a recovery."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable

PANEL = r"""layout: panel
claims: {file: 'MX-*.csv'}
separator: ','
columns:
  label: Solution
unfold:
  pattern: '^(?P<analyte>[A-Z][a-z]?) (?P<channel>\d+\.\d+)$'
labels:
  - {like: 'CAL {nominal}', role: standard}
  - {like: '{sample}/{level}', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
#: Signal of 1 mg/L in the vessel.
SENSITIVITY = {"Zn": 1000.0, "Fe": 4000.0}


def panel(native: dict[str, float], *, standards: bool) -> str:
    """A wide export of one spiked sample, in which only Zn was added, by 2.5 mg/L a level."""
    rows = ["Solution,Zn 206.200,Fe 259.940"]
    scatter = (1.0, -2.0, 0.5, 1.5)
    for number, nominal in enumerate((0, 1, 2, 3) if standards else ()):
        rows.append(f"CAL {nominal}," + ",".join(f"{s * nominal + 50 + scatter[number]}" for s in SENSITIVITY.values()))
    for number, label in enumerate(("SED-14", "SED-14/A1", "SED-14/A2", "SED-14/A3")):
        content = {"Zn": native["Zn"] + 2.5 * number, "Fe": native["Fe"]}
        signals = [s * 0.2 * content[name] + 50 + scatter[number] for name, s in SENSITIVITY.items()]
        rows.append(",".join([label, *(f"{signal:.2f}" for signal in signals)]))
    return "\n".join(rows) + "\n"


@pytest.fixture(scope="module")
def evaluated(make_laboratory: Callable[[], Any]) -> Any:
    """A laboratory after `once` over ordinary samples with and without calibration, and wide exports."""
    laboratory = make_laboratory()
    laboratory.write("panel.yaml", PANEL)
    laboratory.change("config.yaml", "[flame.yaml]", "[flame.yaml, panel.yaml]")
    ordinary = [laboratory.row("ROOF-7", 0.11), laboratory.row("ROOF-8", 0.22)]
    laboratory.export("FL-0701.csv", *laboratory.standards(), *ordinary, *laboratory.additions("SED-12"))
    laboratory.export("FL-0702.csv", *ordinary)
    drifted = [laboratory.row("CHK 1", 0.15), *ordinary]
    laboratory.export("FL-0703.csv", *laboratory.standards(), *drifted)
    laboratory.write("exports/MX-0704.csv", panel({"Zn": 3.0, "Fe": 6.0}, standards=True))
    laboratory.write("exports/MX-0705.csv", panel({"Zn": 3.0, "Fe": 6.0}, standards=False))
    laboratory.done = laboratory.run("once")
    return laboratory


def test_ordinary_samples_are_read_back_although_additions_are_reported(evaluated: Any) -> None:
    """A sample without spikes is `not spiked` and reports the calibration's concentration with its uncertainty."""
    series = evaluated.series("FL-0701.csv")

    for name, expected in (("ROOF-7 Zn", 0.11), ("ROOF-8 Zn", 0.22)):
        one = series[name]
        assert one["verdict"] == "not spiked"
        assert one["result"]["by"] == "calibration"
        # 10 mL in 50 mL: the sample holds five times what the vessel holds
        assert one["result"]["value"] == pytest.approx(5 * expected / 0.184, rel=0.01)
        assert one["result"]["low"] < one["result"]["value"] < one["result"]["high"]
        assert one["additions_result"] is None
        assert one["recoveries"] == []
    assert series["SED-12 Zn"]["result"]["by"] == "additions"
    assert series["SED-12 Zn"]["verdict"] == "pass"


def test_without_a_calibration_there_is_no_number(evaluated: Any) -> None:
    """An ordinary sample without calibration stays `not spiked`, has no number, and says why."""
    (first, second) = evaluated.record("FL-0702.csv")["series"]

    for one in (first, second):
        assert one["verdict"] == "not spiked"
        assert one["result"]["value"] is None
        assert "calibration" in one["result"]["text"]


def test_an_ordinary_sample_is_judged_by_its_batch(evaluated: Any) -> None:
    """A check standard that does not hold fails the ordinary samples of its run."""
    verdicts = {name: one["verdict"] for name, one in evaluated.series("FL-0703.csv").items()}

    assert verdicts == {"ROOF-7 Zn": "fail", "ROOF-8 Zn": "fail"}


@pytest.mark.parametrize("export", ["MX-0704.csv", "MX-0705.csv"])
def test_an_analyte_that_no_stock_contains_is_not_judged_for_recovery(evaluated: Any, export: str) -> None:
    """In a wide export the spiked analyte is judged; the one that no stock contains was not spiked."""
    series = evaluated.series(export)

    iron = {check["check"]: check["outcome"] for check in series["SED-14 Fe"]["checks"]}
    assert series["SED-14 Zn"]["verdict"] == "pass"
    assert series["SED-14 Zn"]["result"]["value"] == pytest.approx(3.0, abs=0.3)
    assert series["SED-14 Fe"]["verdict"] == "not spiked"
    assert series["SED-14 Fe"]["recoveries"] == []
    assert series["SED-14 Fe"]["fit"] is None
    assert {iron[name] for name in ("recovery", "levels", "slope_certainty", "addition_size")} == {"not evaluated"}


def test_an_analyte_that_was_not_added_is_read_from_all_its_vessels(evaluated: Any) -> None:
    """The result of the analyte that was not spiked rests on every vessel of the sample, spiked with others or not."""
    iron = evaluated.series("MX-0704.csv")["SED-14 Fe"]

    assert iron["result"]["value"] == pytest.approx(6.0, rel=0.01)
    assert [one["label"] for one in iron["solutions"]] == ["SED-14", "SED-14/A1", "SED-14/A2", "SED-14/A3"]
    assert {one["added"] for one in iron["solutions"]} <= {0.0, None}
