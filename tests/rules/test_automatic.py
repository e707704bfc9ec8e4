"""The choice left to the program: additions wherever their line gives a number, else the calibration, honestly wide."""

from __future__ import annotations

import numpy as np
import pytest

from rules.case import Reported

STANDARDS = ([0, 2, 5, 10], [0.001, 0.202, 0.499, 1.001])


def share(results, component):
    """A component of a budget."""
    return next(part for part in results.budget if part.component == component)


@pytest.fixture(scope="session")
def automatic(outcomes, make_standards, make_additions):
    """Outcomes of a calibration and the additions of one sample, with an ordinary sample beside it."""

    def made(signals, added, **method):
        rows = make_standards(*STANDARDS) + make_additions(signals, added)
        rows.append({"sample": "SED-12", "role": "unspiked", "signal": 0.3})
        return outcomes(rows, report="automatic", **method)

    return made


def test_additions_are_reported_where_their_line_gives_a_number(automatic):
    """A line with a slope worth the name reports the additions' result."""
    out = automatic([0.2, 0.29, 0.41, 0.5], [0, 1, 2, 3.0])

    assert out.case.reported.tolist() == [Reported.ADDITIONS, Reported.CALIBRATION]


def test_a_failing_recovery_does_not_change_the_choice(automatic):
    """Half the slope fails recovery and stays the additions' result: nothing is chosen because it passes."""
    out = automatic([0.2, 0.25, 0.301, 0.349], [0, 1, 2, 3.0])

    assert out.case.reported[0] == Reported.ADDITIONS
    assert out.case.recoveries.slope[0] < 60


def test_without_a_number_from_additions_the_calibration_carries_the_matrix_effect(automatic):
    """The u of the matrix is x √(δ² + u_δ²), beside the line's, and widens U and the interval."""
    out = automatic([0.2, 0.35, 0.28], [0, 1, 2.0])

    case = out.case
    assert case.reported[0] == Reported.CALIBRATION
    results = case.back.results
    delta, own = case.recoveries.matrix_effect[0] / 100, case.recoveries.slope_u[0] / 100
    part = share(results, "matrix_effect")
    assert part.standard_uncertainty[0] == pytest.approx(results.value[0] * np.hypot(delta, own))
    line = share(results, "line").standard_uncertainty[0]
    assert results.standard_uncertainty[0] == pytest.approx(np.hypot(line, part.standard_uncertainty[0]))
    assert results.high[0] - results.value[0] >= 1.95 * part.standard_uncertainty[0]
    assert results.coverage_factor[0] == pytest.approx(
        results.expanded_uncertainty[0] / results.standard_uncertainty[0]
    )


def test_an_ordinary_sample_lists_the_matrix_effect_as_absent(automatic):
    """Without additions nothing is known of the matrix: the component is there without a number, U as before."""
    out = automatic([0.2, 0.29, 0.41, 0.5], [0, 1, 2, 3.0])

    results = out.case.back.results
    assert np.isnan(share(results, "matrix_effect").standard_uncertainty[1])
    assert results.standard_uncertainty[1] == pytest.approx(share(results, "line").standard_uncertainty[1])


def test_additions_reported_leave_the_calibrations_budget_alone(automatic):
    """The calibration's result beside reported additions carries no matrix effect: it is only shown."""
    out = automatic([0.2, 0.29, 0.41, 0.5], [0, 1, 2, 3.0])

    assert share(out.case.back.results, "matrix_effect").standard_uncertainty[0] == 0
