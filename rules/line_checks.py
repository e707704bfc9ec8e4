"""Checks of the line through the additions: how many, how certain, how straight, how well placed."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rules import lack_of_fit as lack_of_fit_test
from rules.case import Reported
from rules.checks import Check, Outcome, judged, percents
from rules.detection_limits import LEAST_PREPARATIONS
from rules.figures import figure, probability
from rules.lack_of_fit import LEAST_LEVELS
from rules.substances import of_analytes

if TYPE_CHECKING:
    from rules.case import Case
    from rules.line import Floats

#: Below so many degrees of freedom a droop of 10 % stays unseen more often than not (method, section 8).
FEW_DOF = 5
NO_LINE = "no line can be drawn"


def levels(case: Case) -> Check:
    """Distinct additions above zero. EPA SW-846 7000B, 9.10."""
    value = np.where(case.judged, case.fits.spread(case.fits.distinct.astype(float)), np.nan)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return NO_LINE
        count = int(value[i])
        counted = f"{count} distinct addition{'s' if count != 1 else ''}"
        if outcome is Outcome.PASS:
            return counted
        return f"{counted}: linearity cannot be seen; three near 50, 100 and 150 % of the native level show it"

    return judged(case, "levels", Reported.ADDITIONS, "", value, sentence)


def slope_certainty(case: Case) -> Check:
    """Check g of Fieller's interval: at 1 or above the interval is not finite."""
    slope = case.fits.spread(case.fits.lines.slope)
    with np.errstate(invalid="ignore"):
        flat = slope <= 0
    value = np.where(flat, np.inf, case.fits.spread(case.interval.g))
    drawn = np.isfinite(slope)
    n = case.fits.spread(case.fits.lines.n.astype(float))

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return "the scatter of the line is unknown, so the certainty of its slope is too" if drawn[i] else NO_LINE
        if flat[i]:
            return "the signal does not rise with the additions: no concentration can be given"
        if outcome is Outcome.FAIL:
            return f"the slope is too uncertain (g = {figure(value[i])}): no finite interval, so no concentration"
        if outcome is Outcome.WARN and n[i] == 3:
            return f"three solutions leave one degree of freedom: a slope is hardly certain (g = {figure(value[i])})"
        if outcome is Outcome.WARN:
            return f"the slope is uncertain (g = {figure(value[i])}): the interval is wide and lopsided"
        return f"the slope is certain (g = {figure(value[i])})"

    check = judged(case, "slope_certainty", Reported.ADDITIONS, "", value, sentence)
    # infinite stands for "does not rise": it is judged so, and has no number to show
    return Check(
        check.name,
        check.judges,
        check.unit,
        np.where(flat, np.nan, value),
        check.outcome,
        check.limits,
        check.sentence,
        check.lines,
    )


def correlation(case: Case) -> Check:
    """Judge r of the additions line. EPA SW-846 7000B, 9.10; not evaluated for two solutions, where it is always 1."""
    value = case.fits.spread(case.fits.lines.correlation)
    short_span = case.top_addition < case.native
    n, drawn = case.fits.spread(case.fits.lines.n.astype(float)), np.isfinite(case.fits.spread(case.fits.lines.slope))

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if n[i] == 2:
                return "two solutions always lie on a line"
            return "the signal does not change with the additions" if drawn[i] else NO_LINE
        r = f"r = {value[i]:.5f}"
        if outcome is Outcome.PASS:
            return f"{r} over {int(n[i])} solutions"
        if short_span[i]:
            return f"{r} with additions smaller than the native level: larger additions, before doubting linearity"
        return f"{r}: the solutions do not lie on a line"

    return judged(case, "correlation", Reported.ADDITIONS, "", value, sentence)


def curvature(case: Case) -> Check:
    """Judge p of the quadratic term. J. Mandel, The Statistical Analysis of Experimental Data (1964)."""
    value = case.fits.spread(case.fits.lines.curvature_p)
    dof = case.fits.spread(case.fits.lines.dof.astype(float)) - 1
    scatter = case.fits.spread(case.fits.lines.scatter.astype(float))
    drawn = np.isfinite(case.fits.spread(case.fits.lines.slope))

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if not drawn[i]:
                return NO_LINE
            if scatter[i] == 0 and dof[i] > 0:
                return "no scatter at the export's resolution, so a bend cannot be told from rounding"
            return "a bend needs three distinct levels and four solutions"
        if outcome is Outcome.PASS:
            blind = "; so few solutions cannot see a droop of 10 %" if dof[i] < FEW_DOF else ""
            return f"no bend seen ({probability(value[i])}){blind}"
        return f"the line is bent ({probability(value[i])}): the extrapolation is not valid"

    return judged(case, "curvature", Reported.ADDITIONS, "", value, sentence)


