"""Checks of what the calibration says of the additions: recovery, size of the spike, matrix effect."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rules.case import Reported
from rules.checks import Check, Outcome, judged, limits_of, percents, severest
from rules.figures import figure

if TYPE_CHECKING:
    from rules.case import Case
    from rules.line import Floats

NOTHING_INDEPENDENT = "nothing independent of the additions: their own line always recovers 100 %"


def spike_ratio(case: Case) -> Floats:
    """Return the top addition in % of the native level.

    Infinite where there is no native to speak of; NaN where nobody knows it.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = np.where(case.native > 0, 100 * case.top_addition / case.native, np.inf * case.top_addition)
    return np.where(np.isnan(case.native), np.nan, ratio)


def spike_size(case: Case) -> Check:
    """Spike over native: a small spike on a large native recovers noise. EPA 200.9 rev 2.2, 9.4."""
    has_calibration = case.back.calibration >= 0
    ratio = np.where(has_calibration & case.judged, spike_ratio(case), np.nan)

    shown = percents(case, "spike_size", ratio)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return NOTHING_INDEPENDENT if not has_calibration[i] else "no addition or no native level to compare"
        if np.isinf(ratio[i]):
            return "no native level to speak of: any spike is large enough"
        size = f"the spike is {shown(i)} of the native level"
        if outcome is Outcome.PASS:
            return size
        return f"{size}: too small for a recovery, so recovery is not evaluated"

    check = judged(case, "spike_size", Reported.CALIBRATION, "%", ratio, sentence)
    value = np.where(np.isinf(ratio), np.nan, ratio)
    return Check(check.name, check.judges, check.unit, value, check.outcome, check.limits, check.sentence, check.lines)


def recovery(case: Case, size: Check) -> Check:
    """Slope recovery with two or more levels, else the worst addition; not evaluated where the spike is too small."""
    large_enough = (size.outcome == Outcome.PASS) | (
        (size.outcome == Outcome.NOT_EVALUATED) & (case.back.calibration >= 0)
    )
    levels = case.recoveries.levels
    headline = np.where(case.judged, np.where(levels >= 2, case.recoveries.slope, _hardest(case)), np.nan)
    value = np.where(large_enough, headline, np.nan)
    # a recovery that cannot be computed although everything is there must not pass for "not evaluated"
    shown = percents(case, "recovery", value)
    broken = case.judged & (case.back.calibration >= 0) & ~np.isfinite(headline)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if broken[i]:
                return "no recovery can be computed: the inputs are faulty"
            return NOTHING_INDEPENDENT if case.back.calibration[i] < 0 else "the spike is too small for a recovery"
        what = "slope recovery" if levels[i] >= 2 else "recovery"
        found = f"{what} {shown(i)}"
        if outcome is Outcome.PASS:
            return found
        amount = "less" if value[i] < 100 else "more"
        return f"{found}: {amount} of the added {case.analyte(i)} is found than was added"

    return judged(case, "recovery", Reported.CALIBRATION, "%", value, sentence)


def _hardest(case: Case) -> Floats:
    """Of the recoveries of single additions the one that the limits judge hardest; NaN where there is none."""
    limits = limits_of(case.method, case.readings.analyte.names, "recovery")
    each, owner = case.recoveries.each, case.series.segments.owner
    place = severest(limits, case.series.analyte[owner], each, np.abs(each - 100), owner, len(case))
    return np.append(each, np.nan)[place]


def matrix_effect(case: Case) -> Check:
    """Slope in the matrix against the calibration's, 100 (β/b - 1) %."""
    value = np.where(case.judged & (case.recoveries.levels > 0), case.recoveries.matrix_effect, np.nan)
    shown = percents(case, "matrix_effect", value)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return NOTHING_INDEPENDENT if case.back.calibration[i] < 0 else "no slope to compare"
        if outcome is Outcome.PASS:
            return f"the matrix changes the slope by {shown(i)}"
        direction = "lowers" if value[i] < 0 else "raises"
        advice = (
            "the calibration does not hold in this matrix"
            if case.reported[i] == Reported.CALIBRATION
            else "the additions correct it"
        )
        return f"the matrix {direction} the slope by {figure(abs(value[i]), 2)} %: {advice}"

    return judged(case, "matrix_effect", Reported.CALIBRATION, "%", value, sentence)
