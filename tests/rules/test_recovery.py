"""Recoveries and matrix effect against hand computation; nothing is shown where nothing independent was measured."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import t as student

from rules.limits import parse_check_limits
from rules.method import Bench, Measure, Preparation, Stock

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


#: Not exact: a residual SD of 0.0105 over two degrees of freedom.
UNSURE = ([0, 2, 4, 6], [0.03, 0.205, 0.43, 0.615])


def calibration_by_numpy():
    """Intercept, slope, their covariance and s² of the unsure standards, by matrices."""
    x, y = (np.array(column, dtype=float) for column in UNSURE)
    design = np.column_stack((np.ones(4), x))
    estimate = np.linalg.lstsq(design, y, rcond=None)[0]
    s2 = np.sum((y - design @ estimate) ** 2) / 2
    return estimate, s2 * np.linalg.inv(design.T @ design), s2


def moved_by(function, values, covariance):
    """Variance of a function of values by central differences and their covariance."""
    gradient = []
    for i in range(len(values)):
        step = np.zeros(len(values))
        step[i] = 1e-6
        gradient.append((function(values + step) - function(values - step)) / 2e-6)
    return float(np.array(gradient) @ covariance @ np.array(gradient))


def test_uncertainty_of_each_recovery_is_joint(outcomes, make_standards, make_additions):
    """U(R_j) with standard on top is that of numerical derivatives by y_j, y_0, intercept and slope, stock added."""
    signals, volumes = [0.22, 0.37, 0.49, 0.66], [0, 2.0, 4.0, 6.0]
    rows = make_standards(*UNSURE) + make_additions(signals, volumes, key="spike_volume")
    stocks = (Stock("ZN-20", {"Zn": Measure(20, "mg/L")}, relative_uncertainty=0.01),)
    f, y = 10 / (10 + np.array(volumes)), np.array(signals)
    c = 20 * np.array(volumes) / (10 + np.array(volumes))
    line = np.polyfit(c / f, y / f, 1, w=f)
    s2 = np.sum((f * (y / f - np.polyval(line, c / f))) ** 2) / 2
    (a, b), v, _ = calibration_by_numpy()
    joint = np.zeros((4, 4))
    joint[0, 0] = joint[1, 1] = s2
    joint[2:, 2:] = v

    found = outcomes(rows, bench=Bench(aliquot=Measure(10, "mL")), stocks=stocks).case.recoveries

    t = student.ppf(0.975, 2)
    for j in (1, 2, 3):

        def recovery(p, j=j):
            return 100 * (p[0] - f[j] * p[1] - p[2] * (1 - f[j])) / (p[3] * c[j])

        at = np.array([y[j], y[0], a, b])
        by_signals = moved_by(recovery, at, joint)
        by_stock = (0.01 * recovery(at)) ** 2
        assert found.each[j] == pytest.approx(recovery(at))
        assert found.each_u[j] == pytest.approx(sqrt(by_signals + by_stock), rel=1e-6)
        # two degrees of freedom of the line and of the calibration alike, the normal quantile for the stock
        expanded = sqrt(t**2 * by_signals + 1.959963984540054**2 * by_stock)
        assert found.each_expanded[j] == pytest.approx(expanded, rel=1e-6)
    assert np.isnan(found.each_u[0])
    assert np.isnan(found.each_expanded[0])


def test_uncertainty_of_the_slope_recovery_by_hand(outcomes, make_standards, make_additions):
    """Its u is 100 (β/b) √(V_ββ/β² + V_bb/b² + u_stock²), and its interval is wider on the side of a small slope b."""
    signals, volumes = [0.22, 0.41, 0.60, 0.83], [0, 1.0, 2.0, 3.0]
    rows = make_standards(*UNSURE) + make_additions(signals, volumes, key="spike_volume")
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(20, "mL"))
    stocks = (Stock("ZN-20", {"Zn": Measure(20, "mg/L")}, relative_uncertainty=0.01),)
    # c = 20 v / 20
    (beta, alpha), c = np.polyfit(volumes, signals, 1), np.array(volumes)
    s2 = np.sum((np.array(signals) - alpha - beta * c) ** 2) / 2
    v_beta = s2 / np.sum((c - c.mean()) ** 2)
    (_, b), v, _ = calibration_by_numpy()

    found = outcomes(rows, bench=bench, stocks=stocks).case.recoveries

    assert found.slope[0] == pytest.approx(100 * beta / b)
    expected = 100 * beta / b * sqrt(v_beta / beta**2 + v[1, 1] / b**2 + 0.01**2)
    assert found.slope_u[0] == pytest.approx(expected)
    low, high = 100 * found.slope_interval.low[0], 100 * found.slope_interval.high[0]
    assert high - found.slope[0] > found.slope[0] - low > 0
    narrow = found.equivalence_interval
    assert low < 100 * narrow.low[0] < found.slope[0] < 100 * narrow.high[0] < high


def test_tolerances_of_spike_and_vessel_count_and_the_aliquot_cancels(outcomes, make_standards, make_additions):
    """Half-widths of spike volume and vessel add a/√3 of each to u(R); the aliquot dilutes both vessels alike."""
    rows = make_standards(*UNSURE) + make_additions([0.22, 0.41, 0.60, 0.83], [0, 1.0, 2.0, 3.0], key="spike_volume")
    stocks = (Stock("ZN-20", {"Zn": Measure(20, "mg/L")}),)

    def slope_u(**tolerances):
        bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(20, "mL"), tolerances=tolerances)
        found = outcomes(rows, bench=bench, stocks=stocks).case.recoveries
        return found.slope_u[0] / found.slope[0]

    bare = slope_u()
    # an absolute tolerance weighs most on the smallest volume
    assert slope_u(spike_volume=Measure(0.05, "mL")) ** 2 - bare**2 == pytest.approx((0.05 / 1) ** 2 / 3)
    assert slope_u(made_up_to=Measure(0.5, "mL")) ** 2 - bare**2 == pytest.approx((0.5 / 20) ** 2 / 3)
    assert slope_u(aliquot=Measure(2, "mL")) == bare


def test_single_addition_takes_the_scatter_of_the_standards(outcomes, make_standards, make_additions):
    """Two solutions have no residual: u(R) is √(2 s²)/c of the calibration with its slope's, t(2) for all."""
    rows = make_standards(*UNSURE) + make_additions([0.22, 0.57], [0, 3.0])
    (_, b), v, s2 = calibration_by_numpy()
    recovered = 100 * 0.35 / (b * 3)
    expected = sqrt((100 / (b * 3)) ** 2 * 2 * s2 + recovered**2 * v[1, 1] / b**2)

    found = outcomes(rows).case.recoveries

    assert found.each_u[1] == pytest.approx(expected)
    assert found.each_expanded[1] == pytest.approx(student.ppf(0.975, 2) * expected)
    assert found.slope_u[0] == pytest.approx(expected)


