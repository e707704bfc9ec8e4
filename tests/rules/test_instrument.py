"""Concentrations that the instrument reports: they stand in where there are no standards, and are named as such."""

from __future__ import annotations

import numpy as np
import pytest

from rules.case import Reported
from rules.method import Bench, Measure, Stock
from watcher.record import result_by

ADDED, READ = [0.0, 2.0, 4.0, 6.0], [1.9, 3.6, 5.1, 6.9]


def rows(read=READ, added=ADDED, **more):
    """A sample with additions in mg/L, its signals, and the concentrations that the instrument reports."""
    return [
        {
            "sample": "RIV-17",
            "role": "spiked" if a else "unspiked",
            "signal": 1000 * x + 7,
            "concentration": x,
            **({"added": a} if a else {}),
            **more,
        }
        for a, x in zip(added, read, strict=True)
    ]


def test_the_instruments_own_reading_is_the_calibrations_result(outcomes):
    """The unspiked concentration is reported as it is, named as the instrument's, without an uncertainty of its own."""
    out = outcomes(rows(), report="calibration")

    assert out.reported(0).value[0] == pytest.approx(1.9)
    assert result_by(out.case, 0, Reported(int(out.case.reported[0]))) == "instrument"
    assert np.isnan(out.reported(0).expanded_uncertainty[0])
    assert out.text(0) == "1.90 mg/L (uncertainty absent: the instrument states none with its concentrations)"


def test_recoveries_are_differences_of_concentrations_over_additions(outcomes):
    """R_j = 100 (x_j - x_0)/c_j, and the slope recovery is the slope of concentrations on additions (numpy.polyfit)."""
    out = outcomes(rows(), report="calibration")

    recoveries = out.case.recoveries
    assert recoveries.each[1:] == pytest.approx([100 * (x - 1.9) / c for x, c in zip(READ[1:], ADDED[1:], strict=True)])
    assert recoveries.slope[0] == pytest.approx(100 * np.polyfit(ADDED, READ, 1)[0])
    assert np.isfinite(recoveries.slope_u[0])


def test_the_additions_line_is_fitted_to_signals_not_to_concentrations(outcomes):
    """The additions' result rests on the signals alone."""
    out = outcomes(rows())

    b, a = np.polyfit(ADDED, [1000 * x + 7 for x in READ], 1)
    assert out.reported(0).value[0] == pytest.approx(a / b)


def test_standards_in_the_export_go_first(outcomes, make_standards):
    """Where an analyte has standards, the instrument's concentrations are not used for it."""
    standards = make_standards([0, 5, 10], [7.0, 2507.0, 5007.0])

    out = outcomes([*standards, *rows()], report="calibration")

    assert not out.case.back.instrument[0]
    assert out.reported(0).value[0] == pytest.approx(1900 / 500)


BENCH = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))


@pytest.mark.parametrize(("refers", "native"), [("vessel", 9.5), ("sample", 1.9)])
def test_what_a_concentration_refers_to_is_declared(outcomes, refers, native):
    """A concentration of the vessel is divided by the dilution, one of the sample is the result."""
    out = outcomes(
        rows(), report="calibration", bench=BENCH, added_refers_to="vessel",
        concentration_refers_to=refers,
    )  # fmt: skip

    assert out.reported(0).value[0] == pytest.approx(native)


def test_a_native_that_is_diluted_by_its_addition_is_taken_off_diluted(outcomes):
    """10 mL with 1 and 2 mL of 44 mg/L on top: R_j = 100 (x_j - φ x_0)/c_j with φ = 10/(10 + v), c = 44 v/(10 + v).

    By hand: φ = 10/11 and 10/12, c = 4 and 7.3333 mg/L, x_0 = 2.2 mg/L, so R_1 = 100 (5.6 - 2.0)/4 = 90 % and
    R_2 = 100 (9.1667 - 1.8333)/7.3333 = 100 %.
    """
    read, volumes = [2.2, 5.6, 55 / 6], [0.0, 1.0, 2.0]
    given = [
        {
            "sample": "ROOF-7",
            "role": "spiked" if v else "unspiked",
            "signal": 1000 * x,
            "concentration": x,
            **({"spike_volume": v} if v else {}),
        }
        for v, x in zip(volumes, read, strict=True)
    ]

    out = outcomes(
        given, report="calibration", bench=Bench(aliquot=Measure(10, "mL")),
        stocks=(Stock("ZN-44", {"Zn": Measure(44, "mg/L")}),), concentration_refers_to="vessel",
    )  # fmt: skip

    assert out.case.faults == {}
    assert out.case.recoveries.each[1:] == pytest.approx([90.0, 100.0])


def test_what_a_concentration_refers_to_is_never_assumed(outcomes):
    """Where vessel and sample differ and nothing is declared, the inputs fail and say what to state."""
    out = outcomes(rows(), report="calibration", bench=BENCH, added_refers_to="vessel")

    assert out.case.faults[0][0] == (
        "line 2: nothing says whether the instrument's concentration refers to the vessel or to the sample: state "
        "concentration_refers_to: vessel, or sample"
    )


def test_a_missing_concentration_is_a_fault_of_its_series(outcomes):
    """A solution without concentration among others that have one fails its own series, with its line."""
    given = rows()
    given[2]["concentration"] = np.nan
    other = [row | {"sample": "SED-12"} for row in rows()]

    out = outcomes([*given, *other], report="calibration")

    assert out.case.faults == {
        0: [
            (
                "line 4: the instrument gives no concentration here and gives it for other solutions: correct the "
                "export or measure it again"
            )
        ]
    }
    assert out.reported(1).value[1] == pytest.approx(1.9)


def test_replicates_of_a_solution_are_averaged_and_units_converted(outcomes):
    """Concentrations of replicate rows enter by their mean, in the unit of the result."""
    given = [
        row | {"concentration": (1000 * row["concentration"] + d, "µg/L"), "replicate": r, "label": f"V{k}"}
        for k, row in enumerate(rows())
        for r, d in ((1.0, -100), (2.0, 100))
    ]

    out = outcomes(given, report="calibration")

    assert out.reported(0).value[0] == pytest.approx(1.9)


def test_without_any_concentration_there_is_no_recovery(outcomes):
    """Nothing independent of the additions, no recovery."""
    out = outcomes([row | {"concentration": np.nan} for row in rows()])

    assert np.isnan(out.check("recovery").value[0])
