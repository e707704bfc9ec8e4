"""Recoveries and matrix effect against hand computation; nothing is shown where nothing independent was measured."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.method import Bench, Measure, Stock

#: y = 0.02 + 0.1 x, exact
STANDARDS = ([0, 5, 10], [0.02, 0.52, 1.02])


def test_recovery_of_one_addition_by_hand(outcomes, make_standards, make_additions):
    """Y from 0.22 to 0.57 with 5 mg/L added and b = 0.1: 100 · 0.35 / 0.5 = 70 %."""
    out = outcomes(make_standards(*STANDARDS) + make_additions([0.22, 0.57], [0, 5.0]), report="calibration")

    recoveries = out.case.recoveries
    assert recoveries.each[1] == pytest.approx(70)
    assert out.check("recovery").value[0] == pytest.approx(70)
    assert recoveries.matrix_effect[0] == pytest.approx(-30)


def test_dilution_of_the_native_is_taken_out(outcomes, make_standards, make_additions):
    """10 mL with 10 mL of 8 mg/L on top: φ = ½, c = 4 mg/L; y by hand for 90 % recovery gives 90 %."""
    y0 = 0.02 + 0.1 * 6
    y1 = 0.02 + 0.1 * (6 * 0.5 + 0.9 * 4)
    rows = make_standards(*STANDARDS) + make_additions([y0, y1], [0, 10.0], key="spike_volume")
    stocks = (Stock("ZN-8", {"Zn": Measure(8, "mg/L")}),)

    out = outcomes(rows, report="calibration", bench=Bench(aliquot=Measure(10, "mL")), stocks=stocks)

    assert out.case.recoveries.each[1] == pytest.approx(90)


def test_slope_recovery_is_the_headline_from_two_levels_on(outcomes, make_standards, make_additions):
    """Two levels: 100 β/b with β by an independent fit; the single recoveries stay as diagnostics."""
    signals, added = [0.22, 0.40, 0.61, 0.78], [0, 2.0, 4.0, 6.0]

    out = outcomes(make_standards(*STANDARDS) + make_additions(signals, added), report="calibration")

    beta = np.polyfit(added, signals, 1)[0]
    recoveries = out.case.recoveries
    assert out.check("recovery").value[0] == pytest.approx(100 * beta / 0.1)
    assert recoveries.each[1:].tolist() == pytest.approx([90, 97.5, 280 / 3])
    assert np.isnan(recoveries.each[0])


def test_of_two_preparations_the_worse_is_the_headline(outcomes, make_standards, make_additions):
    """Two vessels at one level recover 80 and 110 %: the headline is 80 %."""
    out = outcomes(make_standards(*STANDARDS) + make_additions([0.22, 0.62, 0.77], [0, 5.0, 5.0]))

    assert out.check("recovery").value[0] == pytest.approx(80)


def test_of_two_preparations_the_one_outside_the_limits_decides(outcomes, make_standards, make_additions, check):
    """With limits 80 to 110 % a recovery of 112 % fails beside one of 83 %, which lies farther from 100."""
    from rules.limits import parse_check_limits  # noqa: PLC0415

    rows = make_standards(*STANDARDS) + make_additions([0.22, 0.635, 0.78], [0, 5.0, 5.0])

    out = outcomes(rows, report="calibration", limits={"recovery": parse_check_limits("80 to 110 %")})

    assert check(out, "recovery").value[0] == pytest.approx(112)
    assert out.verdict_of(0).word == "fail"


def test_without_a_calibration_no_recovery_is_shown(outcomes, make_additions, check):
    """The additions' own line recovers 100 % always, so neither recovery nor matrix effect has a number."""
    out = outcomes(make_additions([0.22, 0.40, 0.61, 0.78], [0, 2.0, 4.0, 6.0]))

    recoveries = out.case.recoveries
    assert np.isnan(recoveries.each).all()
    assert np.isnan(out.check("recovery").value[0])
    for name in ("recovery", "matrix_effect", "spike_size"):
        assert np.isnan(check(out, name).value[0])
        assert check(out, name).outcome[0] == 0


def test_a_native_below_zero_enters_as_measured(outcomes, make_standards, make_additions):
    """A native that reads -0.5 mg/L is subtracted as such, not as zero."""
    rows = make_standards(*STANDARDS) + make_additions([-0.03, 0.47], [0, 5.0])

    out = outcomes(rows, report="calibration")

    assert out.case.back.results.value[0] == pytest.approx(-0.5)
    assert out.case.recoveries.each[1] == pytest.approx(100)


@given(st.floats(0.3, 2.0), st.floats(0.1, 5))
def test_recovery_is_the_ratio_of_sensitivities(outcomes, make_standards, make_additions, ratio, native):
    """Signals made with a slope of `ratio` times the calibration's recover just that, and the effect is its excess."""
    added = [0, 1.0, 2.0]
    signals = [0.02 + 0.1 * (native + ratio * a) for a in added]

    out = outcomes(make_standards(*STANDARDS) + make_additions(signals, added), report="calibration")

    assert out.case.recoveries.slope[0] == pytest.approx(100 * ratio)
    assert out.case.recoveries.each[1:].tolist() == pytest.approx([100 * ratio] * 2)
    assert out.case.recoveries.matrix_effect[0] == pytest.approx(100 * (ratio - 1), abs=1e-9)
