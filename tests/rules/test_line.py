"""Lines through many series: published fits, exact fractions and another library as independent oracles."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import f as f_distribution

from rules import line
from rules.interval import Covariance, extrapolation, student_t

finite = st.floats(-100, 100, allow_nan=False)


def one(x, y, weights=None):
    """Fit a single series."""
    x, y = np.asarray(x, float), np.asarray(y, float)
    return line.fit(x, y, np.ones(len(x)) if weights is None else weights, line.Segments.of_sizes([len(x)]))


def fieller(x, y):
    """Fit and interval of one series with equal weights."""
    fit = one(x, y)
    covariance = Covariance(fit.var_intercept, fit.covariance, fit.var_slope)
    from rules.interval import BlankTerm  # noqa: PLC0415

    t = student_t(0.95, fit.dof)
    return fit, extrapolation(fit.intercept, fit.slope, covariance, t, np.zeros(1), BlankTerm.absent(1))


def exact(x, y, w):
    """Every statistic of a weighted line in exact fractions; square roots are left to the caller."""
    x, y, w = ([Fraction(float(v)) for v in column] for column in (x, y, w))
    n, total = len(x), sum(w)
    mx = sum(a * b for a, b in zip(w, x, strict=True)) / total
    my = sum(a * b for a, b in zip(w, y, strict=True)) / total
    sxx = sum(c * (a - mx) ** 2 for a, c in zip(x, w, strict=True))
    sxy = sum(c * (a - mx) * (b - my) for a, b, c in zip(x, y, w, strict=True))
    syy = sum(c * (b - my) ** 2 for b, c in zip(y, w, strict=True))
    slope = sxy / sxx
    intercept = my - slope * mx
    ss = sum(c * (b - intercept - slope * a) ** 2 for a, b, c in zip(x, y, w, strict=True))
    variance = ss / (n - 2)
    return {
        "slope": slope,
        "intercept": intercept,
        "residual_variance": variance,
        "var_slope": variance / sxx,
        "covariance": -variance * mx / sxx,
        "var_intercept": variance * (1 / total + mx**2 / sxx),
        "r_squared": sxy**2 / (sxx * syy),
    }


@pytest.mark.parametrize(
    ("quantity", "certified"),
    # NIST Statistical Reference Datasets, Norris; certified values, read
    [
        ("intercept", -0.262323073774029),
        ("slope", 1.00211681802045),
        ("sd_intercept", 0.232818234301152),
        ("sd_slope", 0.000429796848199937),
        ("residual_sd", 0.884796396144373),
        ("r_squared", 0.999993745883712),
    ],
)
def test_certified_straight_line_is_met_to_nine_digits(reference, quantity, certified):
    """Norris comes out with at least nine correct digits in every certified quantity."""
    data = reference("nist_norris")

    fit = one(data["x"], data["y"])

    got = {
        "intercept": fit.intercept[0],
        "slope": fit.slope[0],
        "sd_intercept": np.sqrt(fit.var_intercept[0]),
        "sd_slope": np.sqrt(fit.var_slope[0]),
        "residual_sd": fit.residual_sd[0],
        "r_squared": fit.correlation[0] ** 2,
    }[quantity]
    assert certified == pytest.approx(got, rel=1e-9)


def test_quadratic_term_of_the_load_cell_has_the_certified_f(reference):
    """F of the quadratic term equals (B2 / sd(B2))² of NIST's certified Pontius values, and p is that of F(1, 37)."""
    data = reference("nist_pontius")
    certified = (-3.16081871345029e-15 / 4.86652849992036e-17) ** 2  # 4218.525, read

    fit = one(data["x"], data["y"])
    segments, w = line.Segments.of_sizes([40]), np.ones(40)
    dx = data["x"] - fit.mean_x
    f, dof = line.quadratic_f(dx, fit.residuals, w, np.array([np.sum(fit.residuals**2)]), segments)

    assert certified == pytest.approx(f[0], rel=1e-9)
    assert dof.tolist() == [37]
    assert f_distribution.sf(certified, 1, 37) == pytest.approx(fit.curvature_p[0], rel=1e-6)


