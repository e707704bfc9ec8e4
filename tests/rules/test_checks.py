"""Every check passing, failing or warning, and not evaluated, each with its whole sentence; limits and who decides."""

from __future__ import annotations

import re

import numpy as np
import pytest
import statsmodels.api as sm

from rules.checks import Outcome
from rules.exceptions import LimitException
from rules.limits import parse_check_limits
from rules.method import AnalyteRules, Bench, Measure, Stock

#: y = 0.02 + 0.1 x, exact
NOMINAL, READ = [0, 5, 10], [0.02, 0.52, 1.02]
GOOD = ([0.2, 0.31, 0.39, 0.5], [0, 1, 2, 3.0])
LOQ = {"Zn": AnalyteRules(loq=Measure(0.2, "mg/L"))}


def at_least(concentration):
    """A range proved linear up to a concentration."""
    return {"Zn": AnalyteRules(linear_to=Measure(concentration, "mg/L"), proved_on="2026-03-02")}


@pytest.fixture(scope="session")
def of_one(outcomes, check, make_additions, make_standards, make_blanks):
    """One check of one series, from signals and additions, standards, check standards and blanks."""

    def made(name, additions=GOOD, standards=None, verify=None, blanks=None, rows=(), **method):
        rows = [*rows] or (make_additions(*additions) if additions else [])
        if standards:
            rows += make_standards(NOMINAL, standards)
        if verify:
            rows += make_standards(*verify, role="check_standard")
        if blanks:
            rows += make_blanks(blanks)
        out = outcomes(rows, **method)
        return out, check(out, name)

    return made


PASS, WARN, FAIL, NOT = Outcome.PASS, Outcome.WARN, Outcome.FAIL, Outcome.NOT_EVALUATED
CALIBRATED = {"standards": READ, "report": "calibration"}

STANDARDS = [
    {"role": "standard", "label": f"STD {n}", "nominal": n, "signal": s} for n, s in zip(NOMINAL, READ, strict=True)
]
CHECK = {"role": "check_standard", "label": "QC 5", "nominal": 5, "signal": 0.52}
ADDED = [
    {"sample": "RIV-17", "role": "spiked" if a else "unspiked", "signal": 0.2 + 0.1 * a, **({"added": a} if a else {})}
    for a in (0.0, 2.0, 4.0, 6.0)
]
DATED = {
    "rows": [
        {"sample": "RIV-17", "role": "spiked" if v else "unspiked", "signal": 0.2 + v / 25, "spike_volume": v or np.nan}
        for v in (0.0, 1.0, 2.0)
    ],
    "bench": Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL")),
}


def zinc_stock(**dates):
    """The stock of the additions, with its dates."""
    return (Stock("ZN-5", {"Zn": Measure(5, "mg/L")}, lot="7", **dates),)


def one(sample, signal, role="unspiked", **more):
    """A row of a sample."""
    return {"sample": sample, "role": role, "signal": signal, **more}


def by_calibration(*rows, **method):
    """What the calibration reports of rows that follow its standards."""
    return {"rows": [*STANDARDS, *rows], "report": "calibration", **method}


def spiked_blank(signal, **more):
    """Additions with standards and a spiked blank of 4 mg/L."""
    return {"rows": [*STANDARDS, *ADDED, one("SB-1", signal, "spiked_blank", label="SB-1", added=4.0)], **more}


def two_lines(native):
    """Additions seen on two lines with the same noise, the second of which sees another native."""
    rows = []
    for channel, seen in (("213.8", 2.0), ("202.5", native)):
        for k, a in enumerate((0.0, 1.0, 2.0, 3.0)):
            signal = 0.1 * (seen + a) + 0.004 * (-1) ** k
            rows.append(
                one("RIV-17", signal, "spiked" if a else "unspiked", channel=channel, **({"added": a} if a else {}))
            )
    return {"rows": rows}


SEVEN = [0.019, 0.020, 0.021, 0.020, 0.019, 0.021, 0.020]

