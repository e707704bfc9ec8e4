"""Results of standard additions from readings to mg/L: published examples, budgets by hand, derivatives, limits."""

from __future__ import annotations

from itertools import pairwise
from math import sqrt

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.stats import t as student

from rules.method import AnalyteRules, Bench, Measure, Preparation, Stock
from rules.result import Results


def ml(value):
    """A volume."""
    return Measure(value, "mL")


def stock(value, unit="mg/L", uncertainty=None, analyte="Zn"):
    """One stock of the analyte."""
    return (Stock("STOCK-A", {analyte: Measure(value, unit)}, relative_uncertainty=uncertainty),)


def u_line(out):
    """Standard uncertainty of the line's share of the first series."""
    return out.case.additions.budget[0].standard_uncertainty[0]


def test_silver_result_is_the_published_one(outcomes, make_additions, reference):
    """Silver reads 17.3 ± 1.9 µg/mL with s = 0.748, as in Miller & Miller, ch. 5 (recalled; s printed 0.749)."""
    data = reference("silver_additions")
    rows = make_additions(list(data["absorbance"]), list(data["added_ug_per_mL"]))

    out = outcomes(rows, unit="µg/mL", result_unit="µg/mL", export_unit="µg/mL")

    results = out.case.additions
    assert results.value[0] == pytest.approx(17.3, abs=0.05)
    assert results.value[0] == pytest.approx(17.260536398467426, rel=1e-9)
    assert results.standard_uncertainty[0] == pytest.approx(0.749, abs=0.0015)
    assert results.expanded_uncertainty[0] == pytest.approx(1.922462672, rel=1e-8)
    assert (results.low[0], results.high[0]) == pytest.approx((15.43695870586352, 19.293833799411555), rel=1e-8)
    assert out.text(0) == "17.3 ± 1.9 µg/mL (95 %, k = 2.57, t with 5 dof)"


def test_iron_flasks_carry_the_covariance(outcomes, make_additions, reference):
    """Iron in 50 mL flasks reads 7.01 mg/L with s = 0.159; the printed 0.12 without covariance is not given."""
    data = reference("iron_flasks")  # Skoog et al., standard additions: input read, answers recalled
    rows = make_additions(list(data["absorbance"]), list(data["mL_std_11.1ppm"]), key="spike_volume")
    bench = Bench(aliquot=ml(10), made_up_to=ml(50))

    out = outcomes(rows, bench=bench, stocks=stock(11.1))

    results = out.case.additions
    assert results.value[0] == pytest.approx(7.01, abs=0.005)
    assert u_line(out) == pytest.approx(0.158742391474554, rel=1e-8)
    assert u_line(out) != pytest.approx(0.12, abs=0.02)
    assert (results.low[0], results.high[0]) == pytest.approx((6.515069358741694, 7.526057673964315), rel=1e-8)


def test_strontium_result_is_the_published_one(outcomes, make_additions, reference):
    """Strontium reads 8.72 ± s 0.43 ng/mL (Harris, ch. 5: line read, s recalled)."""
    data = reference("strontium_additions")
    rows = make_additions(list(data["signal"]), list(data["added_ng_per_mL"]))

    out = outcomes(rows, unit="ng/mL", result_unit="ng/mL", export_unit="ng/mL")

    assert out.case.fits.lines.slope[0] == pytest.approx(3.136, abs=5e-4)
    assert out.case.fits.lines.intercept[0] == pytest.approx(27.36, abs=5e-3)
    assert out.case.additions.value[0] == pytest.approx(8.72, abs=5e-3)
    assert u_line(out) == pytest.approx(0.43, abs=6e-3)


def test_variable_volume_is_weighted_by_dilution(outcomes, make_additions, reference):
    """Standard on top of 5.00 mL gives 12.2612 (12.0970 to 12.4270) µg/L: the manual's 12.3, weighted by f²."""
    data = reference("variable_volume")  # Harvey, Solutions Manual 2.1, ch. 5 no. 9, read; limits recomputed
    rows = make_additions(list(data["S"]), list(data["V_std_mL"]), key="spike_volume")

    out = outcomes(rows, result_unit="µg/L", bench=Bench(aliquot=ml(5)), stocks=stock(600, "µg/L"))

    results = out.case.additions
    assert results.value[0] == pytest.approx(12.2612, abs=5e-5)
    assert (results.low[0], results.high[0]) == pytest.approx((12.0970, 12.4270), abs=5e-5)
    assert results.value[0] == pytest.approx(12.3, abs=0.05)


