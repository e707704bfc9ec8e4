"""Dilutions of an unspiked sample: the shift of the baseline, and predilutions brought to one base."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st


def diluted(factors, signals, **more):
    """Unspiked solutions of one sample at several predilutions."""
    return [
        {"sample": "BRN-3", "role": "unspiked", "signal": s, "predilution": float(p), **more}
        for p, s in zip(factors, signals, strict=True)
    ]


def spiked(added, signals, **more):
    """Additions to the undiluted sample."""
    return [
        {"sample": "BRN-3", "role": "spiked", "signal": s, "added": float(a), **more}
        for a, s in zip(added, signals, strict=True)
    ]


@pytest.mark.parametrize("blank", ["none", "subtract", "preparation"])
@pytest.mark.parametrize(
    ("factors", "signals"),
    [([1, 5], [0.61, 0.21]), ([1, 2, 5], [0.6, 0.36, 0.17]), ([1, 2, 5, 10], [0.6, 0.3, 0.2, 0.1])],
)
def test_the_shift_is_the_intercept_of_signal_on_dilution(outcomes, make_blanks, factors, signals, blank):
    """δ and the difference of the most diluted solution against statsmodels' line through the net signals."""
    out = outcomes(diluted(factors, signals) + make_blanks([0.02, 0.03]), blank=blank, report="additions")

    f = 1 / np.array(factors, dtype=float)
    off = {"none": 0.0, "subtract": 0.025, "preparation": 0.025 * f}[blank]
    delta, slope = sm.OLS(np.array(signals) - off, sm.add_constant(f)).fit().params
    found = out.case.dilutions
    # an unspiked sample is reported from the calibration, of which there is none: only a blank in every vessel counts
    assert found.shift[0] == pytest.approx(delta, rel=1e-9, abs=1e-12)
    low, high = delta + slope * f.min(), delta + slope * f.max()
    assert found.difference[0] == pytest.approx(
        100 * (low / f.min() - high / f.max()) / (high / f.max()), rel=1e-8, abs=1e-9
    )


@given(shift=st.floats(-0.1, 0.1))
def test_a_constant_added_to_all_signals_is_found(outcomes, shift):
    """The additions alone move by shift/β (method, 12.5) and cannot show it; the dilution test returns it.

    The sample holds 2 mg/L and β is 0.1 L/mg.
    """
    additions = spiked([1, 2, 3], [0.3 + shift, 0.4 + shift, 0.5 + shift])

    alone = outcomes(diluted([1], [0.2 + shift]) + additions)
    out = outcomes(diluted([1, 5], [0.2 + shift, 0.04 + shift]) + additions)

    assert alone.case.additions.value[0] == pytest.approx(2 + shift / 0.1, rel=1e-9)
    assert np.isnan(alone.case.dilutions.shift[0])
    assert out.case.dilutions.shift[0] == pytest.approx(shift, abs=1e-12)


def test_predilutions_of_one_sample_are_brought_to_one_base(outcomes):
    """The line in units of the sample by statsmodels' weighted least squares, weights 1/P², gives the same result."""
    signals, added = [0.41, 0.602, 0.81, 1.0], [0.0, 2.0, 4.0, 6.0]
    rows = diluted([1, 4], [signals[0], 0.104]) + spiked(added[1:], signals[1:])

    out = outcomes(rows)

    f = np.array([1, 0.25, 1, 1, 1])
    y = np.array([signals[0], 0.104, *signals[1:]]) / f
    x = np.array([0.0, 0.0, *added[1:]])
    fit = sm.WLS(y, sm.add_constant(x), weights=f**2).fit()
    assert out.case.faults == {}
    assert out.case.additions.value[0] == pytest.approx(fit.params[0] / fit.params[1], rel=1e-9)


def test_additions_that_differ_in_predilution_are_a_fault(outcomes):
    """One line needs one predilution of its additions."""
    rows = diluted([1], [0.2]) + spiked([1, 2], [0.3, 0.4])
    rows[2]["predilution"] = 2.0

    out = outcomes(rows)

    assert out.case.faults[0] == ["the predilution differs within the series: one line needs one predilution"]


def test_read_backs_of_several_dilutions_are_one_result(outcomes, make_standards):
    """Signals of 1 in 1 and 1 in 5 on a calibration without intercept give the content that both agree on."""
    out = outcomes(
        make_standards([0, 5, 10], [0.0, 0.5, 1.0]) + diluted([1, 5], [0.5, 0.1]), report="calibration", blank="none"
    )

    assert out.reported(0).value[0] == pytest.approx(5.0)
