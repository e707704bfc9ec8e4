"""Recoveries and matrix effect: what the additions gave, seen by something that does not depend on them.

    R_j = 100 [y_j - φ y_0 - a (1 - φ)] / (b c_j),  φ = f_j / f_0       slope recovery = 100 β / b

Without a calibration there is no recovery: the additions' own line always recovers 100 %. Joint uncertainties of
recoveries are not given here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from rules.additions import Fits
    from rules.calibration import Calibrations
    from rules.line import Floats, Integers
    from rules.reading_back import ReadBack
    from rules.series import Series
    from rules.solutions import Solutions
    from rules.vessels import Vessels


@dataclass(frozen=True, slots=True)
class Recoveries:
    """Recoveries of every addition and of every series.

    Attributes
    ----------
    each
        float64[k], R_j in % at the places of ``Series.members``; NaN for what is no addition or cannot be evaluated.
    slope
        float64[m], slope recovery in %.
    levels
        int64[m], distinct additions above zero.
    """

    each: Floats
    slope: Floats
    levels: Integers

    @property
    def matrix_effect(self) -> Floats:
        """100 (β/b - 1) %."""
        return self.slope - 100


def evaluate(
    series: Series,
    solutions: Solutions,
    vessels: Vessels,
    fits: Fits,
    calibrations: Calibrations,
    back: ReadBack,
) -> Recoveries:
    """Compare additions with the calibration of the same export."""
    seg, members = series.segments, series.members
    at = back.calibration
    lines = calibrations.lines

    def of(values: Floats) -> Floats:
        return np.where(at >= 0, values[at], np.nan) if len(values) else np.full(len(series), np.nan)

    with np.errstate(invalid="ignore", divide="ignore"):
        a, b = of(lines.intercept), of(lines.slope)
        natives = seg.sum(series.unspiked.astype(float))
        y, f = solutions.signal[members], vessels.dilution[members]
        y_0 = seg.sum(np.where(series.unspiked, y, 0.0)) / natives
        f_0 = seg.sum(np.where(series.unspiked, f, 0.0)) / natives
        phi = f / seg.spread(f_0)
        c = vessels.added[members]
        each = 100 * (y - phi * seg.spread(y_0) - seg.spread(a) * (1 - phi)) / (seg.spread(b) * c)
        each = np.where(series.spiked, each, np.nan)
        slope = 100 * fits.spread(fits.lines.slope) / b
    levels = np.where(fits.of_series >= 0, fits.distinct[fits.of_series] if len(fits.distinct) else 0, 0)
    return Recoveries(each, slope, levels.astype(np.int64))
