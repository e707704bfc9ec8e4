"""External calibration: published calibrations and read-backs, and what happens when standards are not good enough."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import t as student

from rules.method import AnalyteRules, Bench, Measure

STANDARDS = ([0, 1, 2, 4, 5], [0.01, 0.22, 0.40, 0.83, 1.00])


def unspiked(signals, **more):
    """Unspiked solutions of one sample."""
    return [{"sample": "RIV-17", "role": "unspiked", "signal": y, **more} for y in signals]


def read_back(outcomes, make_standards, data, signals, **method):
    """Results of one sample by a calibration."""
    rows = make_standards(list(data[0]), list(data[1])) + unspiked(signals)
    return outcomes(rows, report="calibration", **method).case.back.results


def test_cadmium_read_back_is_the_published_one(outcomes, make_standards, reference):
    """QUAM 2012 example A5: 0.0712 and 0.0716 read 0.26 mg/L with u = 0.018 (read)."""
    data = reference("cadmium_calibration")

    results = read_back(outcomes, make_standards, (data["mg_per_L"], data["absorbance"]), [0.0712, 0.0716])

    assert results.value[0] == pytest.approx(0.26, abs=5e-4)
    assert results.value[0] == pytest.approx(0.2601659751037345, rel=1e-9)
    assert results.standard_uncertainty[0] == pytest.approx(0.018, abs=5e-4)
    assert results.standard_uncertainty[0] == pytest.approx(0.01784461112558307, rel=1e-9)


def test_six_standards_read_back_is_the_published_one(outcomes, make_standards, reference):
    """Harvey 2000, examples 5.10 to 5.12: three samples, C = 0.241, s = 0.0024, 95 % half-width 0.007 (read)."""
    data = reference("six_standards")

    results = read_back(outcomes, make_standards, (data["C"], data["S"]), [29.32, 29.16, 29.51])

    assert results.value[0] == pytest.approx(0.2412597344, rel=1e-8)
    assert results.standard_uncertainty[0] == pytest.approx(0.0024, abs=5e-5)
    assert results.standard_uncertainty[0] == pytest.approx(0.0023635881120727714, rel=1e-8)
    assert results.expanded_uncertainty[0] == pytest.approx(0.007, abs=5e-4)
    assert results.expanded_uncertainty[0] == pytest.approx(0.00656237264446814, rel=1e-8)
    # g is 5e-4 here, so the interval is as wide as ± U to that part
    assert results.high[0] - results.low[0] == pytest.approx(2 * results.expanded_uncertainty[0], rel=1e-3)


@pytest.mark.parametrize(
    ("signal", "count", "expected"),
    # Miller & Miller, ch. 5, fluorescein (input read, answers recalled)
    [
        (2.9, 1, (0.72, 0.26, 0.68)),
        (13.5, 1, (6.21, 0.24, 0.62)),
        (23.0, 1, (11.13, 0.26, 0.68)),
        (2.9, 4, (0.72, 0.18, 0.46)),
        (13.5, 4, (6.21, 0.14, 0.36)),
        (23.0, 4, (11.13, 0.18, 0.46)),
    ],
)
def test_fluorescein_read_backs_are_the_published_ones(outcomes, make_standards, reference, signal, count, expected):
    """One or four solutions read back with the printed concentration, s and half-width."""
    data = reference("fluorescein_calibration")
    x, s, half = expected

    results = read_back(outcomes, make_standards, (data["pg_per_mL"], data["signal"]), [signal] * count)

    assert results.value[0] == pytest.approx(x, abs=6e-3)
    assert results.standard_uncertainty[0] == pytest.approx(s, abs=6e-3)
    assert results.expanded_uncertainty[0] == pytest.approx(half, abs=0.015)


def test_inverse_prediction_of_wing_lengths_has_fiellers_limits(outcomes, make_standards, reference):
    """Zar, Biostatistical Analysis: 4.5 cm read back gives 12.157 to 15.981 d (recalled; in full 12.1526, 15.9730)."""
    data = reference("wing_length")

    results = read_back(outcomes, make_standards, (data["age_d"], data["wing_cm"]), [4.5])

    assert (results.low[0], results.high[0]) == pytest.approx((12.157, 15.981), abs=0.03)
    assert (results.low[0], results.high[0]) == pytest.approx((12.15255611, 15.97296333), rel=1e-8)


def test_replicate_readings_count_as_one_solution(outcomes, make_standards):
    """Three readings of one vessel are read back with p = 1, three vessels with p = 3."""
    rows = make_standards(*STANDARDS)

    readings = outcomes(rows + unspiked([[0.49, 0.50, 0.51]]), report="calibration").case.back.results
    vessels = outcomes(rows + unspiked([0.49, 0.50, 0.51]), report="calibration").case.back.results

    assert readings.value[0] == pytest.approx(vessels.value[0])
    assert readings.standard_uncertainty[0] > 1.3 * vessels.standard_uncertainty[0]


def test_dilution_and_predilution_lead_back_to_the_sample(outcomes, make_standards):
    """10 mL in 50 mL after 1 in 20 multiplies value and U of the vessel by 100."""
    rows = make_standards(*STANDARDS) + unspiked([0.5])
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"), predilution=20)

    plain = outcomes(rows, report="calibration").case.back.results
    diluted = outcomes(rows, report="calibration", bench=bench).case.back.results

    for name in ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty"):
        assert getattr(diluted, name)[0] == pytest.approx(100 * getattr(plain, name)[0])


def test_above_the_top_standard_there_is_no_number(outcomes, make_standards, check):
    """A vessel beyond the top standard gives no result, says so and fails; equal to it is inside."""
    rows = make_standards([0, 1, 2], [0.0, 0.101, 0.199])

    beyond = outcomes(rows + unspiked([0.25]), report="calibration")
    inside = outcomes(rows + unspiked([0.1]), report="calibration")

    assert np.isnan(beyond.case.back.results.value[0])
    assert beyond.text(0) == "no result: above the top standard"
    assert beyond.verdict_of(0).word == "fail"
    assert check(beyond, "linear_evidence").outcome[0] == 3
    assert np.isfinite(inside.case.back.results.value[0])


def test_one_vessel_of_several_above_the_top_is_enough(outcomes, make_standards):
    """The mean of two vessels is not saved by its lower half."""
    rows = make_standards([0, 1, 2], [0.0, 0.101, 0.199])

    out = outcomes(rows + unspiked([0.10, 0.25]), report="calibration")

    assert np.isnan(out.case.back.results.value[0])


def test_two_distinct_standards_are_no_calibration(outcomes, make_standards, make_additions):
    """Three standards of two concentrations calibrate nothing, and a series that needs it is incomplete."""
    rows = make_standards([0, 5, 5], [0.0, 0.5, 0.51]) + make_additions([0.2, 0.3], [0, 1.0])

    out = outcomes(rows, report="calibration")

    assert out.verdict_of(0).word == "incomplete"
    assert out.reasons(0)[0] == (
        "the settings report the calibration's result: no calibration: 2 distinct standards, and a calibration needs 3"
    )


def test_one_standard_in_two_units_is_one_standard(outcomes, make_additions, make_standards):
    """0.7 mg/L and 700 µg/L are one concentration although their last bits differ."""
    rows = make_standards([0.0, 0.7], [0.0, 0.35])
    rows.append({"role": "standard", "label": "STD 700", "nominal": (700.0, "µg/L"), "signal": 0.352})

    out = outcomes(rows + make_additions([0.2, 0.3], [0, 1.0]), report="calibration")

    assert "2 distinct standards" in out.reasons(0)[0]


def test_a_faulty_standard_spoils_its_calibration(outcomes, make_standards, make_additions):
    """Nothing is calibrated around a lost standard: the series of its analyte fail, those of another do not."""
    standards = make_standards(*STANDARDS)
    standards[1] |= {"fault": "expected a number, got 'n.a.'; correct the cell", "signal": np.nan}
    other = make_standards(*STANDARDS, analyte="Cd")
    rows = [*standards, *other, *make_additions([0.2, 0.3, 0.41], [0, 0.5, 1.0])]
    rows += make_additions([0.2, 0.3, 0.41], [0, 0.5, 1.0], analyte="Cd")

    out = outcomes(rows, report="calibration")

    assert out.case.back.calibration.tolist() == [-1, 0]
    assert out.verdict_of(0).word == "fail"
    assert out.reasons(0)[0] == "line 3, column 'Reading': expected a number, got 'n.a.'; correct the cell"
    assert out.verdict_of(1).word == "pass"


@pytest.mark.parametrize("missing", ["signal", "nominal"])
def test_a_standard_that_says_nothing_spoils_its_calibration(outcomes, make_standards, make_additions, missing):
    """A standard without signal or nominal, marked by nobody, is not left out silently."""
    rows = make_standards(*STANDARDS)
    rows[1][missing] = np.nan

    out = outcomes(rows + make_additions([0.2, 0.3, 0.41], [0, 0.5, 1.0]), report="calibration")

    assert out.verdict_of(0).word == "fail"
    assert out.reasons(0)[0] == "line 3: a standard without nominal or signal"


def test_standards_that_do_not_rise_read_nothing_back(outcomes, make_standards, make_additions):
    """A flat calibration is refused with the reason."""
    rows = make_standards([0, 1, 2], [0.3, 0.3, 0.3]) + make_additions([0.2, 0.3], [0, 1.0])

    out = outcomes(rows, report="calibration")

    assert out.case.back.calibration[0] == -1
    assert "the standards' signal does not rise with concentration" in out.reasons(0)[0]


def test_nominal_in_an_impossible_unit_is_named(outcomes, make_standards, make_additions):
    """A nominal in millilitres is refused with the unit, and the series fails."""
    rows = make_standards(*STANDARDS)
    for row in rows:
        row["nominal"] = (row["nominal"], "mL")

    out = outcomes(rows + make_additions([0.2, 0.3], [0, 1.0]), report="calibration")

    assert out.verdict_of(0).word == "fail"
    assert "nominal: 'mL' cannot be converted to 'mg/L': they measure different things" in out.reasons(0)[0]


def test_standards_without_scatter_give_a_value_without_uncertainty(outcomes, make_standards):
    """An exact calibration reads back a value and no U, and says why."""
    rows = make_standards([0, 1, 2, 4], [0.0, 0.25, 0.5, 1.0]) + unspiked([0.5])

    out = outcomes(rows, report="calibration")

    assert out.case.back.results.value[0] == pytest.approx(2.0)
    assert np.isnan(out.case.back.results.expanded_uncertainty[0])
    assert np.isnan(out.case.back.results.low[0])
    assert out.text(0) == "2.00 mg/L (uncertainty absent: no scatter of the standards at the export's resolution)"


def test_calibration_with_too_uncertain_a_slope_gives_no_number(outcomes, make_standards):
    """Where g of the calibration reaches 1 nothing is read back, and the reason names it."""
    rows = make_standards([0, 1, 2], [0.30, 0.10, 0.45]) + unspiked([0.3])

    out = outcomes(rows, report="calibration")

    assert np.isnan(out.case.back.results.value[0])
    assert out.text(0).startswith("no result: the calibration's slope is too uncertain for a finite interval (g = ")


def test_preparation_blank_of_a_read_back_by_hand(outcomes, make_standards, make_blanks):
    """X = (y - f y_P - a)/b, u_blank = f u(y_P)/b, and the interval holds both."""
    blanks, f = [0.04, 0.05, 0.06], 0.2
    rows = make_standards(*STANDARDS) + unspiked([0.5]) + make_blanks(blanks)
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))
    b, a = np.polyfit(*STANDARDS, 1)
    u_signal = f * np.std(blanks, ddof=1) / sqrt(3)

    out = outcomes(rows, report="calibration", bench=bench, blank="preparation")

    results = out.case.back.results
    assert results.value[0] == pytest.approx((0.5 - f * 0.05 - a) / b / f)
    assert results.budget[1].standard_uncertainty[0] == pytest.approx(u_signal / b / f)
    x, design = np.array(STANDARDS[0], float), np.column_stack((np.ones(5), STANDARDS[0]))
    residuals = np.array(STANDARDS[1]) - a - b * x
    s2 = np.sum(residuals**2) / 3
    v = s2 * np.linalg.inv(design.T @ design)
    t3, t2 = student.ppf(0.975, 3), student.ppf(0.975, 2)

    def excess(c):
        line = t3**2 * (s2 + v[0, 0] + 2 * c * v[0, 1] + c**2 * v[1, 1])
        return (0.49 - a - b * c) ** 2 - line - (t2 * u_signal) ** 2

    centre = (0.49 - a) / b
    assert results.low[0] == pytest.approx(brentq(excess, centre - 5, centre, xtol=1e-14) / f, rel=1e-9)
    assert results.high[0] == pytest.approx(brentq(excess, centre, centre + 5, xtol=1e-14) / f, rel=1e-9)


def test_blank_in_every_vessel_moves_no_read_back(outcomes, make_standards, make_blanks):
    """A blank to subtract is in the standards too, so the read-back is that without it."""
    rows = make_standards(*STANDARDS) + unspiked([0.5]) + make_blanks([0.01, 0.02])

    results = [outcomes(rows, report="calibration", blank=use).case.back.results for use in ("subtract", "none")]

    assert results[0].value[0] == results[1].value[0]
    assert results[0].expanded_uncertainty[0] == results[1].expanded_uncertainty[0]


def test_channels_are_calibrated_apart(outcomes, make_standards):
    """Two lines of one element never share a calibration."""
    rows = make_standards(*STANDARDS, channel="213.9")
    rows += make_standards(STANDARDS[0], [2 * y for y in STANDARDS[1]], channel="206.2")
    rows += unspiked([0.5], channel="213.9") + unspiked([0.5], channel="206.2")

    out = outcomes(rows, report="calibration")

    assert out.case.calibrations.lines.slope[out.case.back.calibration[1]] == pytest.approx(
        2 * out.case.calibrations.lines.slope[out.case.back.calibration[0]]
    )
    assert out.case.back.results.value[0] > 1.9 * out.case.back.results.value[1]


def test_the_way_from_vessel_to_sample_is_in_the_budget(outcomes, make_standards):
    """An aliquot of 10 ± 0.2 mL in 50 ± 0.5 mL adds 0.2/√3/10 and 0.5/√3/50 to the read-back's relative u."""
    bench = {"aliquot": Measure(10, "mL"), "made_up_to": Measure(50, "mL")}
    rows = make_standards([0, 1, 2, 3], [0.01, 0.205, 0.395, 0.61])
    rows.append({"sample": "ROOF-7", "role": "unspiked", "signal": 0.3})
    tolerances = {"aliquot": Measure(0.2, "mL"), "made_up_to": Measure(0.5, "mL")}

    bare = outcomes(rows, bench=Bench(**bench)).case.back.results
    full = outcomes(rows, bench=Bench(**bench, tolerances=tolerances)).case.back.results

    added = ((0.2 / 3**0.5 / 10) ** 2 + (0.5 / 3**0.5 / 50) ** 2) * bare.value[0] ** 2
    assert full.value[0] == bare.value[0]
    assert full.standard_uncertainty[0] ** 2 - bare.standard_uncertainty[0] ** 2 == pytest.approx(added)
    assert full.low[0] < bare.low[0]
    assert full.high[0] > bare.high[0]


