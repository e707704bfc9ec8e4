"""How the scatter of a signal grows with it, and the line that is fitted with weights to match.

    constant       h = 1
    proportional   h = ŷ²
    counting       h = ŷ          signals must be counts

h is taken at the FITTED gross signal ŷ and iterated from equal weights: weights from observed signals would favour
whichever reading came out low and bias the slope (by -2 % at 10 % noise). ŷ is floored, because a weight must not
grow without bound where the signal vanishes.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules import line

if TYPE_CHECKING:
    from rules.line import Floats, Integers, Lines, Segments
    from rules.method import VarianceModel

#: Power of the fitted signal that its variance goes with.
POWER: dict[str, float] = {"constant": 0.0, "counting": 1.0, "proportional": 2.0}
#: Rounds after which the weights no longer change by anything that matters (method, section 3).
MOST_ROUNDS = 5
#: Where neither a limit of quantification nor blanks give a floor: this fraction of the series' highest signal.
LEAST_OF_HIGHEST = 0.01


@dataclass(frozen=True, slots=True)
class WeightedFit:
    """A fit with the weights it ended with.

    Attributes
    ----------
    lines
        The fit of Y on A.
    weights
        float64[n], w = f² / h.
    gross
        float64[n], fitted signal in the vessel, the blank included.
    variance
        float64[n], h: variance of a signal in units of the squared residual SD.
    least
        float64[m], least signal that a weight was computed at.
    """

    lines: Lines
    weights: Floats
    gross: Floats
    variance: Floats
    least: Floats


@dataclass(frozen=True, slots=True)
class Floor:
    """What the least signal is taken from at which a weight is computed.

    Attributes
    ----------
    loq
        float64[m], limit of quantification in the unit of the additions; NaN where none is stated.
    blank
        float64[m], three standard deviations of the blanks; NaN where there are fewer than two.
    """

    loq: Floats
    blank: Floats

    def of(self, keys: Integers) -> Floor:
        """Return the floor of a selection."""
        return Floor(self.loq[keys], self.blank[keys])

    def signal(self, slope: Floats, highest: Floats) -> Floats:
        """Return the least signal of each series: that of the LOQ, else of the blanks, else a part of the highest."""
        by_loq = np.abs(slope) * self.loq
        floor = np.where(np.isfinite(by_loq), by_loq, self.blank)
        return np.where(np.isfinite(floor) & (floor > 0), floor, LEAST_OF_HIGHEST * highest)


def fit(
    x: Floats, y: Floats, dilution: Floats, offset: Floats, floor: Floor, model: VarianceModel, segments: Segments
) -> WeightedFit:
    """Fit Y = α + βA to every series with the weights of a variance model.

    Parameters
    ----------
    x, y
        float64[n], additions A and scaled signals Y.
    dilution
        float64[n], f; the signal in the vessel is f Y + offset.
    offset
        float64[n], what the blank adds to the signal in the vessel.
    floor
        What keeps a weight from growing without bound.
    model
        How the variance goes with the signal.
    segments
        Where the series lie.
    """
    power = POWER[model]
    highest = segments.max(np.abs(dilution * y + offset))
    variance = np.ones(len(x))
    lines = line.fit(x, y, dilution**2, segments)
    least = floor.signal(lines.slope, highest)
    gross = _gross(lines, x, dilution, offset, segments)
    for _ in range(MOST_ROUNDS if power else 0):
        with np.errstate(invalid="ignore", divide="ignore"):
            variance = np.maximum(gross, segments.spread(least)) ** power
        lines = line.fit(x, y, dilution**2 / variance, segments)
        gross = _gross(lines, x, dilution, offset, segments)
    return WeightedFit(lines, dilution**2 / variance, gross, variance, least)


def at(signal: Floats, least: Floats, model: VarianceModel) -> Floats:
    """Return h at a signal, not below the floor.

    >>> at(np.array([0.5, 2.0]), np.array([1.0, 1.0]), "proportional").tolist()
    [1.0, 4.0]
    """
    return np.asarray(np.maximum(signal, least) ** POWER[model], dtype=np.float64)


def _gross(lines: Lines, x: Floats, dilution: Floats, offset: Floats, segments: Segments) -> Floats:
    with np.errstate(invalid="ignore"):
        return dilution * (segments.spread(lines.intercept) + segments.spread(lines.slope) * x) + offset
