"""Every statistic of a line against exact fractions, and ten thousand series at once against one by one."""

from __future__ import annotations

from dataclasses import fields
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest

from rules import lack_of_fit, line, variance
from rules.interval import BlankTerm, Covariance, extrapolation, student_t
from rules.line import Segments

pytestmark = pytest.mark.proof


def decimal(value):
    """A fraction to the precision of the context."""
    return Decimal(value.numerator) / Decimal(value.denominator)


def exact_interval(alpha, beta, v, t):
    """Bounds of Fieller's interval with 60 digits, and g."""
    tt = Fraction(float(t)) ** 2
    lead = beta**2 - tt * v["var_slope"]
    middle = alpha * beta - tt * v["covariance"]
    last = alpha**2 - tt * v["var_intercept"]
    with localcontext() as context:
        context.prec = 60
        root = decimal(middle**2 - lead * last).sqrt()
        low, high = ((decimal(middle) + sign * root) / decimal(lead) for sign in (-1, 1))
        return float(low), float(high), float(decimal(tt * v["var_slope"] / beta**2))


def total(*columns):
    """Sum of the products of columns."""
    summed = Fraction(0)
    for terms in zip(*columns, strict=True):
        product = Fraction(1)
        for term in terms:
            product *= term
        summed += product
    return summed


def exact(x, y, w):
    """Every statistic of a weighted line, of its bend and of its lack of fit, in exact fractions."""
    x, y, w = ([Fraction(float(v)) for v in column] for column in (x, y, w))
    n, weight = len(x), sum(w)
    mean_x, mean_y = total(w, x) / weight, total(w, y) / weight
    dx, dy = [a - mean_x for a in x], [b - mean_y for b in y]
    s_xx, s_xy, s_yy = total(w, dx, dx), total(w, dx, dy), total(w, dy, dy)
    slope = s_xy / s_xx
    intercept = mean_y - slope * mean_x
    residuals = [b - slope * a for a, b in zip(dx, dy, strict=True)]
    ss = total(w, residuals, residuals)
    scatter = ss / (n - 2)
    # the part of the square that a line cannot follow
    square = [a * a for a in dx]
    level, tilt = total(w, square) / weight, total(w, dx, square) / s_xx
    bend = [q - level - tilt * a for q, a in zip(square, dx, strict=True)]
    explained = total(w, bend, residuals) ** 2 / total(w, bend, bend)
    groups: dict[Fraction, list[int]] = {}
    for place, a in enumerate(x):
        groups.setdefault(a, []).append(place)
    pure = Fraction(0)
    for places in groups.values():
        of_level = sum(w[i] * residuals[i] for i in places) / sum(w[i] for i in places)
        pure += sum(w[i] * (residuals[i] - of_level) ** 2 for i in places)
    return {
        "mean_x": mean_x,
        "mean_y": mean_y,
        "s_xx": s_xx,
        "slope": slope,
        "intercept": intercept,
        "residual_variance": scatter,
        "var_slope": scatter / s_xx,
        "covariance": -scatter * mean_x / s_xx,
        "var_intercept": scatter * (1 / weight + mean_x**2 / s_xx),
        "r_squared": s_xy**2 / (s_xx * s_yy),
        "bend_f": explained / ((ss - explained) / (n - 3)),
        "lack_of_fit_f": ((ss - pure) / (len(groups) - 2)) / (pure / (n - len(groups))),
    }, residuals


def computed(x, y, w):
    """The same by the program."""
    segments = Segments.of_sizes(np.array([len(x)]))
    fit = line.fit(x, y, w, segments)
    dx, ss = x - fit.mean_x, segments.sum(w * fit.residuals**2)
    split = lack_of_fit.split(x, np.ones(len(x)), fit.residuals, w, segments)
    return {
        "mean_x": fit.mean_x,
        "mean_y": fit.mean_y,
        "s_xx": fit.s_xx,
        "slope": fit.slope,
        "intercept": fit.intercept,
        "residual_variance": fit.residual_sd**2,
        "var_slope": fit.var_slope,
        "covariance": fit.covariance,
        "var_intercept": fit.var_intercept,
        "r_squared": fit.correlation**2,
        "bend_f": line.quadratic_f(dx, fit.residuals, w, ss, segments)[0],
        "lack_of_fit_f": split.f,
    }, fit