def test_single_addition_takes_known_scatter_of_preparations_first(outcomes, make_standards, make_additions):
    """With preparation: rsd 2 %, 12 dof that is the scatter, not the standards'."""
    rows = make_standards(*UNSURE) + make_additions([0.22, 0.57], [0, 3.0])
    (_, b), v, _ = calibration_by_numpy()
    recovered = 100 * 0.35 / (b * 3)
    scatter = (100 / (b * 3)) ** 2 * 0.02**2 * (0.22**2 + 0.57**2)
    slope = recovered**2 * v[1, 1] / b**2

    found = outcomes(rows, bench=Bench(preparation=Preparation(rsd=0.02, dof=12))).case.recoveries

    assert found.each_u[1] == pytest.approx(sqrt(scatter + slope))
    expanded = sqrt(student.ppf(0.975, 12) ** 2 * scatter + student.ppf(0.975, 2) ** 2 * slope)
    assert found.each_expanded[1] == pytest.approx(expanded)


def test_scatter_follows_the_variance_model(outcomes, make_standards, make_additions):
    """Under `proportional` the shares of y_j and y_0 go with their fitted signals, not with one common s."""
    signals, added = [0.22, 0.41, 0.60, 0.83], [0, 2.0, 4.0, 6.0]
    rows = make_standards([0, 2, 4, 6], [0.0, 0.2, 0.4, 0.6]) + make_additions(signals, added)

    out = outcomes(rows, variance="proportional")

    fits, b = out.case.fits, 0.1
    s2 = fits.lines.residual_sd[0] ** 2 * fits.fitted_gross**2
    # the standards lie on their line, so their share is rounding
    assert out.case.calibrations.lines.residual_sd[0] < 1e-12
    scattered = make_standards([0, 2, 4, 6], [0.0, 0.2000001, 0.3999999, 0.6]) + make_additions(signals, added)
    found = outcomes(scattered, variance="proportional").case.recoveries
    for j in (1, 2, 3):
        assert found.each_u[j] == pytest.approx(100 / (b * added[j]) * sqrt(s2[j] + s2[0]), rel=1e-4)


