"""Correct digits, -log10 of the relative error, on the statistical reference datasets of NIST.

Certified values: NIST Statistical Reference Datasets, linear least squares; Norris and Pontius read, of NoInt1 and
NoInt2 the residual standard deviations recalled.
"""

from __future__ import annotations

import numpy as np
import pytest

from rules import line
from rules.line import Segments

pytestmark = pytest.mark.proof

#: Slope, intercept, their standard deviations, residual standard deviation, r².
NORRIS = {
    "intercept": -0.262323073774029,
    "slope": 1.00211681802045,
    "sd of intercept": 0.232818234301152,
    "sd of slope": 0.000429796848199937,
    "residual sd": 0.884796396144373,
    "r squared": 0.999993745883712,
}
THROUGH_ZERO = {
    "NoInt1": {"slope": 2.07438016528926, "sd of slope": 0.0165289256198347, "residual sd": 3.56753034006338},
    "NoInt2": {"slope": 0.727272727272727, "sd of slope": 0.0420827318078432, "residual sd": 0.369274472937998},
}


def digits(got, certified):
    """Correct digits; certified values hold 15."""
    error = abs(got / certified - 1)
    return 15.0 if error == 0 else min(15.0, -np.log10(error))


def fitted(x, y):
    """The quantities that are certified."""
    fit = line.fit(x, y, np.ones(len(x)), Segments.of_sizes(np.array([len(x)])))
    return fit, {
        "intercept": fit.intercept[0],
        "slope": fit.slope[0],
        "sd of intercept": np.sqrt(fit.var_intercept[0]),
        "sd of slope": np.sqrt(fit.var_slope[0]),
        "residual sd": fit.residual_sd[0],
        "r squared": fit.correlation[0] ** 2,
    }


def test_norris_to_twelve_digits(columns_of, tabulate):
    """Every certified quantity of Norris has at least twelve correct digits."""
    data = columns_of("nist_norris")
    table = tabulate("Correct digits, Norris", "quantity", "certified", "computed", "digits")

    _, got = fitted(data["x"], data["y"])

    found = {name: digits(got[name], certified) for name, certified in NORRIS.items()}
    for name, certified in NORRIS.items():
        table.add(name, f"{certified:.15g}", f"{got[name]:.15g}", f"{found[name]:.1f}")
    assert min(found.values()) >= 12, found


@pytest.mark.parametrize("name", THROUGH_ZERO)
def test_lines_through_zero_to_twelve_digits(columns_of, tabulate, name):
    """Each point entered with its negative: slope, residual SD and the slope's SD times √2 hold twelve digits."""
    data = columns_of("nist_through_zero")
    x, y = (data[column][data["set"] == name] for column in ("x", "y"))
    table = tabulate(f"Correct digits, {name}", "quantity", "certified", "computed", "digits")

    fit, got = fitted(np.concatenate((x, -x)), np.concatenate((y, -y)))

    got["sd of slope"] *= np.sqrt(2)
    found = {key: digits(got[key], certified) for key, certified in THROUGH_ZERO[name].items()}
    for key, certified in THROUGH_ZERO[name].items():
        table.add(key, f"{certified:.15g}", f"{got[key]:.15g}", f"{found[key]:.1f}")
    assert min(found.values()) >= 12, found
    assert abs(fit.intercept[0]) < 1e-12 * np.abs(y).max()


def test_load_cell_has_the_certified_quadratic_term(columns_of, tabulate):
    """F of the quadratic term of Pontius is 4218.525063, to nine digits that of its certified coefficient."""
    data = columns_of("nist_pontius")
    certified = (-3.16081871345029e-15 / 4.86652849992036e-17) ** 2
    segments, ones = Segments.of_sizes(np.array([40])), np.ones(40)

    fit, _ = fitted(data["x"], data["y"])
    ss = segments.sum(fit.residuals**2)
    f, dof = line.quadratic_f(data["x"] - fit.mean_x, fit.residuals, ones, ss, segments)

    table = tabulate("Correct digits, Pontius", "quantity", "certified", "computed", "digits")
    table.add("F of the quadratic term", f"{certified:.15g}", f"{f[0]:.15g}", f"{digits(f[0], certified):.1f}")
    assert dof[0] == 37
    assert f[0] == pytest.approx(4218.525063, abs=5e-7)
    assert digits(f[0], certified) >= 9