CASES = [
    # --- stock
    (
        "stock",
        DATED | {"stocks": zinc_stock(valid_from=0.0, valid_until=100.0), "accepted_at": 50.0},
        PASS,
        "stock ZN-5 (lot 7) within its dates",
    ),
    (
        "stock",
        DATED | {"stocks": zinc_stock(valid_from=0.0, valid_until=100.0), "accepted_at": 200.0},
        FAIL,
        "stock ZN-5 (lot 7) was out of its dates when these were measured: RIV-17 1, RIV-17 2",
    ),
    ("stock", DATED | {"stocks": zinc_stock()}, NOT, "no stock with dates was used"),
    # --- spiked_blank
    ("spiked_blank", spiked_blank(0.42), PASS, "spiked blank SB-1 recovers 100 %"),
    ("spiked_blank", spiked_blank(0.30), FAIL, "spiked blank SB-1 recovers 70 %: stock or spiking suspect"),
    ("spiked_blank", {}, NOT, "no spiked blank in this export"),
    (
        "spiked_blank",
        {"rows": [*ADDED, one("SB-1", 0.42, "spiked_blank", label="SB-1", added=4.0)]},
        NOT,
        "spiked blanks were measured, and there is no calibration to read them back from",
    ),
    # --- duplicate
    (
        "duplicate",
        by_calibration(one("RIV-17", 0.52), one("RIV-17 D", 0.54, duplicate_of="RIV-17")),
        PASS,
        "RIV-17 and RIV-17 D differ by 3.9 % of their mean",
    ),
    (
        "duplicate",
        by_calibration(one("RIV-17", 0.52), one("RIV-17 D", 0.72, duplicate_of="RIV-17")),
        FAIL,
        "RIV-17 and RIV-17 D differ by 33 % of their mean: the sample is uneven, or one preparation went wrong",
    ),
    (
        "duplicate",
        by_calibration(
            one("RIV-17", 0.52),
            one("RIV-17 D", 0.72, duplicate_of="RIV-17"),
            analytes={"Zn": AnalyteRules(loq=Measure(2.5, "mg/L"))},
        ),
        PASS,
        "RIV-17 and RIV-17 D are low and differ within one limit of quantification (2.50 mg/L)",
    ),
    (
        "duplicate",
        by_calibration(
            one("RIV-17", 0.52),
            one("RIV-17 D", 0.72, duplicate_of="RIV-17"),
            analytes={"Zn": AnalyteRules(loq=Measure(1.5, "mg/L"))},
        ),
        FAIL,
        "RIV-17 and RIV-17 D are low and differ by more than one limit of quantification (1.50 mg/L)",
    ),
    (
        "duplicate",
        by_calibration(
            one("RIV-17", 0.22),
            one("RIV-17", 0.42, "spiked", added=2.0, label="RIV-17 MS"),
            one("RIV-17", 0.44, "spiked", added=2.0, label="RIV-17 MSD", duplicate_of="RIV-17"),
        ),
        PASS,
        "RIV-17 MS and RIV-17 MSD differ by 4.9 % of their mean",
    ),
    ("duplicate", {}, NOT, "no duplicate of it in this export"),
    (
        "duplicate",
        by_calibration(one("RIV-17 D", 0.72, duplicate_of="RIV-17")),
        NOT,
        "its original 'RIV-17' is not in this export",
    ),
    (
        "duplicate",
        {
            "rows": [
                *ADDED,
                one("RIV-17", 0.4, "spiked", added=1.5, label="RIV-17 MSD", duplicate_of="RIV-17"),
            ]
        },
        NOT,
        "RIV-17 MSD has no other portion with the same addition",
    ),
    # --- channels_agree
    (
        "channels_agree",
        two_lines(2.1),
        PASS,
        "213.8 gives 2.06 and 202.5 2.16 mg/L, 0.83 standard uncertainties apart",
    ),
    (
        "channels_agree",
        two_lines(2.35),
        WARN,
        "213.8 gives 2.06 and 202.5 2.41 mg/L, 2.8 standard uncertainties apart: one of them is interfered with",
    ),
    (
        "channels_agree",
        two_lines(3.0),
        FAIL,
        "213.8 gives 2.06 and 202.5 3.07 mg/L, 7.4 standard uncertainties apart: one of them is interfered with",
    ),
    (
        "channels_agree",
        {"rows": [*two_lines(2.0)["rows"][:4], one("RIV-17", 0.3, channel="202.5")]},
        NOT,
        "another line or mass has no result with an uncertainty",
    ),
    ("channels_agree", {}, NOT, "measured on one line or mass only"),
    # --- dilution_test
    (
        "dilution_test",
        {"rows": [one("RIV-17", 0.52), one("RIV-17", 0.12, predilution=5.0), *ADDED[1:]]},
        PASS,
        "diluted, the sample differs from its undiluted reading by 15 % (baseline shift 0.0200)",
    ),
    (
        "dilution_test",
        {"rows": [one("RIV-17", 0.6), one("RIV-17", 0.2, predilution=5.0), *ADDED[1:]]},
        FAIL,
        (
            "diluted, the sample differs from its undiluted reading by 67 % (baseline shift 0.100): the matrix shifts "
            "the baseline, which additions do not correct"
        ),
    ),
    (
        "dilution_test",
        by_calibration(one("RIV-17", 0.52), one("RIV-17", 0.12, predilution=5.0)),
        PASS,
        "diluted, the sample differs from its undiluted reading by 0.0 % (baseline shift 0)",
    ),
    (
        "dilution_test",
        {},
        NOT,
        "unspiked at one dilution only: nothing shows whether the baseline shifts",
    ),
    (
        "dilution_test",
        by_calibration(
            one("RIV-17", 0.52),
            one("RIV-17", 0.12, predilution=5.0),
            analytes={"Zn": AnalyteRules(loq=Measure(2, "mg/L"))},
        ),
        NOT,
        "the diluted solution is too low to judge the baseline by",
    ),
    # --- bracket
    (
        "bracket",
        {"rows": [*STANDARDS, CHECK, *ADDED, CHECK | {"label": "QC 6", "signal": 0.53}]},
        PASS,
        "the check standards before and after hold, the farthest is QC 6 with 102 %",
    ),
    (
        "bracket",
        {"rows": [*STANDARDS, *ADDED, CHECK]},
        PASS,
        "the check standards before and after hold, the farthest is QC 5 with 100 %",
    ),
    (
        "bracket",
        {"rows": [*STANDARDS, CHECK, *ADDED, CHECK | {"label": "QC 6", "signal": 0.62}]},
        FAIL,
        "check standard QC 6 of its bracket reads 120 % of nominal",
    ),
    (
        "bracket",
        {"rows": [*STANDARDS, CHECK, *ADDED]},
        NOT,
        "no check standard was measured after it, the last one is on line 5",
    ),
    (
        "bracket",
        {"rows": [*ADDED, CHECK, *STANDARDS]},
        NOT,
        "no check standard and no calibration was measured before it: the bracket is open",
    ),
    ("bracket", {"rows": [*STANDARDS, *ADDED]}, NOT, "no check standard in this export"),
    (
        "bracket",
        {"rows": [CHECK, *ADDED, CHECK]},
        NOT,
        "there is no calibration to read the check standards back from",
    ),
    # --- detection of what is read back
    (
        "detection",
        by_calibration(one("RIV-17", 0.52), blanks=SEVEN, blank="none"),
        PASS,
        "above the decision limit of 7 blanks",
    ),
    (
        "detection",
        by_calibration(one("RIV-17", 0.03), analytes={"Zn": AnalyteRules(lod=Measure(0.3, "mg/L"))}),
        PASS,
        "not detected: less than 0.300 mg/L, the limit of the laboratory",
    ),
    (
        "detection",
        by_calibration(
            one("RIV-17", 0.05),
            analytes={"Zn": AnalyteRules(lod=Measure(0.3, "mg/L"), loq=Measure(1, "mg/L"))},
        ),
        WARN,
        "detected, and below the limit of quantification (1.00 mg/L in the vessel)",
    ),
    (
        "detection",
        by_calibration(one("RIV-17", 0.52)),
        NOT,
        "no limit of detection: measure 7 blanks, or state analytes.lod",
    ),
    # --- inputs
    ("inputs", {}, PASS, "all cells readable, volumes and concentrations possible"),
    (
        "inputs",
        {"additions": ([0.2, np.nan, 0.4], [0, 1, 2.0])},
        FAIL,
        "line 3, RIV-17 1: no signal: correct the export or measure it again",
    ),
    (
        "inputs",
        {"blanks": [0.01]},
        FAIL,
        (
            "blanks were measured and the settings do not say what to do with them: state blank: subtract, "
            "preparation or "
            "none"
        ),
    ),
    (
        "inputs",
        {"blank": "subtract"},
        FAIL,
        "the settings say blank: subtract, and the export holds no blank for Zn: measure one, or state blank: none",
    ),
    # --- levels
    ("levels", {}, PASS, "3 distinct additions"),
    (
        "levels",
        {"additions": ([0.2, 0.31, 0.32], [0, 1, 1.0])},
        WARN,
        "1 distinct addition: linearity cannot be seen; three near 50, 100 and 150 % of the native level show it",
    ),
    ("levels", {"additions": ([0.2], [0])}, NOT, "no additions were made"),
    ("levels", {"additions": ([0.3, 0.4], [1, 2.0])}, NOT, "no unspiked solution"),
    # --- slope_certainty, correlation, curvature: g, r and p computed with statsmodels from the same numbers
    (
        "slope_certainty",
        {"additions": ([0.2, 0.31, 0.40, 0.5], [0, 1, 2, 3.0])},
        PASS,
        "the slope is certain (g = 0.0132)",
    ),
    (
        "slope_certainty",
        {"additions": ([0.9, 1.22, 1.38, 1.8], [0, 1, 2, 3.0])},
        WARN,
        "the slope is uncertain (g = 0.256): the interval is wide and lopsided",
    ),
    (
        "slope_certainty",
        {"additions": ([0.2, 0.305, 0.395], [0, 1, 2.0])},
        WARN,
        "three solutions leave one degree of freedom: a slope is hardly certain (g = 0.318)",
    ),
    (
        "slope_certainty",
        {"additions": ([1.0, 3.0, 2.0, 3.2], [0, 1, 2, 3.0])},
        FAIL,
        "the slope is too uncertain (g = 8.93): no finite interval, so no concentration",
    ),
    (
        "slope_certainty",
        {"additions": ([0.5, 0.4, 0.3], [0, 1, 2.0])},
        FAIL,
        "the signal does not rise with the additions: no concentration can be given",
    ),
    (
        "slope_certainty",
        {"additions": ([0.2, 0.5], [0, 3.0])},
        NOT,
        "the scatter of the line is unknown, so the certainty of its slope is too",
    ),
    # --- correlation
    ("correlation", {}, PASS, "r = 0.99813 over 4 solutions"),
    (
        "correlation",
        {"additions": ([0.2, 0.4, 0.42, 0.8], [0, 1, 2, 3.0])},
        WARN,
        "r = 0.93785: the solutions do not lie on a line",
    ),
    (
        "correlation",
        {"additions": ([1.0, 1.13, 1.17, 1.3], [0, 1, 2, 3.0])},
        WARN,
        "r = 0.98216 with additions smaller than the native level: larger additions, before doubting linearity",
    ),
    ("correlation", {"additions": ([0.2, 0.5], [0, 3.0])}, NOT, "two solutions always lie on a line"),
    (
        "correlation",
        {"additions": ([0.5, 0.5, 0.5], [0, 1, 2.0])},
        NOT,
        "the signal does not change with the additions",
    ),
    ("correlation", {"additions": ([0.2, np.nan, 0.5], [0, 1, 2.0])}, NOT, "the inputs are faulty"),
    # --- curvature
    ("curvature", {}, PASS, "no bend seen (p = 1.0); so few solutions cannot see a droop of 10 %"),
    (
        "curvature",
        {"additions": ([0.2, 0.301, 0.399, 0.501, 0.599, 0.701, 0.7995, 0.9], list(range(8)))},
        PASS,
        "no bend seen (p = 0.97)",
    ),
    (
        "curvature",
        {"additions": ([0.200, 0.300, 0.381, 0.440, 0.482], [0, 1, 2, 3, 4.0])},
        FAIL,
        "the line is bent (p = 0.00048): the extrapolation is not valid",
    ),
    (
        "curvature",
        {"additions": ([0.2, 0.31, 0.5], [0, 1, 3.0])},
        NOT,
        "a bend needs three distinct levels and four solutions",
    ),
    (
        "curvature",
        {"additions": ([0.25, 0.5, 0.75, 1.0], [0, 1, 2, 3.0])},
        NOT,
        "no scatter at the export's resolution, so a bend cannot be told from rounding",
    ),
    # --- lack of fit
    (
        "lack_of_fit",
        {"additions": ([0.200, 0.206, 0.302, 0.296, 0.401, 0.398], [0, 0, 1, 1, 2, 2.0])},
        PASS,
        "the line meets its 3 levels within the scatter of repeats (p = 0.53)",
    ),
    (
        "lack_of_fit",
        {"additions": ([0.2000, 0.2005, 0.3500, 0.3495, 0.4000, 0.4005], [0, 0, 1, 1, 2, 2.0])},
        FAIL,
        "the line misses its levels by more than repeats scatter (p < 0.0001)",
    ),
    (
        "lack_of_fit",
        {"additions": ([0.200, 0.200, 0.301, 0.400], [0, 0, 1, 2.0])},
        NOT,
        "the repeated preparations show no scatter at the export's resolution",
    ),
    ("lack_of_fit", {}, NOT, "lack of fit needs three levels and a preparation that was repeated"),
    # --- residual: line 0.203 + 0.098 A, so 0.31 lies 0.009 off 0.301
    ("residual", {}, PASS, "largest residual 3.0 %, at RIV-17 1"),
    (
        "residual",
        {"additions": ([0.2, 0.4, 0.42, 0.8], [0, 1, 2, 3.0])},
        FAIL,
        "RIV-17 2 lies 23 % off the line of the others",
    ),
    ("residual", {"additions": ([0.2, 0.5], [0, 3.0])}, NOT, "an exact line has no residuals"),
    # --- addition_size
    ("addition_size", {}, PASS, "the top addition is 1.4 times the native level"),
    (
        "addition_size",
        {"additions": ([1.0, 1.101, 1.199, 1.3], [0, 1, 2, 3.0])},
        FAIL,
        "the top addition is 0.30 times the native level: too small to measure it well",
    ),
    (
        "addition_size",
        {"additions": ([0.020, 0.121, 0.219, 0.32], [0, 1, 2, 3.0])},
        FAIL,
        "the top addition is 15 times the native level: too large to measure it well",
    ),
    (
        "addition_size",
        {"additions": ([0.001, 0.11, 0.19, 0.31], [0, 1, 2, 3.0])},
        NOT,
        "no native level was found, so additions have nothing to be compared with",
    ),
    # --- recovery
    ("recovery", {"additions": ([0.22, 0.42, 0.62], [0, 2, 4.0]), **CALIBRATED}, PASS, "slope recovery 100 %"),
    ("recovery", {"additions": ([0.22, 0.67], [0, 5.0]), **CALIBRATED}, PASS, "recovery 90 %"),
    (
        "recovery",
        {"additions": ([0.22, 0.525], [0, 5.0]), **CALIBRATED},
        FAIL,
        "recovery 61 %: less of the added Zn is found than was added",
    ),
    (
        "recovery",
        {"additions": ([0.22, 0.52, 0.82], [0, 2, 4.0]), **CALIBRATED},
        FAIL,
        "slope recovery 150 %: more of the added Zn is found than was added",
    ),
    ("recovery", {}, NOT, "nothing independent of the additions: their own line always recovers 100 %"),
    (
        "recovery",
        {"additions": ([0.82, 0.85], [0, 1.0]), **CALIBRATED},
        NOT,
        "the spike is too small for a recovery",
    ),
    ("recovery", {"additions": ([0.22], [0]), **CALIBRATED}, NOT, "no additions were made"),
    # --- spike_size
    (
        "spike_size",
        {"additions": ([0.22, 0.67], [0, 5.0]), **CALIBRATED},
        PASS,
        "the spike is 250 % of the native level",
    ),
    (
        "spike_size",
        {"additions": ([0.82, 0.90], [0, 0.8]), **CALIBRATED},
        WARN,
        "the spike is 10 % of the native level: too small for a recovery, so recovery is not evaluated",
    ),
    (
        "spike_size",
        {"additions": ([0.01, 0.52], [0, 5.0]), **CALIBRATED},
        PASS,
        "no native level to speak of: any spike is large enough",
    ),
    ("spike_size", {}, NOT, "nothing independent of the additions: their own line always recovers 100 %"),
    (
        "spike_size",
        {"additions": ([1.2, 1.1, 1.0], [0, 1, 2.0]), **CALIBRATED},
        NOT,
        "no addition or no native level to compare",
    ),
    # --- matrix_effect
    (
        "matrix_effect",
        {"additions": ([0.22, 0.40, 0.58], [0, 2, 4.0]), **CALIBRATED},
        PASS,
        "the matrix changes the slope by -10 %",
    ),
    (
        "matrix_effect",
        {"additions": ([0.22, 0.36, 0.50], [0, 2, 4.0]), **CALIBRATED},
        WARN,
        "the matrix lowers the slope by 30 %: the calibration does not hold in this matrix",
    ),
    (
        "matrix_effect",
        {"additions": ([0.22, 0.52, 0.82], [0, 2, 4.0]), "standards": READ},
        WARN,
        "the matrix raises the slope by 50 %: the additions correct it",
    ),
    ("matrix_effect", {}, NOT, "nothing independent of the additions: their own line always recovers 100 %"),
    # --- repeatability: 0.19, 0.20, 0.21 scatter by 5.0 %, 0.9, 1.0, 1.2 by 14.8 %
    (
        "repeatability",
        {"additions": ([[0.198, 0.2, 0.202], [0.5, 0.5, 0.5]], [0, 3.0])},
        PASS,
        "the readings of RIV-17 0 scatter by 1.0 %",
    ),
    (
        "repeatability",
        {"additions": ([[0.188, 0.2, 0.212], [0.5, 0.5, 0.5]], [0, 3.0])},
        WARN,
        "the readings of RIV-17 0 scatter by 6.0 %: measure that solution again",
    ),
    (
        "repeatability",
        {"additions": ([[0.2, 0.2, 0.2], [0.9, 1.0, 1.2]], [0, 3.0])},
        FAIL,
        "the readings of RIV-17 1 scatter by 15 %: measure that solution again",
    ),
    ("repeatability", {}, NOT, "no solution with repeated readings high enough to judge"),
    # --- check_standard
    (
        "check_standard",
        {"standards": READ, "verify": ([5], [0.50])},
        PASS,
        "check standard check_standard 5 reads 96 % of nominal",
    ),
    (
        "check_standard",
        {"standards": READ, "verify": ([5, 5], [0.52, 0.60])},
        FAIL,
        "check standard check_standard 5 reads 116 % of nominal: the calibration does not hold",
    ),
    ("check_standard", {"standards": READ}, NOT, "no check standard in this export"),
    (
        "check_standard",
        {"verify": ([5], [0.50])},
        NOT,
        "check standards were measured, and there is no calibration to read them back from",
    ),
    # --- blank: LOQ 0.2, so 0.1 mg/L is the limit
    (
        "blank",
        {"standards": READ, "blanks": [0.021, 0.025], "blank": "none", "analytes": LOQ},
        PASS,
        "blank BLK 2 reads 0.0500 mg/L",
    ),
    (
        "blank",
        {"standards": READ, "blanks": [0.021, 0.040], "blank": "none", "analytes": LOQ},
        FAIL,
        "blank BLK 2 reads 0.200 mg/L: the batch is contaminated or carries over",
    ),
    ("blank", {}, NOT, "no blank in this export"),
    ("blank", {"blanks": [0.02], "blank": "none", "analytes": LOQ}, NOT, "no calibration to judge blanks by"),
    (
        "blank",
        {"standards": READ, "blanks": [0.02], "blank": "none"},
        NOT,
        "no limit of quantification (analytes.loq) to judge blanks by",
    ),
    # --- linear_evidence: C = 0.203/0.098 = 2.07, so the top solution reads 5.07
    (
        "linear_evidence",
        {"analytes": at_least(6)},
        PASS,
        "the highest solution reads 5.07 mg/L, inside the proved range of 2026-03-02 (6.00 mg/L)",
    ),
    (
        "linear_evidence",
        {"analytes": at_least(5)},
        FAIL,
        "the highest solution reads 5.07 mg/L, beyond the proved range of 2026-03-02 (5.00 mg/L)",
    ),
    (
        "linear_evidence",
        {"additions": ([0.22, 0.67], [0, 5.0]), **CALIBRATED},
        PASS,
        "the highest solution reads 2.00 mg/L, inside the top standard (10.0 mg/L)",
    ),
    (
        "linear_evidence",
        {"additions": ([1.22, 1.67], [0, 5.0]), **CALIBRATED},
        FAIL,
        "the highest solution reads 12.0 mg/L, beyond the top standard (10.0 mg/L)",
    ),
    (
        "linear_evidence",
        {"additions": ([0.01, 0.52], [0, 5.0]), **CALIBRATED},
        WARN,
        "the result lies below the lowest standard (0 mg/L)",
    ),
    (
        "linear_evidence",
        {},
        NOT,
        "nothing shows up to where the response is linear: state analytes.linear_to or measure standards",
    ),
    # --- detection
    ("detection", {}, PASS, "distinguished from zero"),
    (
        "detection",
        {"additions": ([-0.50, -0.401, -0.299, -0.2], [0, 1, 2, 3.0])},
        WARN,
        "the result lies below zero by more than its uncertainty: the baseline or the blank is off",
    ),
    (
        "detection",
        {
            "additions": ([0.030, 0.131, 0.229, 0.33], [0, 1, 2, 3.0]),
            "blanks": [0.002, 0.018],
            "blank": "subtract",
        },
        WARN,
        "not distinguishable from zero",
    ),
    (
        "detection",
        {"additions": ([0.2, 0.5], [0, 3.0])},
        NOT,
        "without an interval nothing can be said of detection",
    ),
]


