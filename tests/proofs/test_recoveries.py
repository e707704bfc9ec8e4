"""Uncertainty of recoveries against simulation, and coverage of the interval of a ratio of two slopes."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from parsers.readings import Role
from rules.method import Bench, Measure, Stock

pytestmark = pytest.mark.proof

TRIALS = 100_000
STOCK, ALIQUOT, TRUE_RATIO = 20.0, 10.0, 0.9


def simulate(trials, sample_roles, random, *, n, standards, noise, stock=0.0, native=0.5, intercept=0.0, on_top=True):
    """Trials of a sample with n solutions and its calibration; `noise` is that of sample and standards, in signal."""
    additions, nominal = np.linspace(0, 1, n), np.linspace(0, 2, standards)
    volume = ALIQUOT * additions / STOCK
    vessel = ALIQUOT + volume if on_top else np.full(n, 2 * ALIQUOT)
    dilution = ALIQUOT / vessel
    of_sample, of_standards = noise
    strength = 1 + random.normal(0, stock, (TRIALS, 1))
    signal = intercept + TRUE_RATIO * dilution * (native + additions * strength)
    signal = signal + random.normal(0, of_sample, (TRIALS, n))
    calibration = intercept + nominal + random.normal(0, of_standards, (TRIALS, standards))
    return trials(
        [Role.STANDARD] * standards + sample_roles(additions),
        np.concatenate((calibration, signal), axis=1),
        {
            "nominal": np.concatenate((nominal, np.full(n, np.nan))),
            "spike_volume": np.concatenate((np.full(standards, np.nan), np.where(volume > 0, volume, np.nan))),
        },
        report="calibration",
        bench=Bench(aliquot=Measure(ALIQUOT, "mL"), made_up_to=None if on_top else Measure(2 * ALIQUOT, "mL")),
        stocks=(Stock("ZN-20", {"Zn": Measure(STOCK, "mg/L")}, relative_uncertainty=stock or None),),
    )


def root_mean_square(values):
    """Of each column."""
    return np.sqrt(np.mean(values**2, axis=0))


@pytest.mark.parametrize("stock", [0.0, 0.01], ids=["stock exact", "stock 1 %"])
@pytest.mark.parametrize("n", [3, 5])
def test_uncertainty_of_each_recovery_is_its_scatter(trials, sample_roles, tabulate, n, stock):
    """Over 100,000 trials the root mean square of u(R_j) is the standard deviation of R_j within 1.5 %, without bias.

    Standard on top of the aliquot and a calibration with an intercept, so φ and a count. U covers in 95 % or more: the
    scatter comes from the same residuals that move R_j, and each t is taken in full.
    """
    random = np.random.default_rng([4, n, int(100 * stock)])
    table = tabulate(
        f"R_j, N = {n}, stock {100 * stock:g} %", "j", "bias %", "SD %", "rms u %", "u/SD - 1, %", "U covers %"
    )

    found = simulate(
        trials, sample_roles, random, n=n, standards=6, noise=(0.005, 0.005), stock=stock, intercept=0.1
    ).recoveries

    each, u, expanded = (column.reshape(TRIALS, n)[:, 1:] for column in (found.each, found.each_u, found.each_expanded))
    truth = 100 * TRUE_RATIO
    bias, sd, rms = each.mean(axis=0) - truth, each.std(axis=0), root_mean_square(u)
    held = np.mean(np.abs(each - truth) <= expanded, axis=0)
    for j in range(n - 1):
        apart = f"{100 * (rms[j] / sd[j] - 1):+.2f}"
        table.add(j + 1, f"{bias[j]:+.3f}", f"{sd[j]:.3f}", f"{rms[j]:.3f}", apart, f"{100 * held[j]:.2f}")

    assert np.abs(bias) == pytest.approx(0, abs=5 * sd.max() / np.sqrt(TRIALS))
    assert rms / sd == pytest.approx(np.ones(n - 1), abs=0.015)
    assert held.min() >= 0.945


def test_a_single_addition_borrows_the_scatter_of_the_standards(trials, sample_roles):
    """One addition, noise as the standards': u(R) is the scatter of R within 1.5 %, and U covers in 95 ± 0.5 %."""
    random = np.random.default_rng(42)

    found = simulate(trials, sample_roles, random, n=2, standards=5, noise=(0.005, 0.005), intercept=0.1).recoveries

    each, u, expanded = (column.reshape(TRIALS, 2)[:, 1] for column in (found.each, found.each_u, found.each_expanded))
    assert root_mean_square(u) / each.std() == pytest.approx(1, abs=0.015)
    assert np.mean(np.abs(each - 100 * TRUE_RATIO) <= expanded) == pytest.approx(0.95, abs=0.005)