def test_lead_by_single_addition_into_one_volume(outcomes, make_additions):
    """1.00 mL and 1.00 µL of 1560 µg/L, made up to 5.00 mL: 1.33 µg/L (Harvey, Analytical Chemistry 2.0, read)."""
    rows = make_additions([0.193, 0.419], [0, 1e-3], key="spike_volume", analyte="Pb")

    out = outcomes(
        rows,
        result_unit="µg/L",
        bench=Bench(aliquot=ml(1), made_up_to=ml(5)),
        stocks=stock(1560, "µg/L", analyte="Pb"),
    )

    assert out.case.additions.value[0] == pytest.approx(1.33, abs=0.006)
    assert out.case.additions.value[0] == pytest.approx(1.332212389380531, rel=1e-9)


def test_lead_by_addition_into_the_measured_vessel(outcomes, make_additions):
    """5.00 mL, then 5.00 µL of 1560 µg/L on top, 0.712 to 1.546: 1.33 µg/L (Harvey 2.0, recalled)."""
    rows = make_additions([0.712, 1.546], [0, 5e-3], key="spike_volume")

    out = outcomes(rows, result_unit="µg/L", bench=Bench(aliquot=ml(5)), stocks=stock(1560, "µg/L"))

    assert out.case.additions.value[0] == pytest.approx(1.33, abs=0.006)
    assert out.case.additions.value[0] == pytest.approx(1.3293343514300828, rel=1e-9)


def test_aluminium_in_gum_has_no_extra_term_of_a_read_back(outcomes, make_additions, reference):
    """3.12 g of gum in 100 mL: 48.1332 mg/kg, V' = 0.1251 mL, s 0.5174; the worksheet's 0.6477 is not given."""
    data = reference("aluminium_in_gum")  # public worksheet, read
    rows = make_additions(list(data["signal"]), list(data["V_std_mL"]), key="spike_volume")
    bench = Bench(aliquot=ml(25), made_up_to=ml(100), predilution=100 / 3.12)

    out = outcomes(rows, bench=bench, stocks=stock(300))

    results = out.case.additions
    assert results.value[0] == pytest.approx(48.1332, abs=6e-5)
    assert results.value[0] / (300 / 25 * 100 / 3.12) == pytest.approx(0.1251, abs=6e-5)
    assert u_line(out) == pytest.approx(0.5174326502, rel=1e-8)
    assert u_line(out) != pytest.approx(0.6477, abs=0.01)
    assert (results.low[0], results.high[0]) == pytest.approx((45.94624918968237, 50.40048736626042), rel=1e-8)


def test_manganese_follows_from_its_published_line(outcomes, make_additions, reference):
    """Additions stated for the vessel, 1.00 mL in 2.00 mL: y = 0.169 x + 0.437 and 5.17 mg/L in the sample."""
    data = reference("manganese_additions")  # public worked problem: line read, result derived
    rows = make_additions(list(data["blank_corrected"]), list(data["added_ppm_in_2mL"]))

    out = outcomes(rows, bench=Bench(aliquot=ml(1), made_up_to=ml(2)), added_refers_to="vessel")

    lines = out.case.fits.lines
    # in the vessel: slope of the aliquot's line is that of the vessel's, its intercept twice the vessel's
    assert lines.slope[0] == pytest.approx(0.169, abs=5e-4)
    assert lines.intercept[0] / 2 == pytest.approx(0.437, abs=8e-4)
    assert out.case.additions.value[0] == pytest.approx(5.1728219696969715, rel=1e-9)


def test_ascorbic_acid_in_place_is_the_published_one(outcomes, make_additions, reference):
    """Into one vessel of 50 mL, 279 mM: 2.89 with s near 0.098 (Harris, ch. 5, recalled; printed unweighted)."""
    data = reference("ascorbic_acid_in_place")
    rows = make_additions(list(data["I"]), list(data["V_s_mL"]), key="spike_volume")

    out = outcomes(rows, result_unit="mmol/L", bench=Bench(aliquot=ml(50)), stocks=stock(279, "mmol/L"))

    # the dilution reaches 2 %, so weights by f² differ from the book's equal ones by less than its last digit
    assert out.case.additions.value[0] == pytest.approx(2.89, abs=0.02)
    assert u_line(out) == pytest.approx(0.098, abs=0.003)


