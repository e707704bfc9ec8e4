"""One fitted line with its statistics as plain numbers, from the fit that runs in service for many series at once."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt
from typing import TYPE_CHECKING

import numpy as np

from rules import lack_of_fit, line
from rules.interval import BlankTerm, Covariance, extrapolation, read_back, student_t

if TYPE_CHECKING:
    from rules.interval import Interval
    from rules.lack_of_fit import LackOfFit
    from rules.line import Floats, Lines, Segments


@dataclass(frozen=True, slots=True)
class StraightLine:
    """A line through one set of points.

    Attributes
    ----------
    x, y, weights
        float64[n], what was fitted.
    lines
        The fit, of a single series.
    """

    x: Floats
    y: Floats
    weights: Floats
    lines: Lines

    @classmethod
    def through(cls, x: Floats, y: Floats, weights: Floats | None = None) -> StraightLine:
        """Fit a line; weights are scaled to a mean of 1, so that its residual SD is that of a point of weight 1."""
        w = np.ones(len(x)) if weights is None else weights / weights.mean()
        return cls(x, y, w, line.fit(x, y, w, _single(x)))

    @property
    def slope(self) -> float:
        """Slope."""
        return float(self.lines.slope[0])

    @property
    def intercept(self) -> float:
        """Intercept."""
        return float(self.lines.intercept[0])

    @property
    def sd_slope(self) -> float:
        """Standard deviation of the slope."""
        return sqrt(self.lines.var_slope[0])

    @property
    def sd_intercept(self) -> float:
        """Standard deviation of the intercept."""
        return sqrt(self.lines.var_intercept[0])

    @property
    def residual_sd(self) -> float:
        """Residual standard deviation."""
        return float(self.lines.residual_sd[0])

    @property
    def residual_ss(self) -> float:
        """Residual sum of squares."""
        return self.residual_sd**2 * int(self.lines.dof[0])

    @property
    def regression_ss(self) -> float:
        """Sum of squares that the line explains."""
        return float(self.lines.slope[0] ** 2 * self.lines.s_xx[0])

    @property
    def r(self) -> float:
        """Correlation of x and y."""
        return float(self.lines.correlation[0])

    @property
    def correlation_of_parameters(self) -> float:
        """Correlation of intercept and slope."""
        return float(self.lines.covariance[0]) / (self.sd_intercept * self.sd_slope)

    @property
    def t(self) -> float:
        """Student's t at 95 % for the degrees of freedom of the line."""
        return float(student_t(0.95, self.lines.dof)[0])

    def quadratic_f(self) -> tuple[float, int]:
        """Return F of the quadratic term and its degrees of freedom."""
        dx = self.x - self.lines.mean_x
        ss = np.array([self.residual_ss])
        f, dof = line.quadratic_f(dx, self.lines.residuals, self.weights, ss, _single(self.x))
        return float(f[0]), int(dof[0])

    def lack_of_fit(self) -> LackOfFit:
        """Test the line against repeats at equal x."""
        return lack_of_fit.split(self.x, np.ones(len(self.x)), self.lines.residuals, self.weights, _single(self.x))

    def back_to_zero(self) -> Interval:
        """Return Fieller's 95 % limits of intercept over slope."""
        lines, t, nothing = self.lines, np.array([self.t]), np.zeros(1)
        return extrapolation(lines.intercept, lines.slope, self._covariance, t, nothing, BlankTerm.absent(1))

    def x_at(self, signal: float) -> float:
        """Return where the line takes a value: the read-back whose interval has no width."""
        return float(self._read_back(signal, 0.0, 0.0).low[0])

    def half_width_at(self, signal: float, weight: float) -> float:
        """Return half the width of the 95 % interval of a read-back from one signal of a given weight."""
        interval = self._read_back(signal, self.residual_sd**2 / weight, self.t)
        return float(interval.high[0] - interval.low[0]) / 2

    def _read_back(self, signal: float, variance: float, t: float) -> Interval:
        y, v, tt = (np.array([number]) for number in (signal, variance, t))
        return read_back(y, v, self.lines.intercept, self.lines.slope, self._covariance, tt, np.zeros(1))

    @property
    def _covariance(self) -> Covariance:
        return Covariance(self.lines.var_intercept, self.lines.covariance, self.lines.var_slope)


def _single(x: Floats) -> Segments:
    return line.Segments.of_sizes(np.array([len(x)]))