def lack_of_fit(case: Case) -> Check:
    """Judge p of the lack of fit against repeated preparations. N. R. Draper, H. Smith (1998)."""
    fits = case.fits
    members = case.series.members[fits.places]
    additions, dilution = case.vessels.addition[members], case.vessels.dilution[members]
    split = lack_of_fit_test.split(additions, dilution, fits.lines.residuals, fits.weights, fits.segments)
    value = fits.spread(np.where(fits.lines.scatter, split.p, np.nan))
    levels, n = fits.spread(split.levels.astype(float)), fits.spread(fits.lines.n.astype(float))

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if levels[i] >= LEAST_LEVELS and levels[i] < n[i]:
                return "the repeated preparations show no scatter at the export's resolution"
            return "lack of fit needs three levels and a preparation that was repeated"
        if outcome is Outcome.PASS:
            return f"the line meets its {levels[i]:.0f} levels within the scatter of repeats ({probability(value[i])})"
        return f"the line misses its levels by more than repeats scatter ({probability(value[i])})"

    return judged(case, "lack_of_fit", Reported.ADDITIONS, "", value, sentence)


def residual(case: Case) -> Check:
    """Largest residual in percent of the fitted signal (common practice)."""
    fits = case.fits
    each = np.abs(case.relative_residuals)
    with np.errstate(invalid="ignore"):
        largest = fits.segments.max(each)
    value = np.where(fits.spread(fits.lines.dof.astype(float)) > 0, fits.spread(largest), np.nan)
    shown = percents(case, "residual", value)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return NO_LINE if np.isnan(case.fits.spread(fits.lines.slope)[i]) else "an exact line has no residuals"
        worst = case.label(worst_solution(case, each, i))
        if outcome is Outcome.PASS:
            return f"largest residual {shown(i)}, at {worst}"
        return f"{worst} lies {shown(i)} off the line of the others"

    def lines(i: int) -> list[int]:
        return case.series_lines(i) if np.isnan(value[i]) else case.lines_of([worst_solution(case, each, i)])

    return judged(case, "residual", Reported.ADDITIONS, "%", value, sentence, lines)


def worst_solution(case: Case, each: Floats, series: int) -> int:
    """Return the solution of a series at which a value of the fit's points is largest."""
    fits = case.fits
    at = int(fits.of_series[series])
    start = int(fits.segments.starts[at])
    place = start + int(np.argmax(each[start : start + int(fits.segments.sizes[at])]))
    return int(case.series.members[fits.places[place]])


def addition_size(case: Case) -> Check:
    """Top addition over native. S. L. R. Ellison, M. Thompson, Analyst 133 (2008) 992: u ∝ (C + T)/T."""
    results = case.additions
    with np.errstate(invalid="ignore", divide="ignore"):
        c = case.fits.spread(case.fits.native)
        value = np.where((c > 0) & results.detected & np.isfinite(results.value), case.top_addition / c, np.nan)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return "no native level was found, so additions have nothing to be compared with"
        ratio = f"the top addition is {figure(value[i], 2)} times the native level"
        if outcome is Outcome.PASS:
            return ratio
        return f"{ratio}: too {'small' if value[i] < 1 else 'large'} to measure it well"

    return judged(case, "addition_size", Reported.ADDITIONS, "", value, sentence)