def test_single_addition_shows_no_uncertainty(outcomes, make_additions):
    """An exact line has a value and neither u, U, interval nor g, and the text says why."""
    out = outcomes(make_additions([0.2, 0.5], [0, 3.0]))

    results = out.case.additions
    assert results.value[0] == pytest.approx(2.0)
    for column in (results.low, results.high, results.standard_uncertainty, results.expanded_uncertainty):
        assert np.isnan(column[0])
    assert np.isnan(out.case.interval.g[0])
    assert out.text(0) == "2.00 mg/L (uncertainty absent: a single addition shows no scatter of preparations)"


def test_replicate_readings_give_a_single_addition_no_uncertainty(outcomes, make_additions):
    """Readings of one vessel are no preparations, however many there are."""
    out = outcomes(make_additions([[0.19, 0.2, 0.21], [0.49, 0.5, 0.51]], [0, 3.0]))

    assert out.case.fits.lines.n[0] == 2
    assert np.isnan(out.case.additions.expanded_uncertainty[0])


def test_single_addition_with_known_preparation_scatter(outcomes, make_additions):
    """With preparation: rsd 2 %, 12 dof the u of C is that of numerical derivatives and U = t(12) u."""
    y0, y1, top = 0.2, 0.5, 3.0
    bench = Bench(preparation=Preparation(rsd=0.02, dof=12))

    def c(a, b):
        return a * top / (b - a)

    h = 1e-6
    d0 = (c(y0 * (1 + h), y1) - c(y0 * (1 - h), y1)) / (2 * h)
    d1 = (c(y0, y1 * (1 + h)) - c(y0, y1 * (1 - h))) / (2 * h)
    expected = 0.02 * sqrt(d0**2 + d1**2)

    out = outcomes(make_additions([y0, y1], [0, top]), bench=bench)

    results = out.case.additions
    assert results.standard_uncertainty[0] == pytest.approx(expected, rel=1e-8)
    assert results.expanded_uncertainty[0] == pytest.approx(student.ppf(0.975, 12) * expected, rel=1e-8)
    assert results.dof[0] == 12
    assert results.low[0] < results.value[0] - 0.8 * results.expanded_uncertainty[0] < results.value[0]


def test_single_addition_interval_covers_by_simulation(outcomes, make_additions):
    """The interval from known preparation scatter covers the true native in 95 % of 20,000 simulated pairs."""
    random = np.random.default_rng(5)
    n, native, top, rsd = 20_000, 2.0, 3.0, 0.02
    y = np.column_stack((np.full(n, native), np.full(n, native + top))) * random.normal(1, rsd, (n, 2))
    rows = []
    for i in range(n):
        rows += make_additions(list(y[i]), [0, top], label="x", sample=f"RIV-{i}")

    out = outcomes(rows, bench=Bench(preparation=Preparation(rsd=rsd, dof=np.inf)))

    results = out.case.additions
    covered = np.mean((results.low <= native) & (native <= results.high))
    assert covered == pytest.approx(0.95, abs=0.006)