@pytest.mark.parametrize(
    ("name", "given", "outcome", "sentence"),
    CASES,
    ids=[f"{name} {outcome.word} {i}" for i, (name, _, outcome, _) in enumerate(CASES)],
)
def test_a_check_has_outcome_and_sentence(of_one, name, given, outcome, sentence):
    """Outcome and the whole sentence of every check in every case."""
    _, check = of_one(name, **given)

    assert check.sentence(0) == sentence
    assert Outcome(int(check.outcome[0])) is outcome


def test_every_check_is_covered(of_one):
    """The cases above hold each check in passing, not passing and not evaluated; inputs is always evaluated."""
    out, _ = of_one("inputs")

    for check in out.checks:
        found = {outcome for name, _, outcome, _ in CASES if name == check.name}
        assert PASS in found, check.name
        assert found & {WARN, FAIL}, check.name
        assert NOT in found or check.name == "inputs", check.name


def test_not_detected_is_a_result_and_passes_detection(of_one):
    """A native within the scatter of its line is told as less than, and no warning."""
    out, check = of_one("detection", ([0.001, 0.11, 0.19, 0.31], [0, 1, 2, 3.0]))

    assert check.outcome[0] == PASS
    assert check.sentence(0).startswith("not detected: less than ")
    assert f"< {check.sentence(0).split('less than ')[1]} (not detected, 95 %)" == out.text(0)