@pytest.mark.parametrize(
    ("name", "slope", "sd_slope", "residual_sd"),
    # NIST Statistical Reference Datasets, NoInt1 and NoInt2; slopes read, residual SD recalled
    [
        ("NoInt1", 2.07438016528926, 0.0165289256198347, 3.56753034006338),
        ("NoInt2", 0.727272727272727, 0.0420827318078432, 0.369274472937998),
    ],
)
def test_line_through_zero_follows_from_each_point_and_its_negative(reference, name, slope, sd_slope, residual_sd):
    """Each point entered with its negative gives intercept 0, the certified slope and SD, the slope's SD over √2."""
    data = reference("nist_through_zero")
    x, y = data["x"][data["set"] == name], data["y"][data["set"] == name]

    fit = one(np.concatenate((x, -x)), np.concatenate((y, -y)))

    assert fit.intercept[0] == pytest.approx(0, abs=1e-12 * np.abs(y).max())
    assert slope == pytest.approx(fit.slope[0], rel=1e-12)
    # 2n points with n - 1 … 2n - 2 degrees of freedom: the same variance, twice the sum of squares of x
    assert residual_sd == pytest.approx(fit.residual_sd[0], rel=1e-12)
    assert sd_slope / np.sqrt(2) == pytest.approx(np.sqrt(fit.var_slope[0]), rel=1e-12)


def test_cadmium_calibration_has_the_published_line(reference):
    """QUAM 2012 example A5: slope 0.241 ± 0.005, intercept 0.0087 ± 0.0029, correlation of both -0.87038."""
    data = reference("cadmium_calibration")

    fit = one(data["mg_per_L"], data["absorbance"])

    assert fit.slope[0] == pytest.approx(0.2410, abs=5e-5)
    assert np.sqrt(fit.var_slope[0]) == pytest.approx(0.0050, abs=5e-5)
    assert fit.intercept[0] == pytest.approx(0.0087, abs=5e-5)
    assert np.sqrt(fit.var_intercept[0]) == pytest.approx(0.0029, abs=5e-5)
    both = fit.covariance[0] / np.sqrt(fit.var_intercept[0] * fit.var_slope[0])
    assert both == pytest.approx(-0.87038, abs=1e-5)
    assert fit.residual_sd[0] == pytest.approx(0.005486, abs=5e-7)  # recalled
    assert fit.correlation[0] == pytest.approx(0.997, abs=5e-4)  # recalled


SETS = {
    "silver": ("silver_additions", lambda d: (d["added_ug_per_mL"], d["absorbance"]), 1.0),
    "skoog": ("iron_flasks", lambda d: (d["mL_std_11.1ppm"], d["absorbance"]), 11.1 / 10),
    "sr": ("strontium_additions", lambda d: (d["added_ng_per_mL"], d["signal"]), 1.0),
    "ascorbic": ("ascorbic_acid_in_place", lambda d: (279 * d["V_s_mL"] / 50, d["I"] * (50 + d["V_s_mL"]) / 50), 1),
    "varvol": ("variable_volume", lambda d: (600 * d["V_std_mL"] / 5, d["S"] * (5 + d["V_std_mL"]) / 5), 1.0),
    "gum": ("aluminium_in_gum", lambda d: (d["V_std_mL"], d["signal"]), 300 / 25 * 100 / 3.12),
}


