"""Unspiked solutions of one sample at several dilutions: brought to one base, and the line through their signals.

    y = δ + β f C

A baseline that the sample shifts shows as δ; nothing else in an export can show it (the additions' native and the
calibration's share the signal of the unspiked solution).
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from rules import line

if TYPE_CHECKING:
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.series import Series
    from rules.solutions import Solutions
    from rules.vessels import Vessels


#: Predilutions of one sample that lie farther apart than this are a slip.
MOST_RATIO = 1e9
#: A shift below this part of the highest signal is rounding.
LEAST_SHIFT = 1e-12


def on_one_base(vessels: Vessels, series: Series) -> Vessels:
    """Express the dilution of every unspiked solution on the predilution that its series is based on.

    The base is the predilution of the additions, or the least where there are none. Additions that differ among
    themselves stay as they are: they are a fault of the series.
    """
    seg, members = series.segments, series.members
    factor = vessels.predilution[members]
    spiked = np.where(series.spiked | series.further, factor, np.nan)
    low, high = (seg.min(np.where(np.isnan(spiked), np.inf, spiked)), seg.max(np.nan_to_num(spiked, nan=-np.inf)))
    base = np.where(np.isfinite(low), np.where(low == high, low, np.nan), seg.min(factor))
    of_member = seg.spread(base)
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = of_member / factor
        # what no bench can do stays as it is, and is a fault of the series
        possible = (ratio > 1 / MOST_RATIO) & (ratio < MOST_RATIO)
        moved = series.unspiked & (factor != of_member) & possible
        ratio = np.where(moved, ratio, 1.0)
    if not moved.any():
        return vessels
    dilution, fraction, predilution = (
        column.copy() for column in (vessels.dilution, vessels.fraction, vessels.predilution)
    )
    dilution[members] *= ratio
    fraction[members] *= ratio
    predilution[members[moved]] = of_member[moved]
    return replace(vessels, dilution=dilution, fraction=fraction, predilution=predilution)


@dataclass(frozen=True, slots=True)
class Dilutions:
    """What the dilutions of each series say.

    Attributes
    ----------
    shift
        float64[m], δ in units of the signal; NaN where fewer than two dilutions were measured.
    difference
        float64[m], by how many % the most diluted solution differs from the least diluted one, by the fitted line.
    most_diluted
        int64[m], the solution with the least f; -1 where there are fewer than two dilutions.
    """

    shift: Floats
    difference: Floats
    most_diluted: Integers


def evaluate(
    series: Series, solutions: Solutions, vessels: Vessels, blank: Floats, baseline: Floats, method: Method
) -> Dilutions:
    """Fit y = δ + βfC to the unspiked solutions of every series that has two or more dilutions.

    Parameters
    ----------
    series, solutions, vessels
        What the export says.
    blank, baseline
        float64[m], mean blank signal; the signal that every vessel shows and that the reported result allows for.
    method
        Whether the blank belongs to the preparation.
    """
    count = len(series)
    seg, members = series.segments, series.members
    f = vessels.dilution[members]
    least = seg.min(np.where(series.unspiked & np.isfinite(f), f, np.inf))
    most = seg.max(np.where(series.unspiked & np.isfinite(f), f, -np.inf))
    chosen = np.flatnonzero(np.isfinite(least) & (most > least * (1 + 1e-9)))
    nothing = np.full(count, np.nan)
    if not len(chosen):
        return Dilutions(nothing, nothing.copy(), np.full(count, -1, dtype=np.int64))
    at = np.full(count, -1, dtype=np.int64)
    at[chosen] = np.arange(len(chosen))
    owner = at[seg.owner]
    places = np.flatnonzero((owner >= 0) & series.unspiked)
    segments = line.Segments.of_sizes(np.bincount(owner[places], minlength=len(chosen)))
    x, y = f[places], solutions.signal[members[places]] - baseline[seg.owner[places]]
    if method.blank == "preparation":
        y = y - x * blank[seg.owner[places]]
    lines = line.fit(x, y, np.ones(len(x)), segments)
    with np.errstate(invalid="ignore", divide="ignore"):
        undiluted = lines.slope + lines.intercept / most[chosen]
        apart = 100 * lines.intercept * (1 / least[chosen] - 1 / most[chosen]) / undiluted
    resolved = np.abs(lines.intercept) > LEAST_SHIFT * segments.max(np.abs(y))
    lines_shift, apart = np.where(resolved, lines.intercept, 0.0), np.where(resolved | np.isnan(apart), apart, 0.0)
    shift, difference = nothing.copy(), nothing.copy()
    shift[chosen], difference[chosen] = lines_shift, np.where(undiluted > 0, apart, np.nan)
    most_diluted = np.full(count, -1, dtype=np.int64)
    at_least = places[x <= segments.spread(least[chosen]) * (1 + 1e-9)]
    most_diluted[seg.owner[at_least]] = members[at_least]
    return Dilutions(shift, difference, most_diluted)
