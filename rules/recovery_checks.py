"""Checks of what the calibration says of the additions: recovery, size of the spike, matrix effect."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rules.case import Reported
from rules.checks import Check, Outcome, judged, percents, series_limits, severest
from rules.figures import figure

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.case import Case
    from rules.limits import CheckLimits
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
    limits = series_limits(case, "recovery")
    hardest = _hardest(case, limits)
    single, half = (
        np.append(column, np.nan)[hardest] for column in (case.recoveries.each, case.recoveries.each_expanded)
    )
    several, span = levels >= 2, case.recoveries.slope_interval
    headline = np.where(case.judged, np.where(several, case.recoveries.slope, single), np.nan)
    low = np.where(several, 100 * span.low, single - half)
    high = np.where(several, 100 * span.high, single + half)
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
        doubt = _doubt(limits[int(case.limit_classes.of_series[i])].bounds, low[i], high[i])
        if outcome is Outcome.PASS:
            return f"{found}{doubt}"
        amount = "less" if value[i] < 100 else "more"
        return f"{found}: {amount} of the added {case.analyte(i)} is found than was added{doubt}"

    return judged(case, "recovery", Reported.CALIBRATION, "%", value, sentence)


def _hardest(case: Case, limits: tuple[CheckLimits, ...]) -> NDArray[np.int64]:
    """Return the place of the single recovery that the limits judge hardest; -1 where there is none."""
    each, owner = case.recoveries.each, case.series.segments.owner
    return severest(limits, case.limit_classes.of_series[owner], each, np.abs(each - 100), owner, len(case))


def _doubt(bounds: tuple[float, ...], low: float, high: float) -> str:
    """Say that a limit lies inside the uncertainty: the verdict could have been the other one."""
    inside = [bound for bound in bounds if low < bound < high]
    if not inside:
        return ""
    return f" (the limit {inside[0]:g} % lies inside its uncertainty, {figure(low)} to {figure(high)} %)"


def matrix_effect(case: Case) -> Check:
    """Slope in the matrix against the calibration's, 100 (β/b - 1) %."""
    value = np.where(case.judged & (case.recoveries.levels > 0), case.recoveries.matrix_effect, np.nan)
    shown = percents(case, "matrix_effect", value)
    limits = series_limits(case, "matrix_effect")
    span = case.recoveries.equivalence_interval

    def absence(i: int) -> str:
        """Say "no effect beyond" only where the whole 90 % interval lies inside; not seen is not absent."""
        judged_by = limits[int(case.limit_classes.of_series[i])]
        limit = judged_by.fail or judged_by.warn
        low, high = 100 * span.low[i] - 100, 100 * span.high[i] - 100
        if limit is None or not (np.isfinite(low) and np.isfinite(high)):
            return ""
        if limit.low < low and high < limit.high:
            return f": no effect beyond {limit.text}"
        return f", and its 90 % interval ({figure(low)} to {figure(high)} %) reaches beyond {limit.text}"

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return NOTHING_INDEPENDENT if case.back.calibration[i] < 0 else "no slope to compare"
        if outcome is Outcome.PASS:
            return f"the matrix changes the slope by {shown(i)}{absence(i)}"
        direction = "lowers" if value[i] < 0 else "raises"
        advice = (
            "the calibration does not hold in this matrix"
            if case.reported[i] == Reported.CALIBRATION
            else "the additions correct it"
        )
        return f"the matrix {direction} the slope by {figure(abs(value[i]), 2)} %: {advice}"

    return judged(case, "matrix_effect", Reported.CALIBRATION, "%", value, sentence)
