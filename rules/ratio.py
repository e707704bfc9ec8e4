"""The ratio of two slopes with its interval: the sensitivity in the sample against the calibration's.

    (β - ρ b)² ≤ t_β² V_ββ + t_b² (g² V_aa - 2ρ g V_ab + ρ² V_bb) + κ β²

A quadratic in ρ (E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175), each slope with its own degrees of freedom; κ holds
the relative uncertainties that β alone carries, such as the stock's, and g by how much β moves with the calibration's
intercept a: not at all where every vessel holds the same part of sample.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules.interval import Interval, between

if TYPE_CHECKING:
    from rules.line import Floats


@dataclass(frozen=True, slots=True)
class Slope:
    """A slope with its variance and the t that belongs to it, each float64[m]."""

    value: Floats
    variance: Floats
    t: Floats


@dataclass(frozen=True, slots=True)
class Shared:
    """How β moves with the calibration's intercept, g, and that intercept's variance and covariance with b."""

    moves: Floats
    variance: Floats
    both: Floats

    @classmethod
    def nothing(cls, count: int) -> Shared:
        """Return what slopes share that know nothing of each other."""
        return cls(np.zeros(count), np.zeros(count), np.zeros(count))


def interval(upper: Slope, lower: Slope, common: Floats, shared: Shared) -> Interval:
    """Return the interval of β/b for each series; NaN bounds where b is too uncertain for a finite one."""
    with np.errstate(invalid="ignore", divide="ignore"):
        # a slope without variance needs no t, which nobody could give it
        t2 = np.where(lower.variance == 0, 0.0, lower.t**2)
        excess = t2 * lower.variance
        moved = t2 * shared.moves**2 * shared.variance
        last = upper.value**2 * (1 - common) - upper.t**2 * upper.variance - moved
        middle = upper.value * lower.value - t2 * shared.moves * shared.both
        return between(lower.value**2 - excess, middle, last, excess / lower.value**2)