POWERS = {"proportional": 2, "counting": 1}
WEIGHTED = ([0, 1, 2, 4, 8], [0.012, 0.21, 0.39, 0.83, 1.55])


def weighted_by_numpy(power, least):
    """Line and unscaled covariance of `WEIGHTED`, weights iterated from equal ones and floored at a signal."""
    x, y = (np.array(column, dtype=float) for column in WEIGHTED)
    h = np.ones(len(x))
    for _ in range(6):
        line = np.polyfit(x, y, 1, w=1 / np.sqrt(h))
        last, h = h, np.maximum(np.polyval(line, x), least) ** power
    design = np.column_stack((np.ones(len(x)), x))
    residuals = y - np.polyval(line, x)
    s2 = np.sum(residuals**2 / last) / (len(x) - 2)
    return line, s2 * np.linalg.inv(design.T @ (design / last[:, None])), s2


@pytest.mark.parametrize("model", POWERS)
@pytest.mark.parametrize("signals", [[0.5], [0.49, 0.50, 0.52]], ids=["one vessel", "three vessels"])
def test_weighted_read_back_by_hand(outcomes, make_standards, model, signals):
    """The variance s² h(y)/p of the sample's own signal enters u and Fieller's interval alike."""
    analytes = {"Zn": AnalyteRules(loq=Measure(0.1, "mg/L"))}
    # the LOQ's signal, by the slope of the first round
    least = 0.1 * np.polyfit(*WEIGHTED, 1)[0]
    (b, a), v, s2 = weighted_by_numpy(POWERS[model], least)
    mean, p = np.mean(signals), len(signals)
    own = s2 * mean ** POWERS[model] / p
    x = (mean - a) / b

    results = read_back(outcomes, make_standards, WEIGHTED, signals, variance=model, analytes=analytes)

    assert results.value[0] == pytest.approx(x, rel=1e-9)
    u = np.sqrt(own + v[0, 0] + 2 * x * v[0, 1] + x**2 * v[1, 1]) / b
    assert results.standard_uncertainty[0] == pytest.approx(u, rel=1e-9)
    t = student.ppf(0.975, 3)

    def excess(c):
        return (mean - a - b * c) ** 2 - t**2 * (own + v[0, 0] + 2 * c * v[0, 1] + c**2 * v[1, 1])

    assert results.low[0] == pytest.approx(brentq(excess, x - 2, x, xtol=1e-14), rel=1e-8)
    assert results.high[0] == pytest.approx(brentq(excess, x, x + 2, xtol=1e-14), rel=1e-8)