def test_known_scatter_never_replaces_measured_scatter(outcomes, make_additions):
    """Where residuals exist they are used, whatever the settings say of preparations."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, 1, 2, 3.0])

    plain = outcomes(rows)
    known = outcomes(rows, bench=Bench(preparation=Preparation(rsd=0.5, dof=3)))

    assert known.case.additions.expanded_uncertainty[0] == plain.case.additions.expanded_uncertainty[0]


def test_line_without_scatter_gives_a_value_only(outcomes, make_additions):
    """Signals exactly on a line give a value, no U, and the reason."""
    out = outcomes(make_additions([0.25, 0.5, 0.75, 1.0], [0, 1, 2, 3.0]))

    assert out.case.additions.value[0] == pytest.approx(1.0)
    assert np.isnan(out.case.additions.expanded_uncertainty[0])
    assert out.text(0) == "1.00 mg/L (uncertainty absent: no scatter at the export's resolution)"


@pytest.mark.parametrize("signals", [[0.5, 0.4, 0.3], [0.5, 0.5, 0.5]], ids=["falling", "flat"])
def test_signal_that_does_not_rise_gives_no_number(outcomes, make_additions, signals):
    """A slope of zero or less gives neither value nor interval, and fails."""
    out = outcomes(make_additions(signals, [0, 1, 2.0]))

    assert np.isnan(out.case.additions.value[0])
    assert out.text(0) == "no result: the signal does not rise with the additions"
    assert out.verdict_of(0).word == "fail"


def test_too_uncertain_a_slope_gives_no_number(outcomes, make_additions):
    """At g of 1 or more nothing is printed but the reason with g."""
    out = outcomes(make_additions([1.0, 3.0, 2.0, 3.2], [0, 1, 2, 3.0]))

    assert out.case.interval.g[0] >= 1
    for column in ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty"):
        assert np.isnan(getattr(out.case.additions, column)[0])
    assert out.text(0).startswith("no result: the slope is too uncertain for a finite interval (g = ")


BLANKS = [0.010, 0.014, 0.012]
VOLUMES = [0.0, 1.0, 2.0, 3.0]
SIGNALS = [0.112, 0.201, 0.270, 0.342]


def with_blank(outcomes, make_additions, make_blanks, use, blanks=BLANKS):
    """Standard on top of 10 mL, with blanks."""
    rows = make_additions(SIGNALS, VOLUMES, key="spike_volume") + make_blanks(blanks)
    return outcomes(rows, bench=Bench(aliquot=ml(10)), stocks=stock(20.0), blank=use)


def by_numpy(use, y_blank):
    """Native by an independent weighted fit: numpy's, with weights f on the residuals."""
    v, y = np.array(VOLUMES), np.array(SIGNALS)
    f, a = 10 / (10 + v), 20.0 * v / 10
    scaled = (y - y_blank) / f if use == "subtract" else y / f - y_blank
    slope, intercept = np.polyfit(a, scaled, 1, w=f)
    return intercept / slope


@pytest.mark.parametrize("use", ["subtract", "preparation"])
def test_blank_moves_the_result_as_a_derivative_says(outcomes, make_additions, make_blanks, use):
    """Value by an independent fit; u_blank is |dC/dy_B| u(y_B) by central difference."""
    mean, u_blank = np.mean(BLANKS), np.std(BLANKS, ddof=1) / sqrt(3)
    h = 1e-6
    derivative = (by_numpy(use, mean + h) - by_numpy(use, mean - h)) / (2 * h)

    out = with_blank(outcomes, make_additions, make_blanks, use)

    results = out.case.additions
    line, blank = results.budget[0].standard_uncertainty[0], results.budget[1].standard_uncertainty[0]
    assert results.value[0] == pytest.approx(by_numpy(use, mean), rel=1e-10)
    assert blank == pytest.approx(abs(derivative) * u_blank, rel=1e-6)
    assert results.standard_uncertainty[0] == pytest.approx(sqrt(line**2 + blank**2))
    # t(2) serves both: two degrees of freedom of the line, two of the three blanks
    assert results.expanded_uncertainty[0] == pytest.approx(student.ppf(0.975, 2) * sqrt(line**2 + blank**2))


def test_blank_by_hand_where_dilution_is_constant(outcomes, make_additions, make_blanks):
    """10 mL in 50 mL, blank 0.010 in each vessel: Y = 5 (y - 0.010), so C = 5 · 0.10/0.05 · … = 10.0 mg/L."""
    rows = make_additions([0.110, 0.210, 0.310], [0, 10.0, 20.0]) + make_blanks([0.010])
    bench = Bench(aliquot=ml(10), made_up_to=ml(50))

    subtracted = outcomes(rows, bench=bench, added_refers_to="aliquot", blank="subtract")
    kept = outcomes(rows, bench=bench, added_refers_to="aliquot", blank="none")
    prepared = outcomes(rows, bench=bench, added_refers_to="aliquot", blank="preparation")

    assert subtracted.case.additions.value[0] == pytest.approx(10.0)  # 0.100 / 0.0100 per mg/L
    assert kept.case.additions.value[0] == pytest.approx(11.0)  # 0.110 / 0.0100
    assert prepared.case.additions.value[0] == pytest.approx(10.8)  # (5 · 0.110 - 0.010) / 0.0500