@pytest.mark.parametrize("name", SETS)
def test_fieller_limits_of_published_sets_are_met(reference, name):
    """Result, extrapolation s, g and Fieller's limits of six published sets agree to 1e-8 with their recomputation."""
    file, columns, factor = SETS[name]
    sets = reference("fieller_sets")
    row = {key: column[sets["set"] == name][0] for key, column in sets.items()}

    fit, interval = fieller(*columns(reference(file)))

    c = fit.intercept[0] / fit.slope[0]
    s = np.sqrt(fit.var_intercept[0] - 2 * c * fit.covariance[0] + c**2 * fit.var_slope[0]) / fit.slope[0]
    assert row["n"] == fit.n[0]
    assert row["result"] == pytest.approx(c * factor, rel=1e-9)
    assert row["s_extrapolation"] == pytest.approx(s * factor, rel=1e-8)
    assert row["fieller_lo"] == pytest.approx(interval.low[0] * factor, rel=1e-8)
    assert row["fieller_hi"] == pytest.approx(interval.high[0] * factor, rel=1e-8)
    assert row["g"] == pytest.approx(interval.g[0], rel=1e-8)


def test_variable_volume_line_with_equal_weights_is_the_manuals(reference):
    """Equal weights give the printed 12.3 of the manual, in full 12.2625, with 12.0934 to 12.4333."""
    fit, interval = fieller(*SETS["varvol"][1](reference("variable_volume")))

    assert fit.intercept[0] / fit.slope[0] == pytest.approx(12.2625, abs=5e-5)
    assert (interval.low[0], interval.high[0]) == pytest.approx((12.0934, 12.4333), abs=5e-5)


points = st.integers(3, 9).flatmap(
    lambda n: st.tuples(
        st.lists(finite, min_size=n, max_size=n, unique_by=lambda v: round(v, 1)),
        st.lists(finite, min_size=n, max_size=n),
        st.lists(st.floats(0.1, 10), min_size=n, max_size=n),
    )
)


@settings(max_examples=150, deadline=None)
@given(points)
def test_line_agrees_with_another_library(data):
    """Slope, intercept, covariance and residual SD of random weighted series agree with statsmodels to 1e-9."""
    x, y, w = (np.array(column) for column in data)
    theirs = sm.WLS(y, sm.add_constant(x, has_constant="add"), weights=w).fit()
    scale = np.abs(y).max() + 1e-3

    fit = one(x, y, w)

    assert theirs.params[1] == pytest.approx(fit.slope[0], rel=1e-9, abs=1e-9 * scale)
    assert theirs.params[0] == pytest.approx(fit.intercept[0], rel=1e-9, abs=1e-8 * scale)
    assert np.sqrt(theirs.scale) == pytest.approx(fit.residual_sd[0], rel=1e-9, abs=1e-9 * scale)
    covariance = theirs.cov_params()
    for got, expected in (
        (fit.var_intercept, covariance[0, 0]),
        (fit.covariance, covariance[0, 1]),
        (fit.var_slope, covariance[1, 1]),
    ):
        assert expected == pytest.approx(got[0], rel=1e-8, abs=1e-9 * scale**2)


def test_quadratic_test_agrees_with_another_library():
    """P of the quadratic term is the one of the squared term in a weighted parabola fitted by statsmodels."""
    random = np.random.default_rng(11)
    for n in (4, 5, 7):
        x, w = random.uniform(0, 10, n), random.uniform(0.2, 3, n)
        y = 2 + 3 * x + 0.05 * x**2 + random.normal(0, 0.4, n)
        theirs = sm.WLS(y, np.column_stack((np.ones(n), x, x * x)), weights=w).fit()

        assert theirs.pvalues[2] == pytest.approx(one(x, y, w).curvature_p[0], rel=1e-7)


@pytest.mark.parametrize(
    ("offset_x", "offset_y", "tolerance"),
    [(0.0, 0.0, 1e-11), (1e5, 0.0, 1e-9), (0.0, 1e5, 1e-9), (1e5, 1e5, 1e-9)],
)
def test_every_statistic_agrees_with_exact_fractions(offset_x, offset_y, tolerance):
    """Against exact fractions every statistic holds 11 digits, and 9 with offsets of 10⁵ in signal or addition."""
    random = np.random.default_rng(7)
    for n in (3, 4, 6, 12):
        # dyadic numbers, so that the offset itself costs the input no digit
        x = np.round(random.uniform(0, 8, n) * 1024) / 1024 + offset_x
        y = np.round((3 * (x - offset_x) + random.normal(0, 1, n)) * 1024) / 1024 + offset_y
        w = np.round(random.uniform(0.25, 4, n) * 64) / 64
        truth = exact(x, y, w)

        fit = one(x, y, w)

        got = {
            "slope": fit.slope,
            "intercept": fit.intercept,
            "residual_variance": fit.residual_sd**2,
            "var_slope": fit.var_slope,
            "covariance": fit.covariance,
            "var_intercept": fit.var_intercept,
            "r_squared": fit.correlation**2,
        }
        for name, value in truth.items():
            assert float(value) == pytest.approx(got[name][0], rel=tolerance), name