#: Solutions, standards, noise of sample and of standards: where one slope is far less certain than the other, or both
#: have many degrees of freedom, the interval is exact.
EXACT = {
    "calibration certain, 4": (4, 8, (0.01, 0.0002)),
    "calibration certain, 8": (8, 8, (0.01, 0.0002)),
    "additions certain, 5": (10, 5, (0.0001, 0.01)),
    "additions certain, 8": (10, 8, (0.0001, 0.01)),
    "both many": (20, 20, (0.01, 0.01)),
}
#: Elsewhere both t are taken in full and the interval is too wide, never too narrow.
BOTH_UNCERTAIN = {
    f"{n} solutions, {standards} standards": (n, standards, (0.005, 0.005))
    for n, standards in product((3, 4, 6), (3, 5, 8))
}


def add_ratio(table, design, found):
    """Row of a design; return coverage at the method's confidence and at 90 %, and u against scatter."""
    truth = TRUE_RATIO
    shares = [
        float(np.mean(((span.low <= truth) & (truth <= span.high)) | ~np.isfinite(span.low)))
        for span in (found.slope_interval, found.equivalence_interval)
    ]
    sd, rms = float(found.slope.std()), float(root_mean_square(found.slope_u))
    bias = float(found.slope.mean()) - 100 * truth
    table.add(design, f"{bias:+.3f}", f"{sd:.3f}", f"{rms:.3f}", *(f"{100 * share:.2f}" for share in shares))
    return (*shares, rms / sd)


RATIO_HEADS = ("design", "bias %", "SD %", "rms u %", "95 % interval covers %", "90 % interval covers %")


def test_interval_of_the_ratio_is_exact_where_one_slope_decides(trials, sample_roles, tabulate):
    """Where one slope is far less certain, or both have many degrees of freedom, the interval covers in 95 ± 0.5 %."""
    random = np.random.default_rng(43)
    table = tabulate("Interval of β/b where one slope decides", *RATIO_HEADS)
    found = {}
    for design, (n, standards, noise) in EXACT.items():
        case = simulate(trials, sample_roles, random, n=n, standards=standards, noise=noise, on_top=False)
        found[design] = add_ratio(table, design, case.recoveries)

    for design, (at_95, at_90, ratio) in found.items():
        assert at_95 == pytest.approx(0.95, abs=0.005), design
        assert at_90 == pytest.approx(0.90, abs=0.006), design
        assert ratio == pytest.approx(1, abs=0.015), design


@pytest.mark.parametrize("stock", [0.0, 0.01], ids=["stock exact", "stock 1 %"])
def test_interval_of_the_ratio_is_never_too_narrow(trials, sample_roles, tabulate, stock):
    """With few degrees of freedom on both sides the interval covers in at least 94.5 %, with a common stock too."""
    random = np.random.default_rng([44, int(100 * stock)])
    table = tabulate(f"Interval of β/b, both slopes uncertain, stock {100 * stock:g} %", *RATIO_HEADS)
    found = {}
    for design, (n, standards, noise) in BOTH_UNCERTAIN.items():
        case = simulate(trials, sample_roles, random, n=n, standards=standards, noise=noise, stock=stock, on_top=False)
        found[design] = add_ratio(table, design, case.recoveries)

    for design, (at_95, at_90, ratio) in found.items():
        assert at_95 >= 0.945, design
        assert at_90 >= 0.894, design
        # second order: u of a ratio is that of its linear form
        assert ratio == pytest.approx(1, abs=0.03), design