def test_checks_judge_the_result_that_is_reported(of_one):
    """A bad default recovery decides on a calibration result and not on the additions' result, where it is shown."""
    additions = ([0.22, 0.341, 0.459, 0.58], [0, 2, 4, 6.0])

    by_calibration, _ = of_one("recovery", additions, **CALIBRATED)
    by_additions, shown = of_one("recovery", additions, standards=READ)

    assert by_calibration.failed_checks(0) == ("recovery",)
    assert by_additions.verdict_of(0).word == "pass"
    assert shown.outcome[0] == FAIL


def test_a_stated_fail_limit_decides_whatever_is_reported(of_one):
    """The same recovery fails the additions' result where the laboratory itself states the limit."""
    limits = {"recovery": parse_check_limits("75 to 125 %")}

    out, _ = of_one("recovery", ([0.22, 0.341, 0.459, 0.58], [0, 2, 4, 6.0]), standards=READ, limits=limits)

    assert out.failed_checks(0) == ("recovery",)
    assert out.headline(0) == "recovery 60 % (limits 75 to 125)"


def test_a_stated_warning_decides_only_on_its_own_result(of_one):
    """A stated warn limit of another result's check is shown and does not warn."""
    limits = {"recovery": parse_check_limits({"warn": "75 to 125 %"})}

    out, check = of_one("recovery", ([0.22, 0.341, 0.459, 0.58], [0, 2, 4, 6.0]), standards=READ, limits=limits)

    assert check.outcome[0] == WARN
    assert out.verdict_of(0).word == "pass"


