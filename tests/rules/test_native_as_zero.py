"""A native that is not detected counts as measured, or as zero where the laboratory says so (contract practice)."""

from __future__ import annotations

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from rules.method import AnalyteRules, Measure

LOD = {"Zn": AnalyteRules(lod=Measure(0.4, "mg/L"))}
#: y = 0.02 + 0.1 x
NOMINAL, READ = [0, 5, 10], [0.02, 0.52, 1.02]


@pytest.fixture(scope="session")
def recovered(outcomes, make_standards, make_additions):
    """Recovery of 2 mg/L on a native whose signal is given."""

    def made(native, **method):
        rows = make_standards(NOMINAL, READ) + make_additions([native, 0.215], [0, 2.0])
        return outcomes(rows, blank="none", analytes=LOD, **method).case.recoveries.each[1]

    return made


def test_as_measured_takes_the_native_off_whatever_it_is(recovered):
    """x_0 = -0.05 mg/L is taken off: R = 100 (0.215 - 0.015)/(0.1 x 2)."""
    assert recovered(0.015) == pytest.approx(100 * (0.215 - 0.015) / 0.2)


def test_as_zero_takes_nothing_off_below_the_decision_limit(recovered):
    """x_0 = 0.15 mg/L lies below L_C = 0.2 mg/L: R = 100 (0.215 - 0.02)/(0.1 x 2)."""
    assert recovered(0.035, undetected_native="as zero") == pytest.approx(100 * (0.215 - 0.02) / 0.2)


def test_as_zero_leaves_a_detected_native_alone(recovered):
    """x_0 = 0.3 mg/L lies above L_C and is taken off."""
    assert recovered(0.05, undetected_native="as zero") == pytest.approx(100 * (0.215 - 0.05) / 0.2)


def test_as_zero_keeps_the_blank_of_the_preparation(outcomes, make_standards, make_additions, make_blanks):
    """A blank that belongs to the aliquot stays in the vessel without analyte: y_0 = a + y_B = 0.02 + 0.01.

    x_0 = (0.035 - 0.02 - 0.01)/0.1 = 0.05 mg/L lies below L_C: R = 100 (0.225 - 0.03)/(0.1 x 2).
    """
    rows = make_standards(NOMINAL, READ) + make_blanks([0.01, 0.01]) + make_additions([0.035, 0.225], [0, 2.0])

    out = outcomes(rows, blank="preparation", analytes=LOD, undetected_native="as zero")

    assert out.case.recoveries.each[1] == pytest.approx(100 * (0.225 - 0.03) / 0.2)


@given(native=st.floats(-0.1, 0.3))
def test_whatever_the_native_only_what_is_below_the_limit_counts_as_zero(recovered, native):
    """By hand for any native: nothing is taken off below L_C = 0.2 mg/L, the whole above it."""
    y_0 = 0.02 + 0.1 * native
    assume(abs(native - 0.2) > 1e-6)

    off = 0.02 if native < 0.2 else y_0
    assert recovered(y_0, undetected_native="as zero") == pytest.approx(100 * (0.215 - off) / 0.2)
