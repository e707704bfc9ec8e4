"""The ratio of two slopes with its interval: the sensitivity in the sample against the calibration's.

    (β - ρ b)² ≤ t_β² V_ββ + ρ² t_b² V_bb + κ β²

A quadratic in ρ (E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175), each slope with its own degrees of freedom; κ holds
the relative uncertainties that β alone carries, such as the stock's.
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


def interval(upper: Slope, lower: Slope, common: Floats) -> Interval:
    """Return the interval of β/b for each series; NaN bounds where b is too uncertain for a finite one."""
    with np.errstate(invalid="ignore", divide="ignore"):
        excess = lower.t**2 * lower.variance
        last = upper.value**2 * (1 - common) - upper.t**2 * upper.variance
        return between(lower.value**2 - excess, upper.value * lower.value, last, excess / lower.value**2)