def test_interval_solves_the_inequality_with_blank_and_common_factors(outcomes, make_additions, make_blanks):
    """End to end, both ends solve the inequality built from an independent fit of line and blank."""
    rows = make_additions(SIGNALS, VOLUMES, key="spike_volume") + make_blanks(BLANKS)
    bench = Bench(aliquot=ml(10), tolerances={"aliquot": Measure(1, "%")})
    out = outcomes(rows, bench=bench, stocks=stock(20.0, uncertainty=0.01), blank="subtract")
    v, y = np.array(VOLUMES), np.array(SIGNALS)
    f, a = 10 / (10 + v), 20.0 * v / 10
    design, w = np.column_stack((np.ones(4), a)), np.diag(f**2)
    inverse = np.linalg.inv(design.T @ w @ design)
    alpha, beta = inverse @ design.T @ w @ ((y - np.mean(BLANKS)) / f)
    residuals = (y - np.mean(BLANKS)) - f * (alpha + beta * a)
    covariance = inverse * np.sum(residuals**2) / 2
    ga, gb = inverse @ design.T @ w @ (-1 / f)
    t, u_blank = student.ppf(0.975, 2), np.std(BLANKS, ddof=1) / sqrt(3)
    kappa = 1.959963984540054**2 * (0.01**2 + (0.01 / sqrt(3)) ** 2)

    def excess(c):
        line = t**2 * (covariance[0, 0] - 2 * c * covariance[0, 1] + c**2 * covariance[1, 1])
        return (alpha - c * beta) ** 2 - line - kappa * (beta * c) ** 2 - (t * u_blank * (ga - c * gb)) ** 2

    c, reach = alpha / beta, 10 * out.case.additions.expanded_uncertainty[0]
    assert out.case.additions.low[0] == pytest.approx(brentq(excess, c - reach, c, xtol=1e-14), rel=1e-9)
    assert out.case.additions.high[0] == pytest.approx(brentq(excess, c, c + reach, xtol=1e-14), rel=1e-9)


def test_budget_of_common_factors_by_hand(outcomes, make_additions):
    """Stock, spike volume, aliquot and predilution enter as a/√3 of the result, the vessel volume not at all."""
    tolerances = {
        "aliquot": Measure(0.05, "mL"),
        "spike_volume": Measure(0.02, "mL"),
        "made_up_to": Measure(1.0, "mL"),
        "predilution": Measure(1.5, "%"),
    }
    bench = Bench(aliquot=ml(10), made_up_to=ml(50), predilution=10, tolerances=tolerances)
    rows = make_additions([0.112, 0.201, 0.270, 0.342], [0, 1, 2, 3.0], key="spike_volume")

    out = outcomes(rows, bench=bench, stocks=stock(20.0, uncertainty=0.004))

    results, c = out.case.additions, out.case.additions.value[0]
    shares = {share.component: share.standard_uncertainty[0] for share in results.budget}
    expected = {
        "stock": 0.004 * c,
        "spike_volume": 0.02 / sqrt(3) / 1.0 * c,  # of the smallest volume, where it weighs most
        "aliquot": 0.05 / sqrt(3) / 10 * c,
        "made_up_to": 0.0,
        "predilution": 0.015 / sqrt(3) * c,
        "blank": 0.0,
    }
    for component, value in expected.items():
        assert shares[component] == pytest.approx(value), component
    others = sum(value**2 for value in expected.values())
    assert results.standard_uncertainty[0] == pytest.approx(sqrt(shares["line"] ** 2 + others))
    t = student.ppf(0.975, 2)
    assert results.expanded_uncertainty[0] == pytest.approx(
        sqrt((t * shares["line"]) ** 2 + 1.959963984540054**2 * others)
    )
    assert results.coverage_factor[0] == pytest.approx(
        results.expanded_uncertainty[0] / results.standard_uncertainty[0]
    )


