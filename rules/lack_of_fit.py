"""Lack of fit against pure error: whether a line misses its levels by more than repeated preparations scatter.

F = (SS_lof / (levels - 2)) / (SS_pe / (n - levels)). N. R. Draper, H. Smith, Applied Regression Analysis, 3rd ed.
1998, ch. 2. Pure error comes from repeated PREPARATIONS at equal addition and dilution; replicate readings of one
solution would raise false alarms.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import fdtrc

from rules.line import NO_SCATTER, Segments

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.line import Floats

#: Levels that a line can miss.
LEAST_LEVELS = 3
#: Additions and dilutions that agree to this are the same level; they differ by rounding only.
SAME = 1e-9


@dataclass(frozen=True, slots=True)
class LackOfFit:
    """The test of every series.

    Attributes
    ----------
    f, p
        float64[m]; NaN with fewer than three levels, without repeats, or where all repeats read the same.
    levels
        int64[m], distinct levels.
    pure_error_ss, lack_of_fit_ss
        float64[m], weighted sums of squares.
    """

    f: Floats
    p: Floats
    levels: NDArray[np.int64]
    pure_error_ss: Floats
    lack_of_fit_ss: Floats


def split(additions: Floats, dilution: Floats, residuals: Floats, weights: Floats, segments: Segments) -> LackOfFit:
    """Split the residuals of fitted lines into lack of fit and pure error.

    Parameters
    ----------
    additions, dilution
        float64[n], A and f of each solution; equal pairs are one level.
    residuals, weights
        float64[n], of the fit.
    segments
        Where the series lie.
    """
    order = np.lexsort((dilution, additions, segments.owner))
    a, f, owner = additions[order], dilution[order], segments.owner[order]
    new = np.ones(len(a), dtype=bool)
    new[1:] = (owner[1:] != owner[:-1]) | _differ(a) | _differ(f)
    levels = Segments.of_sizes(np.diff(np.append(np.flatnonzero(new), len(a))))
    w, r = weights[order], residuals[order]
    with np.errstate(invalid="ignore", divide="ignore"):
        total = levels.sum(w)
        mean = levels.sum(w * r) / total
        of_level = owner[levels.starts]
        count = len(segments.sizes)
        lack = np.bincount(of_level, weights=total * mean**2, minlength=count)
        pure = np.bincount(owner, weights=w * (r - levels.spread(mean)) ** 2, minlength=count)
        number = np.bincount(of_level, minlength=count)
        free_lack, free_pure = number - 2, segments.sizes - number
        # repeats that read the same to the last digit show the export's resolution, not how preparations scatter
        scattered = pure > NO_SCATTER**2 * (pure + lack)
        testable = (number >= LEAST_LEVELS) & (free_pure > 0) & scattered
        statistic = np.where(testable, (lack / free_lack) / (pure / free_pure), np.nan)
        p = np.where(np.isnan(statistic), np.nan, fdtrc(np.maximum(free_lack, 1), np.maximum(free_pure, 1), statistic))
    return LackOfFit(statistic, p, number.astype(np.int64), pure.astype(np.float64), lack.astype(np.float64))


def _differ(values: Floats) -> NDArray[np.bool_]:
    return np.asarray(np.abs(values[1:] - values[:-1]) > SAME * np.maximum(np.abs(values[1:]), np.abs(values[:-1])))
