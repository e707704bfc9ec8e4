"""The result of standard additions: the line through a series, back to the concentration in the sample.

Y = β (C + A), so C = α/β; with f constant or not, over several levels or a single one. Blanks are used as the
settings say. Knows no calibration and no limits.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np

from rules import line, variance
from rules.interval import BlankTerm, Covariance, Interval, extrapolation, normal_quantile, student_t
from rules.result import Results, Share, combine, effective_dof, with_fixed_factor

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.blanks import Blanks
    from rules.budget import Common
    from rules.line import Floats, Integers, Lines
    from rules.method import Method
    from rules.series import Series
    from rules.solutions import Solutions
    from rules.vessels import Vessels


@dataclass(frozen=True, slots=True)
class Fits:
    """The lines of the series that have one.

    Attributes
    ----------
    of_series
        int64[m], index of the fit of each series; -1 where it has none.
    series
        int64[k], series of each fit.
    places
        int64[p], places in ``Series.members`` of the points, those of one fit together; `segments` says where.
    lines
        The fits, in signal per unit of result.
    net, fitted_gross
        float64[p]: measured and fitted signal in the vessel, the blank included in both.
    weights
        float64[p], w = f²/h.
    variance
        float64[p], h of the variance model: a signal's variance in units of the squared residual SD.
    least
        float64[k], least signal at which h was computed.
    distinct
        int64[k], distinct additions above zero.
    covariance
        Of intercept and slope; from known scatter of preparations where a single addition leaves no residual.
    dof
        float64[k], degrees of freedom behind `covariance`.
    blank
        The blank's term of the interval; `blank_uncertainty` is u(y_B), `blank_dof` its degrees of freedom.
    """

    of_series: Integers
    series: Integers
    places: Integers
    segments: line.Segments
    lines: Lines
    net: Floats
    fitted_gross: Floats
    weights: Floats
    variance: Floats
    least: Floats
    distinct: Integers
    covariance: Covariance
    dof: Floats
    blank: BlankTerm
    blank_uncertainty: Floats
    blank_dof: Floats

    @property
    def native(self) -> Floats:
        """C = α/β in the aliquot of each fit; NaN where the signal does not rise."""
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.where(self.lines.slope > 0, self.lines.intercept / self.lines.slope, np.nan)

    def spread(self, values: Floats) -> Floats:
        """Give every series the value of its fit, NaN where it has none."""
        if not len(values):
            return np.full(len(self.of_series), np.nan)
        return np.where(self.of_series >= 0, values[self.of_series], np.nan)


def fit(
    series: Series,
    solutions: Solutions,
    vessels: Vessels,
    blanks: Blanks,
    key: Integers,
    floor: variance.Floor,
    method: Method,
) -> Fits:
    """Fit the line of every series that has additions and an unspiked solution.

    Parameters
    ----------
    series, solutions, vessels, blanks
        What the export says.
    key
        int64[m], analyte and channel of each series.
    floor
        Least signal of a weight, for each series.
    method
        How blanks are used, and the scatter of preparations if it is known.
    """
    fitted = np.flatnonzero(series.has_additions & series.has_native)
    of_series = np.full(len(series), -1, dtype=np.int64)
    of_series[fitted] = np.arange(len(fitted))
    owner = of_series[series.segments.owner]
    places = np.flatnonzero((owner >= 0) & (series.spiked | series.unspiked))
    segments = line.Segments.of_sizes(np.bincount(owner[places], minlength=len(fitted)))
    members = series.members[places]
    f, y = vessels.dilution[members], solutions.signal[members]
    y_blank = blanks.mean[key][series.segments.owner[places]]
    additions = vessels.addition[members]
    scaled = _scaled(y, f, y_blank, method)
    offset = y_blank if method.blank == "subtract" else f * y_blank if method.blank == "preparation" else 0 * f
    weighted = variance.fit(additions, scaled, f, offset, floor.of(fitted), method.variance, segments)
    lines = weighted.lines
    blank = _blank_term(f, additions, weighted.weights, segments, blanks.variance[key[fitted]], method)
    covariance, dof = _covariance(lines, additions, scaled, segments, method)
    return Fits(
        of_series=of_series,
        series=fitted,
        places=places,
        segments=segments,
        lines=lines,
        net=y,
        fitted_gross=weighted.gross,
        weights=weighted.weights,
        variance=weighted.variance,
        least=weighted.least,
        distinct=_distinct_additions(additions, segments),
        covariance=covariance,
        dof=dof,
        blank=blank,
        blank_uncertainty=blanks.standard_uncertainty[key[fitted]],
        blank_dof=blanks.count[key[fitted]] - 1,
    )


def _scaled(y: Floats, f: Floats, y_blank: Floats, method: Method) -> Floats:
    """Y, the signal scaled to the undiluted aliquot."""
    with np.errstate(invalid="ignore", divide="ignore"):
        if method.blank == "subtract":
            return (y - y_blank) / f
        if method.blank == "preparation":
            return y / f - y_blank
        return y / f


def _blank_term(
    f: Floats, additions: Floats, weights: Floats, segments: line.Segments, blank_variance: Floats, method: Method
) -> BlankTerm:
    """How intercept and slope move with the blank: the line of -1/f on A, or a plain shift."""
    if method.blank == "subtract":
        with np.errstate(invalid="ignore", divide="ignore"):
            moved = line.fit(additions, -1 / f, weights, segments)
        return BlankTerm(np.nan_to_num(blank_variance), moved.intercept, moved.slope)
    if method.blank == "preparation":
        count = len(segments.sizes)
        return BlankTerm(np.nan_to_num(blank_variance), np.full(count, -1.0), np.zeros(count))
    return BlankTerm.absent(len(segments.sizes))


def _covariance(
    lines: Lines, additions: Floats, scaled: Floats, segments: line.Segments, method: Method
) -> tuple[Covariance, Floats]:
    """Covariance of each fit; for single additions from the known scatter of preparations, if there is any."""
    covariance = Covariance(lines.var_intercept, lines.covariance, lines.var_slope)
    none = np.full(len(lines.n), np.nan)
    usable = lines.scatter & (lines.dof > 0)
    covariance = Covariance(*(np.where(usable, getattr(covariance, f.name), none) for f in fields(covariance)))
    dof = np.where(usable, lines.dof, np.nan)
    known = method.bench.preparation
    if known is None:
        return covariance, dof
    single = lines.n == 2  # the line is exact, so its residuals say nothing
    top = segments.max(additions)
    with np.errstate(invalid="ignore", divide="ignore"):
        scatter = (known.rsd * scaled) ** 2
        unspiked = segments.sum(np.where(additions == 0, scatter, 0.0))
        both = segments.sum(scatter)
        exact = (unspiked, -unspiked / top, both / top**2)
    values = (covariance.intercept, covariance.both, covariance.slope)
    covariance = Covariance(*(np.where(single, e, v) for e, v in zip(exact, values, strict=True)))
    return covariance, np.where(single, known.dof, dof)


def _distinct_additions(additions: Floats, segments: line.Segments) -> Integers:
    """Count the distinct additions above zero; equal but for rounding is equal."""
    order = np.lexsort((additions, segments.owner))
    a, owner = additions[order], segments.owner[order]
    new = np.ones(len(a), dtype=bool)
    new[1:] = (owner[1:] != owner[:-1]) | (a[1:] > a[:-1] * (1 + 1e-9))
    return np.bincount(owner[new & (a > 0)], minlength=len(segments.sizes)).astype(np.int64)


def evaluate(
    fits: Fits, series: Series, vessels: Vessels, common: tuple[Common, ...], method: Method
) -> tuple[Results, Interval, Floats]:
    """Turn fitted lines into concentrations in the sample.

    Returns
    -------
    tuple
        The results, the interval of the aliquot for each fit (with g), and u_line in the sample for each series.
    """
    lines, count = fits.lines, len(series)
    factor = series.segments.max(vessels.predilution[series.members])
    t_line, t_common = student_t(method.confidence, fits.dof), normal_quantile(method.confidence)
    relative = [part.relative[fits.series] for part in common]
    kappa = sum(((t_common * np.nan_to_num(part)) ** 2 for part in relative), np.zeros(len(fits.series)))
    interval = extrapolation(lines.intercept, lines.slope, fits.covariance, t_line, kappa, fits.blank)
    with np.errstate(invalid="ignore", divide="ignore"):
        c = fits.native
        v = fits.covariance
        u_line = np.sqrt(v.intercept - 2 * c * v.both + c * c * v.slope) / lines.slope
        u_blank = np.abs(fits.blank.intercept - c * fits.blank.slope) / lines.slope * fits.blank_uncertainty
        t_blank = np.sqrt(fits.blank.variance) / fits.blank_uncertainty
    uses_blank = method.blank in ("subtract", "preparation")
    none = np.zeros(len(c))
    shares = (
        Share("line", fits.spread(u_line) * factor, fits.spread(fits.dof)),
        Share("blank", fits.spread(u_blank if uses_blank else none) * factor, fits.spread(fits.blank_dof)),
        *(
            Share(part.component, np.abs(fits.spread(c)) * factor * part.relative, np.full(count, np.inf))
            for part in common
        ),
    )
    quantiles = (
        fits.spread(t_line),
        np.nan_to_num(fits.spread(t_blank)),
        *(np.full(count, t_common) for _ in common),
    )
    u, expanded, k = combine(shares, quantiles)
    expanded, k = with_fixed_factor(shares, u, expanded, k, method.fixed_factor)
    usable = fits.spread((lines.slope > 0).astype(float)) == 1
    printable = usable & ~(fits.spread(interval.g) >= 1)
    value = np.where(printable, fits.spread(c) * factor, np.nan)
    # the line alone: zero inside the interval because of the blank is a doubt, and a check says so (method, 7)
    tested = fits.spread(lines.intercept**2 - t_line**2 * fits.covariance.intercept)
    shown = np.where(printable, 1.0, np.nan)
    results = Results(
        value=value,
        low=fits.spread(interval.low) * factor * shown,
        high=fits.spread(interval.high) * factor * shown,
        standard_uncertainty=u * shown,
        expanded_uncertainty=expanded * shown,
        coverage_factor=k * shown,
        dof=fits.spread(fits.dof),
        detected=~(tested <= 0),
        less_than=fits.spread(interval.high) * factor * shown,
        effective_dof=effective_dof(shares, u),
        budget=shares,
        reasons=_reasons(fits, interval.g),
    )
    return results, interval, shares[0].standard_uncertainty


def _reasons(fits: Fits, g: Floats) -> dict[int, str]:
    """Why a series has no number, or no uncertainty."""
    reasons: dict[int, str] = {}
    lines = fits.lines
    notable: NDArray[np.bool_] = ~(lines.slope > 0) | (g >= 1) | np.isnan(fits.dof)
    for place in np.flatnonzero(notable):
        series = int(fits.series[place])
        if not np.isfinite(lines.slope[place]):
            reasons[series] = "no result: no line can be drawn"
        elif not lines.slope[place] > 0:
            reasons[series] = "no result: the signal does not rise with the additions"
        elif g[place] >= 1:
            reasons[series] = f"no result: the slope is too uncertain for a finite interval (g = {g[place]:.2g})"
        elif lines.n[place] == 2:
            reasons[series] = "uncertainty absent: a single addition shows no scatter of preparations"
        else:
            reasons[series] = "uncertainty absent: no scatter at the export's resolution"
    return reasons