def test_vessel_counts_where_the_export_states_concentrations(outcomes, make_additions):
    """A stated concentration of the vessel is scaled by aliquot and vessel, so both tolerances count, and no stock."""
    tolerances = {"aliquot": Measure(0.05, "mL"), "made_up_to": Measure(0.06, "mL")}
    bench = Bench(aliquot=ml(10), made_up_to=ml(50), tolerances=tolerances)

    out = outcomes(make_additions([0.112, 0.201, 0.270, 0.342], [0, 1, 2, 3.0]), bench=bench, added_refers_to="vessel")

    c = out.case.additions.value[0]
    shares = {share.component: share.standard_uncertainty[0] for share in out.case.additions.budget}
    assert shares["aliquot"] == pytest.approx(0.05 / sqrt(3) / 10 * c)
    assert shares["made_up_to"] == pytest.approx(0.06 / sqrt(3) / 50 * c)
    assert shares["stock"] == 0


@pytest.mark.parametrize("stated", [None, 0.0], ids=["not stated", "stated as zero"])
def test_uncertainty_nobody_stated_is_absent_and_not_zero(outcomes, make_additions, stated):
    """A stock and tolerances without uncertainty appear in the budget as NaN, and a zero counts as not stated."""
    tolerances = {} if stated is None else {"aliquot": Measure(stated, "%")}
    rows = make_additions([0.112, 0.201, 0.270, 0.342], [0, 1, 2, 3.0], key="spike_volume")

    out = outcomes(rows, bench=Bench(aliquot=ml(10), tolerances=tolerances), stocks=stock(20.0, uncertainty=stated))

    shares = {share.component: share.standard_uncertainty[0] for share in out.case.additions.budget}
    for component in ("stock", "aliquot", "spike_volume"):
        assert np.isnan(shares[component]), component
    assert np.isfinite(out.case.additions.expanded_uncertainty[0])


def test_predilution_multiplies_result_and_uncertainty(outcomes, make_additions):
    """Ten times the predilution gives ten times value, U and interval; the fit stays that of the aliquot."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, 1, 2, 3.0])

    one, ten = outcomes(rows), outcomes(rows, bench=Bench(predilution=10))
    stated = outcomes([row | {"predilution": 10.0} for row in rows])

    for name in ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty"):
        base = getattr(one.case.additions, name)[0]
        assert getattr(ten.case.additions, name)[0] == pytest.approx(10 * base)
        assert getattr(stated.case.additions, name)[0] == pytest.approx(10 * base)
    assert ten.case.fits.lines.intercept[0] == one.case.fits.lines.intercept[0]


def test_two_spiked_preparations_have_a_degree_of_freedom(outcomes, make_additions):
    """Unspiked once and spiked twice at one level: N - 2 = 1 degree of freedom and an interval."""
    out = outcomes(make_additions([0.2, 0.50, 0.52], [0, 3.0, 3.0]))

    assert out.case.additions.dof[0] == 1
    assert np.isfinite(out.case.additions.expanded_uncertainty[0])


def test_native_within_its_scatter_is_not_detected(outcomes, make_additions):
    """A native that the line cannot tell from zero keeps its estimate in the record and reads `< high`."""
    out = outcomes(make_additions([0.001, 0.11, 0.19, 0.31], [0, 1, 2, 3.0]))

    results = out.case.additions
    assert not results.detected[0]
    assert results.low[0] < 0 < results.high[0]
    assert np.isfinite(results.value[0])
    assert out.text(0).startswith("< ")
    assert out.text(0).endswith(" mg/L (not detected, 95 %)")


series = st.lists(st.floats(0.05, 0.15), min_size=4, max_size=6)


def rising(steps):
    """Signals that rise by the steps, first the native's."""
    signals = np.cumsum([0.3, *steps])
    return list(signals), list(range(len(signals)))


@settings(max_examples=50, deadline=None)
@given(steps=series, factor=st.floats(0.01, 1000))
def test_scaling_all_signals_leaves_the_result(outcomes, make_additions, steps, factor):
    """The unit of the signal does not matter: value and U stay."""
    signals, added = rising(steps)

    one = outcomes(make_additions(signals, added)).case.additions
    other = outcomes(make_additions([factor * y for y in signals], added)).case.additions

    for name in ("value", "low", "high", "expanded_uncertainty"):
        assert getattr(other, name)[0] == pytest.approx(getattr(one, name)[0], rel=1e-8, nan_ok=True)