def test_limits_hold_analyte_by_analyte(outcomes, check, make_additions, make_standards):
    """Hg with limits of its own passes at 61 %, Zn in the same export fails."""
    rows = []
    for analyte in ("Zn", "Hg"):
        rows += make_standards(NOMINAL, READ, analyte=analyte)
        rows += make_additions([0.22, 0.525], [0, 5.0], analyte=analyte)
    analytes = {"Hg": AnalyteRules(limits={"recovery": parse_check_limits("60 to 140 %")})}

    out = outcomes(rows, report="calibration", analytes=analytes)

    assert [out.case.analyte(i) for i in range(2)] == ["Zn", "Hg"]
    assert check(out, "recovery").outcome.tolist() == [FAIL, PASS]
    assert [check(out, "recovery").limit_text(out.case, i) for i in range(2)] == [
        "fail unless 75 to 125 %",
        "fail unless 60 to 140 %",
    ]


def test_a_check_can_be_switched_off(of_one):
    """Off is not evaluated, says so and decides nothing."""
    out, check = of_one(
        "curvature",
        ([0.200, 0.300, 0.381, 0.440, 0.482], [0, 1, 2, 3, 4.0]),
        limits={
            "curvature": parse_check_limits("off"),
            "correlation": parse_check_limits("off"),
        },
    )

    assert check.outcome[0] == NOT
    assert check.sentence(0) == "curvature: switched off in the settings"
    assert "curvature" not in out.failed_checks(0)


