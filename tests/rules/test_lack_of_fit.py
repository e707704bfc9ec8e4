"""Lack of fit against published analyses of variance."""

from __future__ import annotations

import numpy as np
import pytest

from rules import lack_of_fit, line
from rules.line import Segments


def fitted(x, y):
    """Split the residuals of one line with equal weights."""
    x, y = np.array(x, dtype=float), np.array(y, dtype=float)
    segments = Segments.of_sizes(np.array([len(x)]))
    ones = np.ones(len(x))
    lines = line.fit(x, y, ones, segments)
    return lack_of_fit.split(x, ones, lines.residuals, ones, segments)


def test_montgomery_and_runger(reference):
    """Montgomery & Runger, Applied Statistics and Probability for Engineers, Ex. S11-1: F = 1.42."""
    found = fitted(*reference("lack_of_fit_montgomery").values())

    assert found.f[0] == pytest.approx(1.42, abs=0.005)
    assert found.p[0] == pytest.approx(0.3276, abs=0.002)
    assert found.lack_of_fit_ss[0] == pytest.approx(4.3005, abs=0.0006)
    assert found.pure_error_ss[0] == pytest.approx(3.0366, abs=0.00011)


def test_bank_branches(reference):
    """Neter et al., Applied Linear Statistical Models: F = 14.801, P = 0.006; the raw data are recalled."""
    found = fitted(*reference("lack_of_fit_bank").values())

    assert found.f[0] == pytest.approx(14.801, abs=0.0006)
    assert found.p[0] == pytest.approx(0.006, abs=0.0005)


def test_load_cell(reference):
    """NIST/SEMATECH handbook 4.6.1 (the data of Pontius): F(18, 20) = 214.7534 for the line; recalled."""
    found = fitted(*reference("nist_pontius").values())

    assert found.levels[0] == 20
    assert found.f[0] == pytest.approx(214.7534, rel=1e-4)


@pytest.mark.parametrize(
    "rows",
    [[(0, 1.0), (1, 2.1), (2, 2.9)], [(0, 1.0), (0, 1.1), (1, 2.0), (1, 2.2)]],
    ids=["no repeats", "two levels"],
)
def test_without_repeats_or_levels_nothing_is_tested(rows):
    """Three levels and a repeat are the least that a test needs."""
    assert np.isnan(fitted(*zip(*rows, strict=True)).p[0])


def test_series_do_not_touch_each_other():
    """Two series side by side give what each gives alone, though their levels are equal."""
    one = [(0, 1.0), (0, 1.2), (1, 2.4), (2, 2.9)]
    two = [(2, 4.1), (2, 4.4), (3, 5.0), (4, 6.5), (4, 6.4)]
    x, y = (np.array(column, dtype=float) for column in zip(*one, *two, strict=True))
    segments, ones = Segments.of_sizes(np.array([4, 5])), np.ones(9)

    found = lack_of_fit.split(x, ones, line.fit(x, y, ones, segments).residuals, ones, segments)

    assert found.f.tolist() == pytest.approx([fitted(*zip(*rows, strict=True)).f[0] for rows in (one, two)])
