"""The interval of a ratio of slopes against numerical inversion, and what it does where the lower slope is unsure."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from rules import ratio


def slope(value, relative, t):
    """A slope with its relative standard uncertainty."""
    return ratio.Slope(np.array([value]), np.array([(relative * value) ** 2]), np.array([t]))


slopes = st.builds(slope, st.floats(0.05, 20), st.floats(1e-3, 0.05), st.floats(1.96, 6))


@given(upper=slopes, lower=slopes, common=st.floats(0, 0.01))
def test_bounds_solve_the_inequality(upper, lower, common):
    """Both bounds are the roots of (β - ρb)² = t²V_ββ + ρ²t²V_bb + κβ², found numerically."""

    def excess(rho):
        apart = (upper.value[0] - rho * lower.value[0]) ** 2
        allowed = upper.t[0] ** 2 * upper.variance[0] + rho**2 * lower.t[0] ** 2 * lower.variance[0]
        return (apart - allowed - common * upper.value[0] ** 2) / upper.value[0] ** 2

    found = ratio.interval(upper, lower, np.array([common]), ratio.Shared.nothing(1))

    centre = upper.value[0] / lower.value[0]
    assert found.low[0] == pytest.approx(brentq(excess, -centre, centre, xtol=1e-15), rel=1e-8, abs=1e-12)
    assert found.high[0] == pytest.approx(brentq(excess, centre, 4 * centre, xtol=1e-15), rel=1e-8)


def test_two_exact_slopes_leave_a_point():
    """Without any uncertainty the interval is the ratio itself."""
    found = ratio.interval(slope(0.18, 0.0, 2.0), slope(0.2, 0.0, 2.0), np.zeros(1), ratio.Shared.nothing(1))

    assert (found.low[0], found.high[0], found.g[0]) == pytest.approx((0.9, 0.9, 0.0))


def test_by_hand_with_an_exact_calibration():
    """β = 1.8 ± t·u = 2·0.09 over an exact b = 2: 0.81 to 0.99."""
    found = ratio.interval(slope(1.8, 0.05, 2.0), slope(2.0, 0.0, 3.0), np.zeros(1), ratio.Shared.nothing(1))

    assert (found.low[0], found.high[0]) == pytest.approx((0.81, 0.99))


def test_each_slope_brings_its_own_t():
    """A t twice as large widens as an uncertainty twice as large does, on either side."""
    for upper, lower in (((0.02, 4.0), (0.01, 2.0)), ((0.01, 2.0), (0.02, 4.0))):
        one = ratio.interval(slope(1.0, *upper), slope(1.0, *lower), np.zeros(1), ratio.Shared.nothing(1))
        other = ratio.interval(
            slope(1.0, 2 * upper[0], upper[1] / 2), slope(1.0, *lower), np.zeros(1), ratio.Shared.nothing(1)
        )

        assert (one.low[0], one.high[0]) == pytest.approx((other.low[0], other.high[0]))
    swapped = ratio.interval(slope(1.0, 0.02, 2.0), slope(1.0, 0.01, 4.0), np.zeros(1), ratio.Shared.nothing(1))
    plain = ratio.interval(slope(1.0, 0.02, 2.0), slope(1.0, 0.01, 2.0), np.zeros(1), ratio.Shared.nothing(1))
    assert swapped.high[0] > plain.high[0]


def test_a_lower_slope_that_may_be_zero_gives_no_finite_interval():
    """Where t·u reaches the calibration's slope (g ≥ 1) both bounds are absent, and its neighbour keeps its own."""
    upper = ratio.Slope(np.ones(2), np.full(2, 1e-4), np.full(2, 2.0))
    lower = ratio.Slope(np.ones(2), np.array([0.3, 1e-4]), np.full(2, 2.0))

    found = ratio.interval(upper, lower, np.zeros(2), ratio.Shared.nothing(2))

    assert found.g.tolist() == pytest.approx([1.2, 4e-4])
    assert np.isnan([found.low[0], found.high[0]]).all()
    assert found.low[1] < 1 < found.high[1]


def test_a_common_uncertainty_widens_both_sides():
    """The stock's share pushes low and high apart; none leaves them."""
    upper, lower = slope(1.0, 0.02, 2.0), slope(1.0, 0.01, 2.0)

    bare, full = (
        ratio.interval(upper, lower, np.array([common]), ratio.Shared.nothing(1)) for common in (0.0, 0.02**2)
    )

    assert full.low[0] < bare.low[0] < bare.high[0] < full.high[0]


@given(
    upper=slopes,
    lower=slopes,
    moves=st.floats(-0.2, 0.2),
    intercept=st.floats(1e-4, 0.02),
    together=st.floats(-0.9, 0.9),
)
def test_bounds_with_a_shared_intercept_solve_the_inequality(upper, lower, moves, intercept, together):
    """Where β moves with the calibration's intercept both bounds are the roots of the joint inequality."""
    variance = (intercept * lower.value) ** 2
    both = together * np.sqrt(variance * lower.variance)
    shared = ratio.Shared(np.array([moves]), variance, both)

    def excess(rho):
        apart = (upper.value[0] - rho * lower.value[0]) ** 2
        joint = moves**2 * variance[0] - 2 * rho * moves * both[0] + rho**2 * lower.variance[0]
        allowed = upper.t[0] ** 2 * upper.variance[0] + lower.t[0] ** 2 * joint
        return (apart - allowed) / upper.value[0] ** 2

    found = ratio.interval(upper, lower, np.zeros(1), shared)

    centre = upper.value[0] / lower.value[0]
    assert excess(found.low[0]) == pytest.approx(0, abs=1e-9)
    assert excess(found.high[0]) == pytest.approx(0, abs=1e-9)
    assert found.low[0] < centre < found.high[0]
