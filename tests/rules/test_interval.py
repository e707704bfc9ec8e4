"""The interval of extrapolation and read-back: the closed form against numerical inversion of the test itself."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from rules.interval import BlankTerm, Covariance, extrapolation, normal_quantile, read_back, student_t


def ends(excess, centre, scale):
    """Both ends of the set where `excess` is not positive, found outwards from its centre."""
    found = []
    for direction in (-1, 1):
        step = scale
        while excess(centre + direction * step) <= 0:
            step *= 2
        found.append(brentq(excess, centre, centre + direction * step, xtol=1e-15, rtol=8.9e-16, maxiter=500))
    return found


def single(**values):
    """Length-one arrays."""
    return {name: np.array([value], dtype=float) for name, value in values.items()}


cases = st.fixed_dictionaries(
    {
        "alpha": st.floats(-2, 10),
        "beta": st.floats(0.2, 5),
        "rel_alpha": st.floats(0.005, 0.4),
        "rel_beta": st.floats(0.002, 0.12),
        "corr": st.floats(-0.95, 0.3),
        "dof": st.integers(2, 12),
        "kappa": st.floats(0, 0.02),
        "u_blank": st.floats(0, 0.3),
        "g_alpha": st.floats(-5, -0.2),
        "g_beta": st.floats(-0.3, 0.3),
    }
)


@settings(max_examples=200, deadline=None)
@given(cases)
def test_closed_form_is_the_inverted_test(case):
    """Both ends solve the inequality with line, common factors and blank, where g is below 1."""
    a, b = case["alpha"], case["beta"]
    sa, sb = case["rel_alpha"], case["rel_beta"] * b
    covariance = single(aa=sa**2, ab=case["corr"] * sa * sb, bb=sb**2)
    t = float(student_t(0.95, np.array([case["dof"]]))[0])
    kappa, ub, ga, gb = case["kappa"], case["u_blank"], case["g_alpha"], case["g_beta"]
    g = (t * sb / b) ** 2 + kappa + (ub * gb / b) ** 2
    assume(g < 0.95)

    def excess(c):
        line = t**2 * (covariance["aa"][0] - 2 * c * covariance["ab"][0] + c**2 * covariance["bb"][0])
        return (a - c * b) ** 2 - line - kappa * b**2 * c**2 - ub**2 * (ga - c * gb) ** 2

    interval = extrapolation(
        np.array([a]),
        np.array([b]),
        Covariance(covariance["aa"], covariance["ab"], covariance["bb"]),
        np.array([t]),
        np.array([kappa]),
        BlankTerm(np.array([ub**2]), np.array([ga]), np.array([gb])),
    )

    low, high = ends(excess, a / b, sa / b)
    width = high - low
    assert interval.low[0] == pytest.approx(low, abs=1e-9 * width + 1e-12)
    assert interval.high[0] == pytest.approx(high, abs=1e-9 * width + 1e-12)
    assert interval.g[0] == pytest.approx(g, rel=1e-9)


@settings(max_examples=150, deadline=None)
@given(
    st.floats(0.5, 50),
    st.floats(-2, 2),
    st.floats(0.2, 5),
    st.floats(0.001, 0.1),
    st.floats(0.001, 0.1),
    st.floats(0.005, 0.05),
    st.floats(-0.95, 0.2),
    st.floats(0, 0.01),
)
def test_read_back_is_the_inverted_test(signal, a, b, s, sa, rel_b, corr, kappa):
    """Both ends of a read-back solve (y - a - b x)² = t²(s² + V_aa + 2 x V_ab + x² V_bb) + κ b² x²."""
    sb, t = rel_b * b, 2.776
    ab = corr * sa * sb

    def excess(x):
        return (signal - a - b * x) ** 2 - t**2 * (s**2 + sa**2 + 2 * x * ab + x**2 * sb**2) - kappa * b**2 * x**2

    interval = read_back(
        np.array([signal]),
        np.array([s**2]),
        np.array([a]),
        np.array([b]),
        Covariance(np.array([sa**2]), np.array([ab]), np.array([sb**2])),
        np.array([t]),
        np.array([kappa]),
    )

    low, high = ends(excess, (signal - a) / b, s / b)
    assert interval.low[0] == pytest.approx(low, abs=1e-9 * (high - low) + 1e-12)
    assert interval.high[0] == pytest.approx(high, abs=1e-9 * (high - low) + 1e-12)


@pytest.mark.parametrize(
    ("t", "kappa", "blank"),
    [(1.0, 0.0, 0.0), (0.1, 0.999, 0.0), (0.1, 0.0, 4.0)],
    ids=["line", "common factors", "blank"],
)
def test_no_bounds_where_g_reaches_one(t, kappa, blank):
    """Whatever takes g to 1 or beyond, line, common factors or blank, leaves NaN bounds and g itself."""
    interval = extrapolation(
        np.array([1.0]),
        np.array([1.0]),
        Covariance(np.array([0.5]), np.array([-0.1]), np.array([1.0])),
        np.array([t]),
        np.array([kappa]),
        BlankTerm(np.array([blank]), np.array([-1.0]), np.array([-0.5])),
    )

    assert interval.g[0] >= 1
    assert np.isnan(interval.low[0])
    assert np.isnan(interval.high[0])


def test_without_covariance_there_are_no_bounds():
    """An exact line leaves bounds and g NaN, not zero width."""
    nothing = np.array([np.nan])
    interval = extrapolation(
        np.array([1.0]),
        np.array([1.0]),
        Covariance(nothing, nothing, nothing),
        nothing,
        np.zeros(1),
        BlankTerm.absent(1),
    )

    assert np.isnan([interval.low[0], interval.high[0], interval.g[0]]).all()


def test_g_of_an_almost_exact_line_is_never_negative():
    """G keeps its digits far below the rounding of 1."""
    interval = extrapolation(
        np.array([1.0]),
        np.array([3.0]),
        Covariance(np.array([1e-20]), np.array([0.0]), np.array([9e-20])),
        np.array([1.0]),
        np.zeros(1),
        BlankTerm.absent(1),
    )

    assert interval.g[0] == pytest.approx(1e-20, rel=1e-12, abs=0)


def test_native_of_zero_has_an_interval_around_zero():
    """An intercept of exactly zero gives bounds of both signs."""
    interval = extrapolation(
        np.array([0.0]),
        np.array([1.0]),
        Covariance(np.array([0.01]), np.array([0.0]), np.array([0.0001])),
        np.array([2.0]),
        np.zeros(1),
        BlankTerm.absent(1),
    )

    assert interval.low[0] == pytest.approx(-interval.high[0])
    assert interval.high[0] == pytest.approx(0.2 / np.sqrt(1 - 0.0004))


def test_quantiles_are_those_of_tables():
    """t(0.975) is 12.706, 4.303 and 2.571 for 1, 2 and 5 degrees of freedom, the normal quantile 1.95996."""
    assert student_t(0.95, np.array([1, 2, 5])).tolist() == pytest.approx([12.7062, 4.30265, 2.57058], abs=5e-5)
    assert normal_quantile(0.95) == pytest.approx(1.959964, abs=1e-6)
    assert np.isnan(student_t(0.95, np.array([0]))[0])
    assert student_t(0.95, np.array([np.inf]))[0] == pytest.approx(1.959964, abs=1e-6)
