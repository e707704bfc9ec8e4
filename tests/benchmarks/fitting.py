"""Fitting 10,000 series of 15 points: the kernel `rules.line.fit`, alone and with putting shuffled rows in order.

Against loops over the series with the same statistics (slope, intercept, covariance, residual SD, r, p of a quadratic
term): statsmodels, a pure-Python loop; and against groupby.apply with polyfit, which gives fewer. Slow loops run on a
part of the series and are scaled up. All must agree before anything is timed.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import statsmodels.api as sm
from scipy.special import fdtrc
from table import Figure
from timing import in_turn

from rules.line import Lines, Segments, fit

if TYPE_CHECKING:
    from pathlib import Path

SERIES, POINTS = 10_000, 15
#: Series in the part that slow loops run on.
SLOW_PART, PYTHON_PART = 100, 1000
REPEATS = 5


def measure(_folder: Path) -> list[Figure]:
    """Measure; needs no folder."""
    random = np.random.default_rng(15)
    x = np.tile(np.repeat([0.0, 2.5, 5.0, 7.5, 10.0], 3), SERIES)
    slope, intercept = random.uniform(0.1, 0.2, SERIES), random.uniform(0.1, 0.9, SERIES)
    owner = np.repeat(np.arange(SERIES), POINTS)
    y = intercept[owner] + slope[owner] * x + random.normal(0, 0.01, len(x))
    shuffled = random.permutation(len(x))
    segments = Segments.of_sizes(np.full(SERIES, POINTS))
    ones = np.ones(len(x))
    x_rows, y_rows = x.reshape(SERIES, POINTS), y.reshape(SERIES, POINTS)
    frame = pd.DataFrame({"series": owner, "x": x, "y": y})
    part = frame[frame["series"] < SLOW_PART]
    pairs = list(zip(x_rows[:PYTHON_PART].tolist(), y_rows[:PYTHON_PART].tolist(), strict=True))
    mixed_owner, mixed_x, mixed_y = owner[shuffled], x[shuffled], y[shuffled]

    def ordered() -> Lines:
        order = np.argsort(mixed_owner, kind="stable")
        sizes = np.bincount(mixed_owner)
        return fit(mixed_x[order], mixed_y[order], ones, Segments.of_sizes(sizes))

    _agree(fit(x, y, ones, segments), x_rows, y_rows)
    kernel, with_order, by_statsmodels, by_python, by_groupby = in_turn(
        REPEATS,
        lambda: fit(x, y, ones, segments),
        ordered,
        lambda: [_statsmodels(x_rows[i], y_rows[i]) for i in range(SLOW_PART)],
        lambda: [_python(*pair) for pair in pairs],
        lambda: part.groupby("series").apply(lambda group: np.polyfit(group["x"], group["y"], 1, cov=True)),
    )
    by_statsmodels *= SERIES / SLOW_PART
    by_python *= SERIES / PYTHON_PART
    by_groupby *= SERIES / SLOW_PART
    return [
        _figure("kernel", kernel, by_statsmodels, f"statsmodels loop, {SLOW_PART} series scaled up", 100),
        _figure("kernel", kernel, by_python, f"pure-Python loop, {PYTHON_PART} series scaled up", None),
        _figure("kernel", kernel, by_groupby, f"groupby.apply + polyfit, {SLOW_PART} series scaled up", None),
        _figure("with ordering", with_order, by_groupby, "groupby.apply + polyfit", 150),
        _figure("with ordering", with_order, by_python, "pure-Python loop", 8),
    ]


def _figure(what: str, taken: float, baseline: float, against: str, target: int | None) -> Figure:
    return Figure(
        f"{SERIES:,} series × {POINTS}: {what}",
        taken * 1e3,
        "ms",
        baseline * 1e3,
        against,
        f"≥ {target} × faster" if target else "",
        baseline / taken >= target if target else None,
        faster=True,
    )


def _agree(lines: Lines, x: np.ndarray, y: np.ndarray) -> None:
    """Compare the three that give the same statistics on the first series."""
    for i in range(20):
        names = ("slope", "intercept", "var_slope", "covariance", "var_intercept", "residual_sd", "correlation")
        ours = [float(getattr(lines, name)[i]) for name in (*names, "curvature_p")]
        for theirs in (_statsmodels(x[i], y[i]), _python(x[i].tolist(), y[i].tolist())):
            if not np.allclose(ours, theirs, rtol=1e-6):
                raise RuntimeError(f"series {i}: {ours} against {theirs}; times of different results say nothing")


def _statsmodels(x: np.ndarray, y: np.ndarray) -> tuple[float, ...]:
    straight = sm.OLS(y, sm.add_constant(x)).fit()
    bent = sm.OLS(y, np.column_stack([np.ones(len(x)), x, x * x])).fit()
    covariance = straight.cov_params()
    return (
        straight.params[1], straight.params[0], covariance[1, 1], covariance[0, 1], covariance[0, 0],
        math.sqrt(straight.mse_resid), math.copysign(math.sqrt(straight.rsquared), straight.params[1]),
        bent.compare_f_test(straight)[1],
    )  # fmt: skip


def _python(x: list[float], y: list[float]) -> tuple[float, ...]:
    n = len(x)
    mean_x, mean_y = sum(x) / n, sum(y) / n
    dx, dy = [a - mean_x for a in x], [b - mean_y for b in y]
    s_xx = sum(a * a for a in dx)
    s_xy = sum(a * b for a, b in zip(dx, dy, strict=True))
    s_yy = sum(b * b for b in dy)
    slope = s_xy / s_xx
    residuals = [b - slope * a for a, b in zip(dx, dy, strict=True)]
    ss = sum(e * e for e in residuals)
    variance = ss / (n - 2)
    # the part of x² that a line cannot describe
    squares = [a * a for a in dx]
    mean_q, s_xq = s_xx / n, sum(a * q for a, q in zip(dx, squares, strict=True)) / s_xx
    bend = [q - mean_q - s_xq * a for q, a in zip(squares, dx, strict=True)]
    gain = sum(q * e for q, e in zip(bend, residuals, strict=True)) ** 2 / sum(q * q for q in bend)
    p = float(fdtrc(1, n - 3, gain / ((ss - gain) / (n - 3))))
    return (
        slope, mean_y - slope * mean_x, variance / s_xx, -mean_x * variance / s_xx,
        variance * (1 / n + mean_x**2 / s_xx), math.sqrt(variance), s_xy / math.sqrt(s_xx * s_yy), p,
    )  # fmt: skip