@settings(max_examples=50, deadline=None)
@given(steps=series, factor=st.floats(0.01, 1000))
def test_scaling_the_stock_scales_result_and_uncertainty(outcomes, make_additions, steps, factor):
    """A stock twice as strong makes the sample twice as strong, and U with it."""
    signals, volumes = rising(steps)
    rows = make_additions(signals, [0.1 * v for v in volumes], key="spike_volume")

    one, other = (
        outcomes(rows, bench=Bench(aliquot=ml(10)), stocks=stock(c, uncertainty=0.01)).case.additions
        for c in (5.0, 5.0 * factor)
    )

    for name in ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty"):
        assert getattr(other, name)[0] == pytest.approx(factor * getattr(one, name)[0], rel=1e-8, nan_ok=True)


@settings(max_examples=50, deadline=None)
@given(steps=series, shift=st.floats(0.01, 0.5))
def test_constant_background_shifts_the_result(outcomes, make_additions, steps, shift):
    """What is added to every signal appears in the result as shift over slope: the limit of the method, shown."""
    signals, added = rising(steps)

    one, other = (outcomes(make_additions([y + d for y in signals], added)) for d in (0.0, shift))

    moved = other.case.additions.value[0] - one.case.additions.value[0]
    assert moved == pytest.approx(shift / one.case.fits.lines.slope[0], rel=1e-7)


def test_more_confidence_widens_the_interval(outcomes, make_additions):
    """Intervals of 90, 95 and 99 % lie one inside the other around the same value."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, 1, 2, 3.0])
    results = [outcomes(rows, confidence=level).case.additions for level in (0.90, 0.95, 0.99)]

    for narrow, wide in pairwise(results):
        assert wide.low[0] < narrow.low[0] < narrow.value[0] < narrow.high[0] < wide.high[0]
        assert wide.value[0] == narrow.value[0]


@pytest.mark.parametrize(("high", "symmetric"), [(3.30, True), (3.33, True), (3.34, False), (np.nan, False)])
def test_halves_may_differ_by_a_quarter(high, symmetric):
    """Around 2 from 1 on: halves of 1.00 and 1.33 still allow ±, 1.00 and 1.34 do not, a missing end never does."""
    one = np.ones(1)
    results = Results(2 * one, one, high * one, one, one, one, one, one.astype(bool), one, one)

    assert results.symmetric(0) is symmetric


def test_lopsided_interval_is_shown_instead_of_plus_minus(outcomes, make_additions):
    """Where the halves differ by more than 25 % people read low and high, not ±."""
    out = outcomes(make_additions([0.9, 1.22, 1.38, 1.8], [0, 1, 2, 3.0]))

    results = out.case.additions
    below, above = results.value[0] - results.low[0], results.high[0] - results.value[0]
    assert above > 1.25 * below
    assert "±" not in out.text(0)
    assert " to " in out.text(0)


GROWING = ([0.112, 0.318, 0.497, 0.742, 0.905], [0.0, 1.0, 2.0, 3.0, 4.0])


@pytest.mark.parametrize(("model", "power"), [("proportional", 2), ("counting", 1)])
def test_weighted_additions_by_hand(outcomes, make_additions, model, power):
    """Standard on top of 10 mL: C, u_line and Fieller's limits by matrices with w = f²/h of the fitted signals."""
    signals, volumes = (np.array(column) for column in GROWING)
    f, a = 10 / (10 + volumes), 20 * volumes / 10
    scaled, design = signals / f, np.column_stack((np.ones(5), a))
    w = f**2
    for _ in range(6):
        last = w
        alpha, beta = np.linalg.solve(design.T @ (design * w[:, None]), design.T @ (w * scaled))
        w = f**2 / (f * (alpha + beta * a)) ** power
    s2 = np.sum(last * (scaled - alpha - beta * a) ** 2) / 3
    v = s2 * np.linalg.inv(design.T @ (design * last[:, None]))
    c, t = alpha / beta, student.ppf(0.975, 3)

    rows = make_additions(list(signals), list(volumes), key="spike_volume")
    out = outcomes(rows, bench=Bench(aliquot=ml(10)), stocks=stock(20.0), variance=model)

    results = out.case.additions
    assert results.value[0] == pytest.approx(c, rel=1e-9)
    assert u_line(out) == pytest.approx(sqrt(v[0, 0] - 2 * c * v[0, 1] + c**2 * v[1, 1]) / beta, rel=1e-9)

    def excess(x):
        return (alpha - x * beta) ** 2 - t**2 * (v[0, 0] - 2 * x * v[0, 1] + x**2 * v[1, 1])

    assert results.low[0] == pytest.approx(brentq(excess, c - 3, c, xtol=1e-14), rel=1e-8)
    assert results.high[0] == pytest.approx(brentq(excess, c, c + 3, xtol=1e-14), rel=1e-8)