def test_weights_make_low_results_sharper_and_high_ones_wider(outcomes, make_standards):
    """Under `proportional` a low read-back has a smaller u than under `constant`, a high one a larger."""
    low, high = (
        [read_back(outcomes, make_standards, WEIGHTED, [y], variance=model) for model in ("constant", "proportional")]
        for y in (0.06, 1.5)
    )

    assert low[1].standard_uncertainty[0] < 0.5 * low[0].standard_uncertainty[0]
    assert high[1].standard_uncertainty[0] > high[0].standard_uncertainty[0]


def test_a_signal_below_the_floor_is_as_uncertain_as_at_the_floor(outcomes, make_standards):
    """Under `proportional` the share of the sample's own signal stops falling at the signal of the LOQ."""
    analytes = {"Zn": AnalyteRules(loq=Measure(0.5, "mg/L"))}

    def own_share(signal):
        one, many = (
            read_back(outcomes, make_standards, WEIGHTED, [signal] * p, variance="proportional", analytes=analytes)
            for p in (1, 4)
        )
        # s²h/b² of one solution, from the difference of one and four
        return (one.standard_uncertainty[0] ** 2 - many.standard_uncertainty[0] ** 2) / (1 - 1 / 4)

    least = 0.5 * np.polyfit(*WEIGHTED, 1)[0]
    assert own_share(0.03) == pytest.approx(own_share(0.06))
    assert own_share(2 * least) == pytest.approx(4 * own_share(0.06))


def test_blanks_floor_the_weights_of_standards(outcomes, make_standards, make_blanks):
    """Without LOQ the weight of the zero standard stops at three SD of the blanks, whatever those are."""
    rows = make_standards(*WEIGHTED) + unspiked([0.5])

    least = [
        outcomes(
            rows + make_blanks(blanks), report="calibration", blank="none", variance="proportional"
        ).case.calibrations.least[0]
        for blanks in ([0.010, 0.012, 0.014], [0.0, 0.012, 0.024])
    ]

    assert least == pytest.approx([3 * 0.002, 3 * 0.012])
