"""How often a true blank is taken for a find by the decision limit of seven blanks."""

from __future__ import annotations

import numpy as np
import pytest

from parsers.readings import Role

pytestmark = pytest.mark.proof

TRIALS = 100_000


@pytest.mark.parametrize("blanks", [7, 10, 20])
def test_one_true_blank_in_a_hundred_exceeds_the_decision_limit(trials, tabulate, blanks):
    """A blank read as a sample exceeds L_C = t(0.99, n - 1) s √(1 + 1/n)/b in 1 ± 0.15 % of 100,000 trials.

    The calibration is known here and its intercept is the blank's mean: the limit concerns the scatter of blanks.
    """
    random = np.random.default_rng([7, blanks])
    table = tabulate(f"Decision limit of {blanks} blanks", "blanks", "false finds %")
    scatter = random.normal(0, 0.01, (TRIALS, blanks + 1))
    mean = scatter[:, :blanks].mean(axis=1, keepdims=True)
    standards = np.array([0.0, 5.0, 10.0])
    # standards that follow y = mean of the blanks + 0.1 x exactly, so that only the blanks scatter
    signal = np.hstack([mean + 0.1 * standards, scatter + 0.0])
    roles = [Role.STANDARD] * 3 + [Role.BLANK] * blanks + [Role.UNSPIKED]
    nominal = np.concatenate([standards, np.full(blanks + 1, np.nan)])

    case = trials(roles, signal, {"nominal": nominal}, report="calibration", blank="none")

    found = 100 * case.back.results.detected.mean()
    table.add(blanks, found)
    assert found == pytest.approx(1.0, abs=0.15)
