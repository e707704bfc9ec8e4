"""Straight lines through many series at once: weighted least squares with covariance and diagnostics.

Y = α + β A for each series, weights given. Says nothing of what Y and A are; knows no limits and no chemistry.
The series lie one after the other in flat arrays and are found by where each starts.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import fdtrc

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]
    Integers = NDArray[np.int64]

#: Residual SD below this fraction of the largest signal is no scatter but the resolution of the export.
NO_SCATTER = 1e-12


@dataclass(frozen=True, slots=True)
class Segments:
    """Where each series lies in a flat array.

    Attributes
    ----------
    starts
        int64[m], first index of each series, ascending; every series has at least one member.
    owner
        int64[n], series of each member.
    sizes
        int64[m], members of each series.
    """

    starts: Integers
    owner: Integers
    sizes: Integers

    @classmethod
    def of_sizes(cls, sizes: NDArray[Any]) -> Segments:
        """Lay out series of given sizes, each at least 1.

        >>> Segments.of_sizes(np.array([2, 1])).owner.tolist()
        [0, 0, 1]
        """
        counts = np.asarray(sizes, dtype=np.int64)
        starts = np.concatenate(([0], np.cumsum(counts)[:-1])).astype(np.int64)[: len(counts)]
        return cls(starts, np.repeat(np.arange(len(counts)), counts), counts)

    def sum(self, values: Floats) -> Floats:
        """Add up the members of each series."""
        return np.add.reduceat(values, self.starts) if len(self.starts) else np.zeros(0)

    def max(self, values: Floats) -> Floats:
        """Return the largest member of each series; NaN where one is NaN."""
        return np.maximum.reduceat(values, self.starts) if len(self.starts) else np.zeros(0)

    def min(self, values: Floats) -> Floats:
        """Return the smallest member of each series; NaN where one is NaN."""
        return np.minimum.reduceat(values, self.starts) if len(self.starts) else np.zeros(0)

    def spread(self, values: NDArray[Any]) -> NDArray[Any]:
        """Give every member the value of its series."""
        return values[self.owner]


@dataclass(frozen=True, slots=True)
class Lines:
    """Fitted lines, one for each series.

    Attributes
    ----------
    n, dof
        Points and degrees of freedom (n - 2).
    slope, intercept
        β in signal per addition, α in signal.
    var_intercept, covariance, var_slope
        V_αα, V_αβ, V_ββ, from the scatter of the residuals; NaN where there is none (n = 2).
    residual_sd
        Square root of the weighted residual sum of squares over dof; NaN for n = 2.
    correlation
        r, weighted; NaN for n = 2 (two points always give 1).
    curvature_p
        Probability of so large a quadratic term if the truth is a line; NaN where it cannot be tested.
    scatter
        False where the residuals are below the resolution of the data.
    residuals
        Y - (α + βA) of every member, flat.
    mean_x, mean_y, s_xx, unscaled_var_intercept, unscaled_covariance, unscaled_var_slope
        Weighted means, sum of squares of A, and the covariance for a residual SD of 1.
    """

    n: Integers
    dof: Integers
    slope: Floats
    intercept: Floats
    var_intercept: Floats
    covariance: Floats
    var_slope: Floats
    residual_sd: Floats
    correlation: Floats
    curvature_p: Floats
    scatter: NDArray[np.bool_]
    residuals: Floats
    mean_x: Floats
    mean_y: Floats
    s_xx: Floats
    unscaled_var_intercept: Floats
    unscaled_covariance: Floats
    unscaled_var_slope: Floats

    @classmethod
    def identity(cls, count: int) -> Lines:
        """Return lines of intercept 0 and slope 1 that nothing was fitted to: exact, with no residuals."""
        unknown = {name: np.full(count, np.nan) for name in cls.__slots__}
        exact = {name: np.zeros(count) for name in ("intercept", "var_intercept", "covariance", "var_slope")}
        none = np.zeros(count, dtype=np.int64)
        return cls(
            **unknown
            | exact
            | {"n": none, "dof": none.copy(), "slope": np.ones(count), "scatter": np.ones(count, dtype=bool)}
            | {"residuals": np.zeros(0)}
        )

    def extended(self, others: Lines) -> Lines:
        """Return these lines followed by others."""
        return Lines(*(np.concatenate([getattr(self, name), getattr(others, name)]) for name in self.__slots__))


def _mean(segments: Segments, values: Floats, weights: Floats, total: Floats) -> Floats:
    """Weighted mean, corrected once for its own rounding: offsets of 10⁵ must not cost digits."""
    rough = segments.sum(weights * values) / total
    return rough + segments.sum(weights * (values - segments.spread(rough))) / total


def fit(x: Floats, y: Floats, weights: Floats, segments: Segments) -> Lines:
    """Fit Y = α + βA to every series at once, in centred sums.

    Parameters
    ----------
    x, y
        float64[n], additions A and scaled signals Y, in units of their own.
    weights
        float64[n], positive; only their ratios within a series matter for the line.
    segments
        Where the series lie. A series without two distinct x gets NaN throughout.

    Returns
    -------
    Lines
        See there. S. L. R. Ellison, A. Williams (eds), Quantifying Uncertainty in Analytical Measurement,
        3rd ed. 2012, E.3 gives the covariances; J. Mandel (1964) the test of the quadratic term.

    >>> segments = Segments.of_sizes(np.array([2, 3]))
    >>> two = fit(np.array([0.0, 1, 0, 1, 2]), np.array([1.0, 3, 2, 3, 4.3]), np.ones(5), segments)
    >>> two.slope.round(3).tolist(), two.dof.tolist()
    ([2.0, 1.15], [0, 1])
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        total = segments.sum(weights)
        mean_x, mean_y = _mean(segments, x, weights, total), _mean(segments, y, weights, total)
        dx, dy = x - segments.spread(mean_x), y - segments.spread(mean_y)
        s_xx, s_xy = segments.sum(weights * dx * dx), segments.sum(weights * dx * dy)
        s_yy = segments.sum(weights * dy * dy)
        s_xx = np.where(segments.min(x) < segments.max(x), s_xx, np.nan)
        slope = s_xy / s_xx
        intercept = mean_y - slope * mean_x
        residuals = dy - segments.spread(slope) * dx
        ss = segments.sum(weights * residuals * residuals)
        dof = segments.sizes - 2
        variance = np.where(dof > 0, ss / dof, np.nan)
        unscaled_slope, unscaled_covariance = 1 / s_xx, -mean_x / s_xx
        unscaled_intercept = 1 / total + mean_x**2 / s_xx
        largest = np.sqrt(segments.max(weights * y * y))
        residual_sd = np.sqrt(variance)
        scatter = residual_sd > NO_SCATTER * largest
        return Lines(
            n=segments.sizes,
            dof=dof,
            slope=slope,
            intercept=intercept,
            var_intercept=variance * unscaled_intercept,
            covariance=variance * unscaled_covariance,
            var_slope=variance * unscaled_slope,
            residual_sd=residual_sd,
            correlation=np.where(dof > 0, s_xy / np.sqrt(s_xx * s_yy), np.nan),
            curvature_p=_curvature(dx, residuals, weights, ss, segments, scatter),
            scatter=scatter,
            residuals=residuals,
            mean_x=mean_x,
            mean_y=mean_y,
            s_xx=s_xx,
            unscaled_var_intercept=unscaled_intercept,
            unscaled_covariance=unscaled_covariance,
            unscaled_var_slope=unscaled_slope,
        )