def test_standards_without_scatter_leave_a_recovery_without_uncertainty(outcomes, make_standards, make_additions):
    """Where the calibration's uncertainty is unknown a recovery has a value and no u: absent, not zero."""
    out = outcomes(make_standards(*STANDARDS) + make_additions([0.22, 0.41, 0.60, 0.83], [0, 2.0, 4.0, 6.0]))

    found = out.case.recoveries
    assert np.isfinite(found.slope[0])
    assert np.isnan([found.slope_u[0], found.slope_interval.low[0], found.each_u[1], found.each_expanded[1]]).all()
    assert "uncertainty" not in out.check("recovery").sentence(0)


CLOSE = ([0, 2, 4, 6, 8, 10], [0.020, 0.221, 0.419, 0.621, 0.820, 1.019])


def test_a_limit_inside_the_uncertainty_is_said(outcomes, make_standards, make_additions):
    """A slope recovery of 78 % whose interval holds the limit of 75 % passes and says so; a sharp one only passes."""
    blurred = make_standards(*CLOSE) + make_additions([0.22, 0.40, 0.52, 0.70], [0, 2.0, 4.0, 6.0])
    sharp = make_standards(*CLOSE) + make_additions([0.22, 0.400, 0.579, 0.760], [0, 2.0, 4.0, 6.0])

    doubtful, plain = (outcomes(rows, report="calibration") for rows in (blurred, sharp))

    span = doubtful.case.recoveries.slope_interval
    assert 100 * span.low[0] < 75 < 100 * span.high[0]
    sentence = doubtful.check("recovery").sentence(0)
    assert sentence.startswith("slope recovery 78 % (the limit 75 % lies inside its uncertainty, ")
    assert sentence.endswith(f"{100 * span.low[0]:.1f} to {100 * span.high[0]:.1f} %)")
    assert plain.check("recovery").sentence(0) == "slope recovery 90 %"


def test_a_failed_single_recovery_says_its_doubt_too(outcomes, make_standards, make_additions):
    """A single recovery of 74 % fails against 75 %, with the limit inside R ± U named."""
    rows = make_standards(*UNSURE) + make_additions([0.22, 0.44], [0, 3.0])

    out = outcomes(rows, report="calibration")

    found = out.case.recoveries
    half = found.each_expanded[1]
    sentence = out.check("recovery").sentence(0)
    assert sentence.startswith(
        "recovery 74 %: less of the added Zn is found than was added (the limit 75 % lies inside"
    )
    assert sentence.endswith(f", {found.each[1] - half:.1f} to {found.each[1] + half:.0f} %)")


@pytest.mark.parametrize(
    ("signals", "words"),
    [
        ([0.22, 0.418, 0.621, 0.819], "no effect beyond -20 to 20 %"),
        ([0.22, 0.36, 0.62, 0.72], "reaches beyond -20 to 20 %"),
    ],
    ids=["shown absent", "not seen"],
)
def test_no_effect_is_said_only_where_the_whole_interval_lies_inside(
    outcomes, make_standards, make_additions, signals, words
):
    """Within ±20 % both pass; only the certain one is called without effect, the other names its 90 % interval."""
    out = outcomes(make_standards(*CLOSE) + make_additions(signals, [0, 2.0, 4.0, 6.0]), report="calibration")

    check, span = out.check("matrix_effect"), out.case.recoveries.equivalence_interval
    inside = bool(100 * span.low[0] > 80 and 100 * span.high[0] < 120)
    assert check.outcome[0] == 1
    assert inside is (words == "no effect beyond -20 to 20 %")
    assert check.sentence(0).startswith("the matrix changes the slope by ")
    assert check.sentence(0).endswith(words)


def test_without_an_interval_nothing_is_said_of_absence(outcomes, make_standards, make_additions):
    """Exact standards give an effect without interval, and the sentence claims nothing beyond the number."""
    out = outcomes(make_standards(*STANDARDS) + make_additions([0.22, 0.418, 0.621, 0.819], [0, 2.0, 4.0, 6.0]))

    assert out.check("matrix_effect").sentence(0) == "the matrix changes the slope by 0.0 %"


@pytest.mark.parametrize(
    ("report", "advice"),
    [("calibration", "the calibration does not hold in this matrix"), ("additions", "the additions correct it")],
)
def test_a_strong_effect_says_what_it_means_for_the_reported_result(
    outcomes, make_standards, make_additions, report, advice
):
    """A slope of 70 % warns; whether that harms depends on the result that is reported."""
    rows = make_standards(*CLOSE) + make_additions([0.22, 0.359, 0.501, 0.64], [0, 2.0, 4.0, 6.0])

    check = outcomes(rows, report=report).check("matrix_effect")

    assert check.outcome[0] == 2
    assert check.sentence(0) == f"the matrix lowers the slope by 30 %: {advice}"