def linear_evidence(case: Case) -> Check:
    """Highest signal inside a range that was proved linear: the laboratory's `linear_to`, else the top standard.

    For a result read back from a calibration the range is the calibration's, and below the lowest standard warns.
    """
    stated = of_analytes(case.readings, case.method, "linear_to")[case.series.analyte]
    by_calibration = case.reported == Reported.CALIBRATION
    members = case.series.members
    with np.errstate(invalid="ignore"):
        c = case.fits.spread(case.fits.native)
        in_vessel = case.vessels.dilution[members] * (case.series.segments.spread(c) + case.vessels.addition[members])
        highest_addition = case.series.segments.max(in_vessel)
        top_standard, top_signal = (
            _of_calibration(case, column) for column in (case.calibrations.top, case.calibrations.top_signal)
        )
        signal = case.series.segments.max(case.solutions.signal[members])
        highest = np.where(by_calibration, case.back.highest, highest_addition)
        limit = np.where(by_calibration | np.isnan(stated), top_standard, stated)
        # standards and samples share no exact digits: equal to the top standard is inside
        beyond = np.where(
            by_calibration,
            case.back.above,
            np.where(np.isnan(stated), signal > top_signal * (1 + 1e-9), highest > stated * (1 + 1e-9)),
        ).astype(bool)
    known = np.isfinite(highest) & np.isfinite(limit)
    outcome = np.where(known, np.where(beyond, Outcome.FAIL, Outcome.PASS), Outcome.NOT_EVALUATED)
    outcome = np.where(known & by_calibration & ~beyond & case.back.below, Outcome.WARN, outcome).astype(np.int8)
    unit = case.method.vessel_unit

    def sentence(i: int) -> str:
        if outcome[i] == Outcome.NOT_EVALUATED:
            return "nothing shows up to where the response is linear: state analytes.linear_to or measure standards"
        source = "the top standard" if by_calibration[i] or np.isnan(stated[i]) else _proof(case, i)
        if outcome[i] == Outcome.WARN:
            return f"the result lies below the lowest standard ({figure(_lowest(case, i))} {unit})"
        place = "beyond" if outcome[i] == Outcome.FAIL else "inside"
        if not by_calibration[i] and np.isnan(stated[i]):
            return f"the highest signal ({figure(signal[i])}) lies {place} that of {source} ({figure(top_signal[i])})"
        return f"the highest solution reads {figure(highest[i])} {unit}, {place} {source} ({figure(limit[i])} {unit})"

    return Check("linear_evidence", None, unit, highest, outcome, None, sentence, case.series_lines)


def _of_calibration(case: Case, column: Floats) -> Floats:
    at = case.back.calibration
    return np.where(at >= 0, column[at], np.nan) if len(column) else np.full(len(at), np.nan)


def _lowest(case: Case, series: int) -> float:
    return float(_of_calibration(case, case.calibrations.lowest)[series])


def _proof(case: Case, series: int) -> str:
    proved_on = case.method.analyte(case.analyte(series)).proved_on
    return "the proved range" + (f" of {proved_on}" if proved_on else "")


def detection(case: Case) -> Check:
    """Whether the reported result can be told from zero; a native that is not detected is a result, not a fault.

    Additions by their own interval; a read-back by the decision limit, and warned of below the limit of quantification.
    """
    by_additions = case.reported == Reported.ADDITIONS
    results = case.additions
    limits, key = case.limits, case.key
    in_vessel = case.back.in_vessel
    with np.errstate(invalid="ignore"):
        of_line = np.isfinite(results.value) & np.isfinite(results.low)
        inside = (results.low <= 0) & (results.high >= 0)
        of_limits = np.isfinite(case.back.results.value) & np.isfinite(limits.decision[key])
        known = np.where(by_additions, of_line, of_limits)
        below_loq = case.back.results.detected & (in_vessel < limits.loq[key])
        doubtful = np.where(by_additions, results.detected & ((results.value < 0) | inside), below_loq)
    outcome = np.where(known, np.where(doubtful, Outcome.WARN, Outcome.PASS), Outcome.NOT_EVALUATED)
    unit = case.method.result_unit

    def sentence(i: int) -> str:
        return of_additions(i) if by_additions[i] else of_read_back(i)

    def of_additions(i: int) -> str:
        if not known[i]:
            return "without an interval nothing can be said of detection"
        if not results.detected[i]:
            return f"not detected: less than {figure(results.high[i])} {unit}"
        if results.value[i] < 0:
            return "the result lies below zero by more than its uncertainty: the baseline or the blank is off"
        return "not distinguishable from zero" if doubtful[i] else "distinguished from zero"

    def of_read_back(i: int) -> str:
        if not known[i]:
            return f"no limit of detection: measure {LEAST_PREPARATIONS} blanks, or state analytes.lod"
        source = f"of {limits.blanks[key[i]]} blanks" if limits.blanks[key[i]] else "of the laboratory"
        if not case.back.results.detected[i]:
            return f"not detected: less than {figure(case.back.results.less_than[i])} {unit}, the limit {source}"
        if doubtful[i]:
            return (
                f"detected, and below the limit of quantification ({figure(limits.loq[key[i]])} "
                f"{case.method.vessel_unit} in the vessel)"
            )
        return f"above the decision limit {source}"

    return Check(
        "detection",
        None,
        unit,
        np.where(known, case.reported_value(), np.nan),
        outcome.astype(np.int8),
        None,
        sentence,
        case.series_lines,
    )
