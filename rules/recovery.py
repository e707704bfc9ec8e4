"""Recoveries and matrix effect: what the additions gave, seen by something that does not depend on them.

    R_j = 100 [y_j - φ y_0 - a (1 - φ)] / (b c_j),  φ = f_j / f_0       slope recovery = 100 β / b

Without a calibration there is no recovery: the additions' own line always recovers 100 %. Their uncertainty is
joint: y_0 is shared by all R_j, and intercept and slope of the calibration by everything. The scatter is that of
solutions, never of readings.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules import line, ratio
from rules.budget import common_of_recovery
from rules.interval import normal_quantile, student_t

if TYPE_CHECKING:
    from rules.additions import Fits
    from rules.calibration import Calibrations
    from rules.interval import Interval
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.reading_back import ReadBack
    from rules.seen import Seen
    from rules.series import Series
    from rules.solutions import Solutions
    from rules.vessels import Vessels

#: The level of the interval that an effect must lie in whole to be called absent: two one-sided tests at 5 %
#: (D. J. Schuirmann, J. Pharmacokinet. Biopharm. 15 (1987) 657).
EQUIVALENCE_CONFIDENCE = 0.90


@dataclass(frozen=True, slots=True)
class Recoveries:
    """Recoveries of every addition and of every series, in %.

    Attributes
    ----------
    each, each_u, each_expanded
        float64[k], R_j with u and U at the places of ``Series.members``; NaN for what is no addition or cannot be
        evaluated.
    slope, slope_u
        float64[m], slope recovery 100 β/b and its standard uncertainty.
    slope_interval, equivalence_interval
        Fieller's interval of the slope recovery, at the method's confidence and at 90 %.
    slope_dof
        float64[m], degrees of freedom of the scatter behind the slope recovery.
    levels
        int64[m], distinct additions above zero.
    """

    each: Floats
    each_u: Floats
    each_expanded: Floats
    slope: Floats
    slope_u: Floats
    slope_dof: Floats
    slope_interval: Interval
    equivalence_interval: Interval
    levels: Integers

    @property
    def matrix_effect(self) -> Floats:
        """100 (β/b - 1) %."""
        return self.slope - 100


@dataclass(frozen=True, slots=True)
class _Scatter:
    """Variance of the signal of one solution, at the places of the members, and its degrees of freedom by series."""

    variance: Floats
    dof: Floats


def evaluate(
    series: Series, vessels: Vessels, seen: Seen, fits: Fits, back: ReadBack, key: Integers, method: Method
) -> Recoveries:
    """Compare additions with the calibration.

    Parameters
    ----------
    series, vessels, back
        What was computed.
    seen, fits
        Signals, blanks and calibrations, and the lines through those signals.
    key
        int64[m], analyte and channel of each series.
    method
        The laboratory's decisions.
    """
    solutions, calibrations, blank = seen.solutions, seen.calibrations, seen.blanks.mean[key]
    seg, members = series.segments, series.members
    at = back.calibration

    def of(values: Floats) -> Floats:
        return np.where(at >= 0, values[at], np.nan) if len(values) else np.full(len(series), np.nan)

    lines, covariance = calibrations.lines, calibrations.covariance
    scatter = _scatter(series, solutions, fits, calibrations, back, method)
    kappa = common_of_recovery(series, vessels, method)
    with np.errstate(invalid="ignore", divide="ignore"):
        a, b = of(lines.intercept), of(lines.slope)
        v_aa, v_ab, v_bb = of(covariance.intercept), of(covariance.both), of(covariance.slope)
        natives = seg.sum(series.unspiked.astype(float))
        y, f, c = solutions.signal[members], vessels.dilution[members], (vessels.addition * vessels.dilution)[members]
        y_0 = seg.sum(np.where(series.unspiked, y, 0.0)) / natives
        f_0 = seg.sum(np.where(series.unspiked, f, 0.0)) / natives
        s_0 = seg.sum(np.where(series.unspiked, scatter.variance, 0.0)) / natives**2
        if method.undetected_native == "as zero":
            # what a vessel without the analyte would read
            nothing = ~back.results.detected
            y_0 = np.where(nothing, a + (f_0 * blank if method.blank == "preparation" else 0.0), y_0)
            s_0 = np.where(nothing, 0.0, s_0)
        phi = f / seg.spread(f_0)
        b_c = seg.spread(b) * c
        each = 100 * (y - phi * seg.spread(y_0) - seg.spread(a) * (1 - phi)) / b_c
        each = np.where(series.spiked, each, np.nan)
        # a solution's own scatter, the native's, the calibration's, and what the additions themselves carry
        by_a, by_b = -100 * (1 - phi) / b_c, -each / seg.spread(b)
        u2_scatter = (100 / b_c) ** 2 * (scatter.variance + phi**2 * seg.spread(s_0))
        u2_calibration = by_a**2 * seg.spread(v_aa) + 2 * by_a * by_b * seg.spread(v_ab) + by_b**2 * seg.spread(v_bb)
        u2_common = each**2 * seg.spread(kappa)
        t_scatter, t_calibration = student_t(method.confidence, scatter.dof), of(calibrations.t)
        t_common = normal_quantile(method.confidence)
        expanded = np.sqrt(
            seg.spread(t_scatter**2) * u2_scatter
            + seg.spread(t_calibration**2) * u2_calibration
            + t_common**2 * u2_common
        )
        beta, v_beta = _slopes(series, fits, vessels, scatter)
        moves = _moves_with_intercept(fits, vessels.addition[members], vessels.dilution[members])
        beta = beta + moves * (a - (blank if method.blank == "subtract" else 0.0))
        slope = 100 * beta / b
        joint = v_beta + moves**2 * v_aa - 2 * moves * (beta / b) * v_ab + (beta / b) ** 2 * v_bb
        slope_u = np.sqrt((100 / b) ** 2 * joint + slope**2 * kappa)

    def spanned(confidence: float) -> Interval:
        upper = ratio.Slope(beta, v_beta, student_t(confidence, scatter.dof))
        lower = ratio.Slope(b, v_bb, student_t(confidence, of(lines.dof.astype(float))))
        return ratio.interval(upper, lower, normal_quantile(confidence) ** 2 * kappa, ratio.Shared(moves, v_aa, v_ab))

    levels = np.where(fits.of_series >= 0, fits.distinct[fits.of_series] if len(fits.distinct) else 0, 0)
    return Recoveries(
        each=each,
        each_u=np.sqrt(u2_scatter + u2_calibration + u2_common),
        each_expanded=expanded,
        slope=slope,
        slope_u=slope_u,
        slope_dof=scatter.dof,
        slope_interval=spanned(method.confidence),
        equivalence_interval=spanned(EQUIVALENCE_CONFIDENCE),
        levels=levels.astype(np.int64),
    )


def _scatter(
    series: Series, solutions: Solutions, fits: Fits, calibrations: Calibrations, back: ReadBack, method: Method
) -> _Scatter:
    """Return the scatter of solutions: of the additions line, else of known preparations, else of the standards."""
    seg = series.segments
    y = solutions.signal[series.members]
    own_h = np.full(len(y), np.nan)
    own_h[fits.places] = fits.variance
    own = own_h * seg.spread(fits.spread(np.where(fits.lines.dof > 0, fits.lines.residual_sd, np.nan)) ** 2)
    own_dof = fits.spread(np.where(fits.lines.dof > 0, fits.lines.dof, 0).astype(float))
    found, dof = own, own_dof
    if (known := method.bench.preparation) is not None:
        lacking = ~(own_dof > 0)
        found = np.where(seg.spread(lacking), (known.rsd * y) ** 2, found)
        dof = np.where(lacking, known.dof, dof)
    elif len(calibrations.key):
        at = back.calibration
        lacking = ~(own_dof > 0) & (at >= 0)
        by_standards = calibrations.variance_at(y, at[seg.owner])
        found = np.where(seg.spread(lacking), by_standards, found)
        dof = np.where(lacking, calibrations.lines.dof[at], dof)
    return _Scatter(found, dof)


def _moves_with_intercept(fits: Fits, additions: Floats, dilution: Floats) -> Floats:
    """Return by how much β falls where the calibration's intercept is taken off every signal before it is scaled.

    (y - a)/f has the slope β + a g, g the slope of -1/f on A with the same weights; 0 where f is constant.
    """
    a, f = additions[fits.places], dilution[fits.places]
    with np.errstate(invalid="ignore", divide="ignore"):
        constant = fits.segments.max(f) <= fits.segments.min(f) * (1 + 1e-12)
        if constant.all():
            return np.zeros(len(fits.of_series))
        moved = line.fit(a, -1 / f, fits.weights, fits.segments).slope
    return np.nan_to_num(fits.spread(np.where(constant, 0.0, moved)))


def _slopes(series: Series, fits: Fits, vessels: Vessels, scatter: _Scatter) -> tuple[Floats, Floats]:
    """Return β and its variance; of a single addition from the scatter of the two solutions."""
    beta, own = fits.spread(fits.lines.slope), fits.spread(fits.lines.var_slope)
    seg, members = series.segments, series.members
    used = series.spiked | series.unspiked
    scaled = np.where(used, scatter.variance / vessels.dilution[members] ** 2, 0.0)
    top = seg.max(np.where(series.spiked, vessels.addition[members], -np.inf))
    single = fits.spread(fits.lines.n.astype(float)) == 2
    return beta, np.where(single, seg.sum(scaled) / top**2, own)
