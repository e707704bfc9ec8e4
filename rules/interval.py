"""The set of concentrations that a fitted line and stated uncertainties cannot exclude: Fieller's interval.

    (α - Cβ)² ≤ t²(V_αα - 2C V_αβ + C² V_ββ) + κ β² C² + t_B² u_B² (g_α - C g_β)²

A quadratic in C. κ is Σ t_i² u_i² of the relative uncertainties common to all solutions; the last term is the
blank's. E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175; with the common terms a generalisation of our own, checked
against numerical inversion.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import ndtri, stdtrit

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.line import Floats


def student_t(confidence: float, dof: NDArray[np.int64] | Floats) -> Floats:
    """Return Student's two-sided t for each number of degrees of freedom; NaN where there are none.

    >>> student_t(0.95, np.array([3.0])).round(4).tolist()
    [3.1824]
    """
    freedom = np.asarray(dof, dtype=np.float64)
    # thousands of series have a handful of different degrees of freedom, and each quantile is dear
    distinct, at = np.unique(freedom, return_inverse=True)
    quantiles = np.asarray(stdtrit(np.maximum(distinct, 1), 0.5 + confidence / 2), dtype=np.float64)
    return np.where(distinct > 0, quantiles, np.nan)[at].reshape(freedom.shape)


def normal_quantile(confidence: float) -> float:
    """Return the two-sided quantile for what was estimated otherwise than from repeats.

    >>> round(normal_quantile(0.95), 3)
    1.96
    """
    return float(ndtri(0.5 + confidence / 2))


@dataclass(frozen=True, slots=True)
class Interval:
    """Bounds of the set, and g: at 1 or above the set is no finite interval and the bounds are NaN."""

    low: Floats
    high: Floats
    g: Floats


@dataclass(frozen=True, slots=True)
class Covariance:
    """V_αα, V_αβ and V_ββ of intercept and slope, each float64[m]."""

    intercept: Floats
    both: Floats
    slope: Floats


@dataclass(frozen=True, slots=True)
class BlankTerm:
    """The blank's share: t_B² u_B² and how intercept and slope move with it (g_α, g_β), each float64[m]."""

    variance: Floats
    intercept: Floats
    slope: Floats

    @classmethod
    def absent(cls, series: int) -> BlankTerm:
        """No blank, or one without scatter."""
        return cls(*(np.zeros(series) for _ in range(3)))


def extrapolation(
    intercept: Floats, slope: Floats, covariance: Covariance, t: Floats, common: Floats, blank: BlankTerm
) -> Interval:
    """Return the interval of C = α/β.

    Parameters
    ----------
    intercept, slope
        α and β, float64[m].
    covariance
        Of the fit.
    t
        Student's t for the fit's degrees of freedom and the confidence.
    common
        κ = Σ t_i² u_i².
    blank
        The blank's term.

    Returns
    -------
    Interval
        NaN bounds where g ≥ 1, or where the fit has no covariance.
    """
    tt = t * t
    with np.errstate(invalid="ignore", divide="ignore"):
        excess = tt * covariance.slope + common * slope**2 + blank.variance * blank.slope**2
        middle = intercept * slope - tt * covariance.both - blank.variance * blank.intercept * blank.slope
        last = intercept**2 - tt * covariance.intercept - blank.variance * blank.intercept**2
        return between(slope**2 - excess, middle, last, excess / slope**2)


def read_back(
    signal: Floats,
    signal_variance: Floats,
    intercept: Floats,
    slope: Floats,
    covariance: Covariance,
    t: Floats,
    common: Floats,
) -> Interval:
    """Return the interval of x = (y - a)/b where y was measured with a variance of its own.

    Parameters
    ----------
    signal, signal_variance
        y and the variance of its mean, float64[m].
    intercept, slope, covariance, t
        The calibration's, one for each y.
    common
        κ = Σ t_i² u_i² of the relative uncertainties of the way from vessel to sample.
    """
    tt = t * t
    net = signal - intercept
    with np.errstate(invalid="ignore", divide="ignore"):
        excess = tt * covariance.slope + common * slope**2
        middle = net * slope + tt * covariance.both
        last = net**2 - tt * (signal_variance + covariance.intercept)
        return between(slope**2 - excess, middle, last, excess / slope**2)


def between(lead: Floats, middle: Floats, last: Floats, g: Floats) -> Interval:
    """Solve lead C² - 2 middle C + last ≤ 0 where it is a finite interval."""
    root = np.sqrt(np.maximum(middle**2 - lead * last, 0))
    finite = lead > 0
    # the root away from cancellation first, the other from the product of both
    far = np.where(middle >= 0, middle + root, middle - root) / lead
    near = np.where(far != 0, last / (lead * far), 0.0)
    low, high = np.minimum(far, near), np.maximum(far, near)
    return Interval(np.where(finite, low, np.nan), np.where(finite, high, np.nan), g)