@pytest.mark.parametrize("signals", [[0.5, 0.4, 0.3, 0.2], [1.0, 3.0, 2.0, 3.2]], ids=["falling", "too uncertain"])
def test_off_never_lets_a_missing_number_pass(of_one, signals):
    """With every check switched off a series without a number still fails, with the reason."""
    off = {
        name: parse_check_limits("off")
        for name in ("levels", "slope_certainty", "correlation", "curvature", "residual", "addition_size")
    }

    out, _ = of_one("inputs", (signals, [0, 1, 2, 3.0]), limits=off)

    assert out.verdict_of(0).word == "fail"
    assert out.reasons(0)[0].startswith("no result: ")


def test_a_generous_limit_never_lets_a_missing_number_pass(of_one):
    """slope_certainty: below 100 lets g = 8.9 pass, and the series without number fails all the same."""
    limits = {
        "slope_certainty": parse_check_limits("below 100"),
        "residual": parse_check_limits("off"),
    }

    out, check = of_one("slope_certainty", ([1.0, 3.0, 2.0, 3.2], [0, 1, 2, 3.0]), limits=limits)

    assert check.outcome[0] == PASS
    assert out.verdict_of(0).word == "fail"
    assert "inputs" in out.failed_checks(0)


def test_a_spike_of_the_lab_s_own_size_lets_the_recovery_be_judged(of_one):
    """With spike_size off a small spike is judged by its recovery."""
    _, check = of_one(
        "recovery", ([0.82, 0.85], [0, 1.0]), **CALIBRATED, limits={"spike_size": parse_check_limits("off")}
    )

    assert check.outcome[0] == FAIL