def test_limit_of_quantification_floors_the_weights_before_the_blanks(outcomes, make_additions, make_blanks):
    """The least signal of a weight is the LOQ's, without one three SD of the blanks, without both 1 % of the top."""
    rows, blanks = make_additions(*GROWING), make_blanks([0.010, 0.014, 0.012])
    analytes = {"Zn": AnalyteRules(loq=Measure(0.2, "mg/L"))}
    slope = np.polyfit(GROWING[1], GROWING[0], 1)[0]

    def least(rows, **method):
        return outcomes(rows, variance="proportional", blank="none", **method).case.fits.least[0]

    assert least(rows + blanks, analytes=analytes) == pytest.approx(0.2 * slope)
    assert least(rows + blanks) == pytest.approx(3 * 0.002)
    assert least(rows) == pytest.approx(0.01 * 0.905)


def test_weights_include_the_blank_that_was_measured_with_the_signal(outcomes, make_additions, make_blanks):
    """Under `counting` h is the fitted gross signal: what is subtracted from Y still scatters in the vessel."""
    signals = [250.0, 640.0, 1010.0, 1420.0]
    rows = make_additions(signals, [0, 1, 2, 3.0]) + make_blanks([120.0, 118.0, 122.0])

    fits = outcomes(rows, variance="counting", blank="subtract").case.fits

    a = np.arange(4.0)
    again = np.polyfit(a, np.array(signals) - 120, 1, w=np.sqrt(fits.weights))
    assert fits.lines.intercept[0] == pytest.approx(again[1])
    assert fits.weights == pytest.approx(1 / (np.polyval(again, a) + 120), rel=1e-6)


def test_errors_of_volumes_added_again_and_again_accumulate(outcomes):
    """Total volumes 0.4, 0.5, 0.6 mL in one vessel: the tolerance counts against the smallest step, 0.1 mL.

    Made up to a volume each vessel got its own 0.4 to 0.6 mL, and the smallest of those counts.
    """
    stocks = (Stock("ZN-500", {"Zn": Measure(500, "mg/L")}),)
    rows = [
        {"sample": "BRN-3", "role": "spiked" if v else "unspiked", "signal": s, "spike_volume": v or np.nan}
        for v, s in zip((0.0, 0.4, 0.5, 0.6), (0.4, 2.31, 2.78, 3.22), strict=True)
    ]
    tolerances = {"spike_volume": Measure(0.002, "mL")}

    on_top = outcomes(rows, bench=Bench(aliquot=Measure(10, "mL"), tolerances=tolerances), stocks=stocks)
    filled = outcomes(
        rows, bench=Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"), tolerances=tolerances), stocks=stocks
    )

    def relative(out):
        share = next(part for part in out.case.additions.budget if part.component == "spike_volume")
        return share.standard_uncertainty[0] / out.case.additions.value[0]

    assert relative(on_top) == pytest.approx(0.002 / np.sqrt(3) / 0.1)
    assert relative(filled) == pytest.approx(0.002 / np.sqrt(3) / 0.4)


@pytest.mark.parametrize(("n", "fixed"), [(6, False), (13, True)])
def test_a_fixed_factor_needs_ten_degrees_of_freedom(outcomes, make_additions, n, fixed):
    """With k = 2 fixed U is 2 u from ten effective degrees of freedom on, else Student's t as ever."""
    added = np.linspace(0, 6, n)
    signals = 0.2 + 0.1 * added + 0.003 * (-1.0) ** np.arange(n)
    rows = make_additions(signals.tolist(), added.tolist())

    by_t, by_k = outcomes(rows), outcomes(rows, fixed_factor=2.0)

    u = by_k.reported(0).standard_uncertainty[0]
    assert bool(np.isclose(by_k.reported(0).expanded_uncertainty[0], 2 * u)) is fixed
    assert by_k.text(0).endswith("(k = 2, fixed)") is fixed
    assert by_k.reported(0).low[0] == by_t.reported(0).low[0]
    if not fixed:
        assert by_k.text(0) == by_t.text(0)
