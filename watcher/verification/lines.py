"""Published lines recomputed: certified regressions, calibrations of textbooks, analyses of variance."""

from __future__ import annotations

from math import sqrt
from typing import TYPE_CHECKING

import numpy as np

from rules import lack_of_fit
from rules.line import Segments
from watcher.verification.straight_line import StraightLine

if TYPE_CHECKING:
    from rules.line import Floats
    from watcher.verification.inputs import Inputs

    Numbers = dict[str, float]


def of_line(fit: StraightLine) -> Numbers:
    """Return what nearly every source prints of a line."""
    return {
        "slope": fit.slope,
        "intercept": fit.intercept,
        "sd of slope": fit.sd_slope,
        "sd of intercept": fit.sd_intercept,
        "residual sd": fit.residual_sd,
    }


def norris(inputs: Inputs) -> Numbers:
    """A straight line with certified values."""
    fit = StraightLine.through(*inputs.columns("nist_norris"))
    return of_line(fit) | {"r squared": fit.r**2, "residual sum of squares": fit.residual_ss}


def through_zero(inputs: Inputs, name: str) -> Numbers:
    """A line through zero: each point with its negative, which gives twice the sum of squares of x."""
    x, y = inputs.columns("nist_through_zero", set=name)
    fit = StraightLine.through(np.concatenate((x, -x)), np.concatenate((y, -y)))
    return {"slope": fit.slope, "sd of slope": fit.sd_slope * sqrt(2), "residual sd": fit.residual_sd}


def pontius(inputs: Inputs) -> Numbers:
    """A slightly bent line: F of the quadratic term, and the residual SD that F leaves to the parabola."""
    fit = StraightLine.through(*inputs.columns("nist_pontius"))
    f, dof = fit.quadratic_f()
    return {"F of the quadratic term": f, "residual sd of the parabola": sqrt(fit.residual_ss / (f + dof))}


def load_cell(inputs: Inputs) -> Numbers:
    """The same data judged by their repeats: the line is wrong, the parabola is not."""
    fit = StraightLine.through(*inputs.columns("nist_pontius"))
    split = fit.lack_of_fit()
    f, dof = fit.quadratic_f()
    repeats = len(fit.x) - int(split.levels[0])
    variance = float(split.pure_error_ss[0]) / repeats
    of_parabola = fit.residual_ss * dof / (f + dof) - float(split.pure_error_ss[0])
    return {
        "intercept": fit.intercept,
        "slope": fit.slope,
        "sd of intercept": fit.sd_intercept,
        "slope over its sd": fit.slope / fit.sd_slope,
        "lack of fit of the line, F": float(split.f[0]),
        "sd of replication": sqrt(variance),
        "lack of fit of the parabola, F": of_parabola / (int(split.levels[0]) - 3) / variance,
    }


def analysis_of_variance(inputs: Inputs, name: str) -> Numbers:
    """Lack of fit against pure error."""
    fit = StraightLine.through(*inputs.columns(name))
    split = fit.lack_of_fit()
    return {
        "SS of regression": fit.regression_ss,
        "SS of residuals": fit.residual_ss,
        "SS of lack of fit": float(split.lack_of_fit_ss[0]),
        "SS of pure error": float(split.pure_error_ss[0]),
        "F": float(split.f[0]),
        "p": float(split.p[0]),
    }


def with_repeats(inputs: Inputs) -> Numbers:
    """An analysis of variance whose table of pure error has a misprinted line."""
    x, y = inputs.columns("lack_of_fit_montgomery")
    fit = StraightLine.through(x, y)
    return analysis_of_variance(inputs, "lack_of_fit_montgomery") | {
        "intercept": fit.intercept,
        "slope": fit.slope,
        "SS of pure error at x = 4.0": _pure_error(y[x == 4]),
    }


def _pure_error(y: Floats) -> float:
    """Sum of squares of one level around its mean; pure error asks nothing of a line."""
    ones = np.ones(len(y))
    return float(lack_of_fit.split(ones, ones, y, ones, Segments.of_sizes(np.array([len(y)]))).pure_error_ss[0])


def cadmium_by_stripping(inputs: Inputs) -> Numbers:
    """A calibration with the half-width of its slope."""
    fit = StraightLine.through(*inputs.columns("cadmium_by_stripping"))
    return of_line(fit) | {"95 % half-width of slope": fit.t * fit.sd_slope}


def weighted_calibration(inputs: Inputs) -> Numbers:
    """The same standards with equal weights and with 1/s²; weights of read-backs as the book gives them."""
    x, y, s = inputs.columns("weighted_calibration")
    found: Numbers = {}
    for words, fit in (
        ("equal weights", StraightLine.through(x, y)),
        ("weights 1/s²", StraightLine.through(x, y, s**-2.0)),
    ):
        found |= {f"slope, {words}": fit.slope, f"intercept, {words}": fit.intercept}
        found |= {f"x at {signal:g}, {words}": fit.x_at(signal) for signal in (0.1, 0.6)}
    for signal, weight in ((0.1, 1.8), (0.6, 0.044)):
        found[f"U of x at {signal:g}, weights 1/s²"] = fit.half_width_at(signal, weight)
    return found


def thermometer(inputs: Inputs) -> Numbers:
    """A calibration curve with x counted from 20; counted from 30, its intercept is the correction there."""
    t, b = inputs.columns("thermometer")
    fit, at_30 = StraightLine.through(t - 20, b), StraightLine.through(t - 30, b)
    return {
        "intercept": fit.intercept,
        "s of intercept": fit.sd_intercept,
        "slope": fit.slope,
        "s of slope": fit.sd_slope,
        "correlation of both": fit.correlation_of_parameters,
        "residual sum of squares": fit.residual_ss,
        "correction at 30": at_30.intercept,
        "u of it, with covariance": at_30.sd_intercept,
    }