@pytest.mark.parametrize(("limit", "outcome"), [("90 to 120 %", FAIL), ("80 to 120 %", PASS)])
def test_the_check_standard_outside_the_limits_is_the_one_shown(of_one, limit, outcome):
    """Of 88 and 114 % the first fails 90 to 120 % although the second lies farther from 100."""
    _, check = of_one(
        "check_standard",
        standards=READ,
        verify=([5, 5], [0.02 + 0.1 * 4.4, 0.02 + 0.1 * 5.7]),
        limits={"check_standard": parse_check_limits(limit)},
    )

    assert check.outcome[0] == outcome
    assert check.value[0] == pytest.approx(88 if outcome == FAIL else 114)


def test_a_blank_far_below_zero_is_judged_by_a_two_sided_limit(of_one):
    """Where the laboratory limits blanks on both sides, one at -1.5 LOQ fails beside one at zero."""
    _, check = of_one(
        "blank",
        standards=READ,
        blanks=[0.02, -0.01],
        blank="none",
        analytes=LOQ,
        limits={"blank": parse_check_limits("-1 to 1 LOQ")},
    )

    assert check.outcome[0] == FAIL
    assert check.value[0] == pytest.approx(-1.5)


def test_repeatability_leaves_low_readings_alone(of_one):
    """Scatter below ten blanks, or below the limit of quantification, is no fault of the sample."""
    additions = ([[0.03, 0.05], [0.5, 0.5]], [0, 3.0])

    _, by_blank = of_one("repeatability", additions, blanks=[0.01], blank="none")
    _, by_loq = of_one(
        "repeatability", additions, standards=READ, analytes={"Zn": AnalyteRules(loq=Measure(1, "mg/L"))}
    )
    _, neither = of_one("repeatability", additions)

    assert by_blank.value[0] == 0
    assert by_loq.value[0] == 0
    assert neither.outcome[0] == FAIL


def test_repeatability_of_standards_counts_for_what_is_read_from_them(outcomes, check, make_additions, make_standards):
    """A scattering standard fails a calibration result and leaves an additions result alone."""
    rows = make_additions([0.22, 0.421, 0.619], [0, 2, 4.0]) + make_standards(NOMINAL, [0.02, [0.4, 0.64], 1.02])

    by_calibration = check(outcomes(rows, report="calibration"), "repeatability")
    by_additions = check(outcomes(rows), "repeatability")

    assert by_calibration.outcome[0] == FAIL
    assert by_calibration.sentence(0) == "the readings of standard 5 scatter by 33 %: measure that solution again"
    assert by_additions.outcome[0] == NOT


def test_residual_of_a_native_near_zero_is_taken_of_a_tenth_of_the_top(of_one):
    """A native of almost no signal has its residual compared with a tenth of the top signal."""
    _, check = of_one("residual", ([0.0, 0.101, 0.199, 0.3], [0, 1, 2, 3.0]))

    fitted = np.polyval(np.polyfit([0, 1, 2, 3], [0.0, 0.101, 0.199, 0.3], 1), [0, 1, 2, 3])
    expected = 100 * np.max(np.abs(fitted - [0.0, 0.101, 0.199, 0.3]) / np.maximum(fitted, 0.1 * fitted.max()))
    assert check.value[0] == pytest.approx(expected)


def test_top_addition_is_compared_in_the_aliquot(of_one):
    """Predilution changes neither the size of the addition nor that of the spike."""
    for name in ("addition_size", "spike_size"):
        _, plain = of_one(name, standards=READ)
        _, diluted = of_one(name, standards=READ, bench=Bench(predilution=10))

        assert diluted.value[0] == pytest.approx(plain.value[0])