def _curvature(
    dx: Floats, residuals: Floats, weights: Floats, ss: Floats, segments: Segments, scatter: NDArray[np.bool_]
) -> Floats:
    """Return p of the quadratic term: the part of it that a line cannot follow, regressed on the residuals."""
    f, dof = quadratic_f(dx, residuals, weights, ss, segments)
    with np.errstate(invalid="ignore"):
        return np.where(scatter & (dof > 0) & ~np.isnan(f), fdtrc(1.0, np.maximum(dof, 1), np.maximum(f, 0)), np.nan)


def quadratic_f(
    dx: Floats, residuals: Floats, weights: Floats, ss: Floats, segments: Segments
) -> tuple[Floats, Integers]:
    """Return F = (SS_lin - SS_quad) / (SS_quad / (N - 3)) of every series, and N - 3.

    Parameters
    ----------
    dx, residuals, weights
        float64[n]: centred additions, residuals of the line, weights.
    ss
        float64[m]: weighted residual sum of squares of the lines.
    segments
        Where the series lie.

    Returns
    -------
    tuple
        F, NaN with fewer than three distinct additions; infinite where the parabola is exact; degrees of freedom.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        total = segments.sum(weights)
        scale = segments.spread(np.maximum(segments.max(np.abs(dx)), np.finfo(float).tiny))
        u = dx / scale
        square = u * u
        q = square - segments.spread(segments.sum(weights * square) / total)
        s_uu = segments.sum(weights * u * u)
        q = q - u * segments.spread(segments.sum(weights * u * q) / s_uu)
        s_qq = segments.sum(weights * q * q)
        # with two distinct additions q vanishes but for rounding: there is nothing to bend
        testable = s_qq > 1e-20 * segments.sum(weights * square * square)
        explained = np.where(testable, segments.sum(weights * q * residuals) ** 2 / s_qq, np.nan)
        dof = segments.sizes - 3
        return explained / (np.maximum(ss - explained, 0) / np.where(dof > 0, dof, np.nan)), dof