@pytest.mark.parametrize(
    ("offset_x", "offset_y", "allowed"),
    [(0.0, 0.0, 1e-11), (1e5, 0.0, 1e-9), (0.0, 1e5, 1e-9), (1e5, 1e5, 1e-9)],
    ids=["ordinary", "additions + 1e5", "signals + 1e5", "both + 1e5"],
)
def test_exact_fractions_agree(offset_x, offset_y, allowed, tabulate):
    """200 weighted series: every statistic within 1e-11 of exact fractions, within 1e-9 with offsets of 10⁵."""
    random = np.random.default_rng(100)
    worst: dict[str, float] = {}
    for _ in range(200):
        n = int(random.integers(5, 13))
        # dyadic numbers, so that neither offset nor repeat costs the input a digit
        levels = random.choice(np.arange(1, 8193), n - 2, replace=False) / 1024
        x = np.concatenate((levels, levels[:2])) + offset_x
        y = np.round((0.5 + 3 * (x - offset_x) + random.normal(0, 0.5, n)) * 1024) / 1024 + offset_y
        w = np.round(random.uniform(0.25, 4, n) * 64) / 64
        truth, residuals = exact(x, y, w)
        got, fit = computed(x, y, w)
        errors = {name: abs(float(Fraction(float(got[name][0])) / value - 1)) for name, value in truth.items()}
        largest = max(abs(float(r)) for r in residuals)
        errors["residuals"] = float(max(abs(np.array([float(r) for r in residuals]) - fit.residuals))) / largest
        t = student_t(0.95, fit.dof)
        covariance = Covariance(fit.var_intercept, fit.covariance, fit.var_slope)
        found = extrapolation(fit.intercept, fit.slope, covariance, t, np.zeros(1), BlankTerm.absent(1))
        ends = (found.low, found.high, found.g)
        for name, value, end in zip(
            ("low", "high", "g"), exact_interval(truth["intercept"], truth["slope"], truth, t[0]), ends, strict=True
        ):
            # a bound near zero has no relative error worth the name: the interval's width is its scale
            scale = abs(value) if name == "g" else max(abs(value), float(found.high[0] - found.low[0]))
            errors[name] = abs(float(end[0]) - value) / scale
        for name, error in errors.items():
            worst[name] = max(worst.get(name, 0.0), error)
    table = tabulate(f"Largest relative error, offsets {offset_x:g} and {offset_y:g}", "statistic", "error", "allowed")
    for name, error in worst.items():
        table.add(name, f"{error:.1e}", f"{allowed:g}")

    assert {name: error for name, error in worst.items() if not error <= allowed} == {}


SERIES = 10_000


def close(one, many, scale):
    """Whether numbers agree to 1e-12 of their size or of a scale, NaN with NaN."""
    return np.allclose(one, many, rtol=1e-12, atol=1e-12 * scale, equal_nan=True)


@pytest.mark.parametrize("model", ["constant", "proportional"])
def test_ten_thousand_series_of_mixed_size_equal_one_by_one(model):
    """10,000 series of 2 to 9 points, fitted together and one by one, agree to 1e-12 in every column of a fit."""
    random = np.random.default_rng(10_000)
    sizes = random.integers(2, 10, SERIES)
    together = Segments.of_sizes(sizes)
    x = np.concatenate([np.arange(n) / (n - 1) for n in sizes])
    y = (together.spread(random.uniform(0.1, 5, SERIES)) + x) * (1 + random.normal(0, 0.02, len(x)))
    dilution = random.uniform(0.5, 1, len(x))
    nothing = variance.Floor(np.full(SERIES, np.nan), np.full(SERIES, np.nan))

    many = variance.fit(x, y, dilution, np.zeros(len(x)), nothing, model, together)

    apart = []
    for series, (start, n) in enumerate(zip(together.starts, sizes, strict=True)):
        part, alone = slice(start, start + n), np.array([series])
        segments = Segments.of_sizes(np.array([n]))
        one = variance.fit(x[part], y[part], dilution[part], np.zeros(n), nothing.of(alone), model, segments)
        for column in fields(one.lines):
            ours, theirs = getattr(one.lines, column.name), getattr(many.lines, column.name)
            scale = 1.0 if column.name in ("curvature_p", "residuals", "intercept") else 0.0
            if not close(ours, theirs[part] if column.name == "residuals" else theirs[alone], scale):
                apart.append((series, column.name))
        if not close(one.weights, many.weights[part], 0.0):
            apart.append((series, "weights"))
    assert apart == []


def test_ten_thousand_results_equal_one_by_one(trials, sample_roles):
    """10,000 samples of one export and 10,000 exports of one sample give the same results to 1e-12."""
    random = np.random.default_rng(12)
    additions = np.array([0.0, 0.4, 0.7, 1.0])
    signal = (random.uniform(0.2, 3, (SERIES, 1)) + additions) * (1 + random.normal(0, 0.02, (SERIES, 4)))
    added = {"added": np.where(additions > 0, additions, np.nan)}
    names = ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty", "coverage_factor", "dof")

    many = trials(sample_roles(additions), signal, added, variance="proportional").additions

    apart = []
    for i in range(SERIES):
        one = trials(sample_roles(additions), signal[i : i + 1], added, variance="proportional").additions
        apart += [(i, name) for name in names if not close(getattr(one, name), getattr(many, name)[i : i + 1], 0.0)]
    assert apart == []
