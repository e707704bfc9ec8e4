"""The result of external calibration: unspiked solutions read back from the standards, or by the instrument itself.

Where the laboratory leaves the choice to the program and no additions can be reported, what the matrix does to the
slope is not corrected, and so stands in the budget.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from rules.budget import common_of_read_back
from rules.interval import Covariance, Interval, normal_quantile, read_back, student_t
from rules.result import Results, Share, combine, effective_dof, with_fixed_factor

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.calibration import Calibrations
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.recovery import Recoveries
    from rules.seen import Seen
    from rules.series import Series
    from rules.vessels import Vessels


@dataclass(frozen=True, slots=True)
class ReadBack:
    """Calibration results of the series, with what the checks need to know of them.

    Attributes
    ----------
    results
        The results, in the sample.
    calibration
        int64[m], index of the calibration of each series; -1 where there is none.
    in_vessel
        float64[m], mean concentration read back in the vessel.
    highest
        float64[m], highest concentration read back among the unspiked vessels.
    instrument
        bool[m]: read back by the instrument itself.
    above, below
        bool[m]: beyond the top standard (then there is no number); under the lowest.
    """

    results: Results
    calibration: Integers
    in_vessel: Floats
    highest: Floats
    instrument: NDArray[np.bool_]
    above: NDArray[np.bool_]
    below: NDArray[np.bool_]


def evaluate(series: Series, vessels: Vessels, seen: Seen, key: Integers, method: Method) -> ReadBack:
    """Read the mean of each series' unspiked solutions back from its calibration.

    x = (y - a)/b with the variance s²(1/p + …) of p solutions, x then divided by f and times the predilution.
    S. L. R. Ellison, A. Williams (eds), Quantifying Uncertainty in Analytical Measurement, 3rd ed. 2012, E.4.
    """
    solutions, blanks, calibrations, limits = seen.solutions, seen.blanks, seen.calibrations, seen.limits
    count = len(series)
    of_series = calibrations.of_key[key] if count else np.zeros(0, dtype=np.int64)
    seg, members = series.segments, series.members
    native = series.unspiked.astype(float)
    p = seg.sum(native)
    with np.errstate(invalid="ignore", divide="ignore"):
        y, f = solutions.signal[members], vessels.dilution[members]
        if method.blank == "preparation":
            y = y - f * blanks.mean[key][seg.owner]
        mean = np.where(p > 0, seg.sum(np.where(series.unspiked, y, 0.0)) / p, np.nan)
        dilution = np.where(p > 0, seg.sum(np.where(series.unspiked, f, 0.0)) / p, np.nan)
        predilution = seg.max(vessels.predilution[members])
        has = (of_series >= 0) & (p > 0)
        lines = calibrations.lines

        def of(values: Floats) -> Floats:
            return np.where(has, values[of_series], np.nan) if len(values) else np.full(count, np.nan)

        slope, intercept = of(lines.slope), of(lines.intercept)
        scatter = calibrations.variance_at(mean, of_series) / p if len(lines.slope) else np.full(count, np.nan)
        v = calibrations.covariance
        covariance = Covariance(of(v.intercept), of(v.both), of(v.slope))
        x = (mean - intercept) / slope
        highest = (seg.max(np.where(series.unspiked, y, -np.inf)) - intercept) / slope
        top, lowest = of(calibrations.top), of(calibrations.lowest)
        # the standards' nominals are written with a few digits: a sample equal to the top standard is not above it
        above, below = highest > top * (1 + 1e-9), x < lowest * (1 - 1e-9)
        u_line = np.sqrt(scatter + covariance.intercept + 2 * x * covariance.both + x**2 * covariance.slope) / slope
        t = of(calibrations.t)
        t_u_blank = _blank_signal(dilution, np.nan_to_num(np.sqrt(blanks.variance[key])), method)
        common = common_of_read_back(series, vessels, method)
        t_common = normal_quantile(method.confidence)
        kappa = sum(((t_common * np.nan_to_num(part.relative)) ** 2 for part in common), np.zeros(count))
        interval = read_back(mean, scatter + (t_u_blank / t) ** 2, intercept, slope, covariance, t, kappa)
        scale = predilution / dilution
        value = np.where(above, np.nan, x * scale)
        shown = np.where(np.isfinite(value) & ~(interval.g >= 1), 1.0, np.nan)
        u_blank = _blank_signal(dilution, blanks.standard_uncertainty[key], method) / slope
        shares = (
            Share("line", u_line * scale * shown, of(lines.dof.astype(float))),
            Share("blank", u_blank * scale, blanks.count[key] - 1),
            *(Share(part.component, np.abs(x) * scale * part.relative, np.full(count, np.inf)) for part in common),
            # what the certificates of the standards say is not asked for yet, and so stands as absent
            Share("standards", np.full(count, np.nan), np.full(count, np.inf)),
        )
        t_blank = np.nan_to_num(np.sqrt(blanks.variance[key]) / blanks.standard_uncertainty[key])
        u, expanded, k = combine(shares, (t, t_blank, *(np.full(count, t_common) for _ in shares[2:])))
        expanded, k = with_fixed_factor(shares, u, expanded, k, method.fixed_factor)
    results = Results(
        value=value * shown,
        low=interval.low * scale * shown,
        high=interval.high * scale * shown,
        standard_uncertainty=u,
        expanded_uncertainty=expanded,
        coverage_factor=k,
        dof=of(lines.dof.astype(float)),
        detected=~(x <= limits.decision[key]),
        less_than=limits.lod[key] * scale,
        effective_dof=effective_dof(shares, u),
        budget=shares,
        reasons=_doubts(calibrations, of_series, interval) | _reasons(key, has, p, above, calibrations, of_series),
    )
    instrument = np.append(calibrations.instrument, False)[np.where(has, of_series, -1)]
    return ReadBack(results, np.where(has, of_series, -1), x, highest, instrument, above, below)


def _blank_signal(dilution: Floats, uncertainty: Floats, method: Method) -> Floats:
    """Only a preparation blank moves a read-back; a blank in every vessel moves standards and samples alike."""
    return dilution * uncertainty if method.blank == "preparation" else np.zeros(len(dilution))


def _doubts(calibrations: Calibrations, of_series: Integers, interval: Interval) -> dict[int, str]:
    """Why a calibration gives no number, or no uncertainty."""
    found: dict[int, str] = {}
    for series in np.flatnonzero(of_series >= 0).tolist():
        if interval.g[series] >= 1:
            found[series] = (
                f"no result: the calibration's slope is too uncertain for a finite interval "
                f"(g = {interval.g[series]:.2g})"
            )
        elif calibrations.instrument[of_series[series]]:
            found[series] = "uncertainty absent: the instrument states none with its concentrations"
        elif not calibrations.lines.scatter[of_series[series]]:
            found[series] = "uncertainty absent: no scatter of the standards at the export's resolution"
    return found


def _reasons(
    key: Integers,
    has: NDArray[np.bool_],
    p: Floats,
    above: NDArray[np.bool_],
    calibrations: Calibrations,
    of_series: Integers,
) -> dict[int, str]:
    reasons: dict[int, str] = {}
    for series in np.flatnonzero(~has | above).tolist():
        if above[series]:
            reasons[series] = "no result: above the top standard"
        elif p[series] == 0:
            reasons[series] = "no result: no unspiked solution"
        elif refused := calibrations.refused.get(int(key[series])):
            reasons[series] = f"no calibration: {refused[0]}"
        elif of_series[series] < 0:
            reasons[series] = "no calibration in this export"
    return reasons


def with_matrix_effect(back: ReadBack, recoveries: Recoveries, chosen: NDArray[np.bool_], method: Method) -> ReadBack:
    """Add the matrix effect that a calibration's result leaves uncorrected to its budget.

    The effect δ counts whole, as an error that stays (JCGM 100:2008, F.2.4.5), and its own uncertainty beside it:
    u = x √(δ² + u_δ²). A series without additions says nothing of its matrix, and the component stands as absent.

    Parameters
    ----------
    back, recoveries
        What was read back, and the slopes' ratio.
    chosen
        Series that report the calibration's result.
    method
        The confidence.
    """
    results = back.results
    effect, own = recoveries.matrix_effect / 100, recoveries.slope_u / 100
    size = np.abs(results.value)
    with np.errstate(invalid="ignore"):
        u = np.where(chosen, size * np.sqrt(effect**2 + own**2), 0.0)
        t_own = student_t(method.confidence, recoveries.slope_dof)
        expanded = size * np.sqrt((normal_quantile(method.confidence) * effect) ** 2 + (t_own * own) ** 2)
        added = np.where(chosen & np.isfinite(expanded), expanded, 0.0)
        widened = np.sqrt(results.expanded_uncertainty**2 + added**2)
        total = np.sqrt(results.standard_uncertainty**2 + np.where(added > 0, u, 0.0) ** 2)
        low = results.value - np.sqrt((results.value - results.low) ** 2 + added**2)
        high = results.value + np.sqrt((results.high - results.value) ** 2 + added**2)
        changed = added > 0
        budget = (*results.budget, Share("matrix_effect", u, recoveries.slope_dof))
        results = replace(
            results,
            low=np.where(changed, low, results.low),
            high=np.where(changed, high, results.high),
            standard_uncertainty=total,
            expanded_uncertainty=widened,
            coverage_factor=np.where(changed, widened / total, results.coverage_factor),
            effective_dof=effective_dof(budget, total),
            budget=budget,
        )
    return replace(back, results=results)