def test_checks_rest_on_named_lines(of_one):
    """Most checks rest on the lines of their series, a residual on its worst solution, a check standard on its own."""
    out, residual = of_one("residual", standards=READ, verify=([5], [0.50]))
    by_name = {check.name: check for check in out.checks}

    assert by_name["correlation"].lines(0) == [2, 3, 4, 5]
    assert residual.lines(0) == [3]
    assert by_name["check_standard"].lines(0) == [9]
    assert by_name["blank"].lines(0) == []


@pytest.mark.parametrize("native", [2.1, 2.35, 3.0])
def test_lines_are_compared_by_their_own_uncertainties(of_one, native):
    """The distance of two lines is that of statsmodels' intercepts over slopes, with their covariances."""
    rows = two_lines(native)["rows"]
    found = []
    for channel in ("213.8", "202.5"):
        of_line = [row for row in rows if row["channel"] == channel]
        added = np.array([row.get("added", 0.0) for row in of_line])
        fit = sm.OLS(np.array([row["signal"] for row in of_line]), sm.add_constant(added)).fit()
        a, b = fit.params
        gradient = np.array([1 / b, -a / b**2])
        found.append((a / b, gradient @ fit.cov_params() @ gradient))
    (first, v_first), (second, v_second) = found

    _, check = of_one("channels_agree", rows=rows)

    assert check.value[0] == pytest.approx(abs(first - second) / np.sqrt(v_first + v_second), rel=1e-9)
    assert check.value[1] == check.value[0]


def test_limits_of_seven_blanks_are_those_of_their_scatter(of_one):
    """L_C = t(0.99, 6) s √(1 + 1/7)/b, LOD twice that and LOQ ten s/b; t(0.99, 6) = 3.143 (40 CFR 136, appendix B)."""
    given = by_calibration(one("RIV-17", 0.52), blanks=SEVEN, blank="none")
    del given["report"]

    out, _ = of_one("detection", report="calibration", **given)

    s = np.std(SEVEN, ddof=1)
    limits, key = out.case.limits, out.case.key[0]
    assert limits.decision[key] == pytest.approx(3.143 * s * np.sqrt(8 / 7) / 0.1, rel=2e-4)
    assert limits.lod[key] == pytest.approx(2 * limits.decision[key])
    assert limits.loq[key] == pytest.approx(10 * s / 0.1)


def test_a_read_back_below_its_decision_limit_is_less_than_the_limit_of_detection(of_one):
    """What cannot be told from a blank is reported as less than the LOD in the sample, dilution counted."""
    given = by_calibration(one("RIV-17", 0.022, predilution=10.0), blanks=SEVEN, blank="none")

    out, check = of_one("detection", **given)

    lod = 10 * out.case.limits.lod[out.case.key[0]]
    assert check.sentence(0) == f"not detected: less than {lod:.3g} mg/L, the limit of 7 blanks"
    assert out.text(0) == f"< {lod:.3g} mg/L (not detected, limit of detection)"


def test_exceptions_hold_for_the_samples_that_they_name(of_one):
    """The first exception that finds the sample and states the check decides; others are judged as usual."""
    exceptions = (
        LimitException(re.compile("^SED-"), frozenset({"Hg"}), {"residual": parse_check_limits("off")}),
        LimitException(re.compile("^RIV-"), frozenset(), {"residual": parse_check_limits("at most 0.1 %")}),
        LimitException(re.compile("17$"), frozenset({"Zn"}), {"residual": parse_check_limits("off")}),
    )

    _, named = of_one("residual", exceptions=exceptions)
    _, usual = of_one("residual", exceptions=exceptions[:1])

    assert Outcome(int(named.outcome[0])) is FAIL
    assert named.limit_text(of_one("residual", exceptions=exceptions)[0].case, 0) == "fail unless at most 0.1 %"
    assert Outcome(int(usual.outcome[0])) is PASS


def test_spiked_blanks_of_another_stock_say_nothing(of_one):
    """A spiked blank from another stock does not judge a series; one from the same stock does, whatever else fails."""
    stocks = (
        Stock("ZN-5", {"Zn": Measure(5, "mg/L")}),
        Stock("ZN-9", {"Zn": Measure(5, "mg/L")}),
    )
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))
    series = [
        one("RIV-17", 0.05 + 0.01 * v, "spiked" if v else "unspiked", stock="ZN-5", spike_volume=v or np.nan)
        for v in (0.0, 10.0, 20.0)
    ]
    other, same = (
        one("SB", signal, "spiked_blank", label=f"SB {stock}", stock=stock, spike_volume=10.0)
        for stock, signal in (("ZN-9", 0.05), ("ZN-5", 0.12))
    )

    _, foreign = of_one("spiked_blank", rows=[*STANDARDS, *series, other], stocks=stocks, bench=bench)
    _, own = of_one("spiked_blank", rows=[*STANDARDS, *series, other, same], stocks=stocks, bench=bench)

    assert foreign.sentence(0) == "the spiked blanks were made from other stocks"
    assert own.sentence(0) == "spiked blank SB ZN-5 recovers 100 %"