@settings(max_examples=60, deadline=None)
@given(st.lists(points, min_size=2, max_size=6))
def test_many_series_at_once_equal_one_by_one(many):
    """A series gets the same line whether it is fitted alone or among others, to 1e-12."""
    sizes = [len(x) for x, _, _ in many]
    x, y, w = (np.concatenate([np.array(s[i]) for s in many]) for i in range(3))

    together = line.fit(x, y, w, line.Segments.of_sizes(sizes))

    names = ("slope", "intercept", "var_intercept", "covariance", "var_slope", "residual_sd", "correlation")
    for i, (xi, yi, wi) in enumerate(many):
        alone = one(xi, yi, np.array(wi))
        for name in (*names, "curvature_p"):
            a, b = getattr(alone, name)[0], getattr(together, name)[i]
            # a residual sum of squares that is rounding only has no digits to agree in
            assert a == pytest.approx(b, rel=1e-12, abs=1e-12 * max(np.abs(yi).max(), 1), nan_ok=True), name


def test_two_points_show_no_scatter_and_no_correlation():
    """An exact line has a slope and an intercept, and neither covariance, residual SD, r nor curvature."""
    fit = one([0, 2], [1, 5])

    assert (fit.slope[0], fit.intercept[0], fit.dof[0]) == (2, 1, 0)
    for missing in (fit.var_intercept, fit.covariance, fit.var_slope, fit.residual_sd, fit.correlation):
        assert np.isnan(missing[0])
    assert np.isnan(fit.curvature_p[0])
    assert not fit.scatter[0]


def test_series_without_two_distinct_additions_has_no_line():
    """Equal additions give NaN for that series and leave its neighbour alone."""
    fit = line.fit(
        np.array([3.0, 3, 3, 0, 1, 2]),
        np.array([1.0, 2, 3, 1, 2, 3.5]),
        np.ones(6),
        line.Segments.of_sizes([3, 3]),
    )

    assert np.isnan(fit.slope[0])
    assert fit.slope[1] == pytest.approx(1.25)


def test_a_bend_needs_three_distinct_additions_and_four_points():
    """With two levels or three points the quadratic term cannot be tested, whatever the scatter."""
    assert np.isnan(one([0, 0, 5, 5], [1, 1.1, 3, 3.2]).curvature_p[0])
    assert np.isnan(one([0, 1, 2], [1, 2, 2.5]).curvature_p[0])
    assert np.isfinite(one([0, 1, 2, 2], [1, 2, 2.5, 2.6]).curvature_p[0])


def test_an_exact_parabola_is_bent_beyond_doubt():
    """Where a parabola leaves no residual the probability of a line is zero."""
    assert one([0, 1, 2, 3, 4], [0, 1, 4, 9, 16]).curvature_p[0] == pytest.approx(0, abs=1e-12)


def test_points_on_a_line_show_no_scatter():
    """Residuals below 1e-12 of the largest signal are the resolution of the data, not scatter."""
    fit = one([0, 1, 2, 3], [0.1, 0.3, 0.5, 0.7])

    assert not fit.scatter[0]
    assert np.isnan(fit.curvature_p[0])


def test_no_series_give_no_lines():
    """An export without additions is fitted to empty arrays, without a warning."""
    nothing = np.zeros(0)
    fit = line.fit(nothing, nothing, nothing, line.Segments.of_sizes([]))

    assert len(fit.slope) == 0
