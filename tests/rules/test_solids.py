"""Solids: portions weighed, digested, made up to a volume; results are contents, mass per mass."""

from __future__ import annotations

import pytest

from rules.method import Bench, Measure, Stock

STOCK = (Stock("ZN-5", {"Zn": Measure(5, "mg/L")}),)
BENCH = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))


def rows_of(make_additions, masses, content, slope=0.2):
    """Exact signals of portions of one solid with `content` in mg/kg, digested to 100 mL, 10 mL of it to 50 mL."""
    volumes = [0, 5.0, 10.0, 15.0]
    signals = [
        slope * (content * mass / 100 * 10 / 50 + 5 * v / 50) for mass, v in zip(masses, volumes, strict=True)
    ]  # mg/kg · g/mL = mg/L
    rows = make_additions(signals, volumes, key="spike_volume", digest_volume=100.0)
    return [row | {"mass": (mass, "g")} for row, mass in zip(rows, masses, strict=True)]


@pytest.mark.parametrize(
    ("masses", "unit", "content"),
    [([0.5] * 4, "mg/kg", 420.0), ([0.48, 0.52, 0.51, 0.49], "mg/kg", 420.0), ([0.5] * 4, "µg/kg", 420_000.0)],
    ids=["equal portions", "differing portions", "another unit"],
)
def test_content_of_a_solid(outcomes, make_additions, masses, unit, content):
    """C = α/β with f = m V_a / (V_digest V) gives back 420 mg/kg, also from portions of differing mass."""
    out = outcomes(rows_of(make_additions, masses, 420.0), stocks=STOCK, bench=BENCH, result_unit=unit)

    assert out.case.additions.value[0] == pytest.approx(content)


def test_content_by_calibration_and_its_recovery(outcomes, make_additions, make_standards):
    """Read back in mg/L, a solid's content is x / f; slope recovery compares in the vessel and is 80 % here."""
    rows = make_standards([0, 1, 2, 3], [0.0, 0.25, 0.50, 0.75]) + rows_of(make_additions, [0.5] * 4, 420.0)

    out = outcomes(rows, stocks=STOCK, bench=BENCH, result_unit="mg/kg", report="calibration")

    assert out.case.back.results.value[0] == pytest.approx(0.8 * 420)
    assert out.check("recovery").value[0] == pytest.approx(80)


def test_tolerances_of_mass_and_digest_are_common(outcomes, make_additions):
    """A mass known to ±1 % and a digest volume to ±2 % add (1/√3)² + (2/√3)² %² to the relative u."""
    rows = rows_of(make_additions, [0.5] * 4, 420.0)
    for row, noise in zip(rows, (1e-3, -1e-3, 1e-3, -1e-3), strict=True):
        row["signal"] += noise
    tolerances = {"mass": Measure(1, "%"), "digest_volume": Measure(2, "%")}
    stated = Bench(aliquot=BENCH.aliquot, made_up_to=BENCH.made_up_to, tolerances=tolerances)

    bare = outcomes(rows, stocks=STOCK, bench=BENCH, result_unit="mg/kg").case.additions
    full = outcomes(rows, stocks=STOCK, bench=stated, result_unit="mg/kg").case.additions

    added = (0.01**2 + 0.02**2) / 3 * bare.value[0] ** 2
    assert full.standard_uncertainty[0] ** 2 - bare.standard_uncertainty[0] ** 2 == pytest.approx(added)


def test_a_portion_without_mass_fails_its_series(outcomes, make_additions):
    """Where results are contents, a missing mass is a fault with line and remedy, never a liquid."""
    rows = rows_of(make_additions, [0.5] * 4, 420.0)
    del rows[1]["mass"]

    out = outcomes(rows, stocks=STOCK, bench=BENCH, result_unit="mg/kg")

    assert out.verdict_of(0).word == "fail"
    assert out.case.faults[0] == [
        "line 3: results in mg/kg need mass above 0, got nothing: map mass in the layout, or correct the export"
    ]
