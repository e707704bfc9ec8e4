"""Weights by a variance model: their fixed point, their floor, and what they leave alone."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules import line, variance
from rules.line import Segments

NOTHING = np.array([np.nan])
FREE = variance.Floor(NOTHING, NOTHING)
X, Y = np.array([0.0, 1, 2, 3]), np.array([2.0, 4.3, 5.8, 8.1])


def fit(model, x=X, y=Y, dilution=None, offset=None, floor=FREE):
    """Fit one series."""
    ones = np.ones(len(x))
    return variance.fit(
        x,
        y,
        ones if dilution is None else dilution,
        0 * ones if offset is None else offset,
        floor,
        model,
        Segments.of_sizes(np.array([len(x)])),
    )


def test_constant_model_is_the_plain_fit_with_dilution():
    """`constant` weighs by f² alone, in one round."""
    f = np.array([1.0, 0.9, 0.8, 0.7])

    found = fit("constant", dilution=f)

    plain = line.fit(X, Y, f**2, Segments.of_sizes(np.array([4])))
    assert found.weights.tolist() == pytest.approx((f**2).tolist())
    assert found.variance.tolist() == [1, 1, 1, 1]
    assert found.lines.slope[0] == plain.slope[0]


@pytest.mark.parametrize(("model", "power"), [("proportional", 2), ("counting", 1)])
def test_weights_end_at_the_fitted_signals(model, power):
    """Each h is the power of the fitted gross signal in the vessel, and w = f²/h gives that very fit again."""
    f, blank = np.array([1.0, 0.9, 0.8, 0.7]), np.full(4, 0.4)

    found = fit(model, dilution=f, offset=blank)

    again = np.polyfit(X, Y, 1, w=np.sqrt(found.weights))
    gross = f * np.polyval(again, X) + blank
    assert [found.lines.slope[0], found.lines.intercept[0]] == pytest.approx(again)
    assert found.gross == pytest.approx(gross)
    # the last round's weights come from the fit before it, and both agree
    assert found.variance == pytest.approx(gross**power, rel=1e-6)
    assert found.weights == pytest.approx(f**2 / found.variance)


def test_observed_signals_do_not_decide_the_weights():
    """Two readings at one addition get one weight, however far apart they came out."""
    found = fit("proportional", x=np.array([0.0, 2, 2, 4]), y=np.array([1.0, 2.4, 3.8, 5.0]))

    assert found.weights[1] == pytest.approx(found.weights[2])


@pytest.mark.parametrize(
    ("floor", "expected"),
    [
        (variance.Floor(np.array([0.5]), np.array([7.0])), 1.0),  # 2 per unit times 0.5 units
        (variance.Floor(NOTHING, np.array([0.3])), 0.3),
        (FREE, 0.01 * 8.0),
        (variance.Floor(NOTHING, np.zeros(1)), 0.01 * 8.0),
    ],
    ids=["limit of quantification", "blanks", "neither", "blanks without scatter"],
)
def test_floor_is_taken_from_the_limit_then_the_blanks_then_the_highest_signal(floor, expected):
    """The least signal is that of the LOQ, else three SD of the blanks, else 1 % of the highest signal."""
    assert floor.signal(np.array([2.0]), np.array([8.0]))[0] == pytest.approx(expected)


def test_no_signal_weighs_more_than_the_floor_allows():
    """A native of no signal is weighed at the floor, not at 1/0."""
    x, y = np.array([0.0, 1, 2, 3]), np.array([0.0, 1.02, 1.97, 3.01])

    found = fit("proportional", x=x, y=y, floor=variance.Floor(np.array([0.2]), NOTHING))

    slope = np.polyfit(x, y, 1)[0]
    assert found.least[0] == pytest.approx(0.2 * slope)
    assert found.variance[0] == pytest.approx(found.least[0] ** 2)
    assert found.variance[1:] == pytest.approx(found.gross[1:] ** 2, rel=1e-6)


def test_variance_at_a_signal_is_floored_too():
    """H of a further signal follows the same model and floor."""
    assert variance.at(np.array([0.1, 3.0]), np.array([0.5, 0.5]), "counting").tolist() == [0.5, 3.0]
    assert variance.at(np.array([0.1, 3.0]), np.array([0.5, 0.5]), "constant").tolist() == [1.0, 1.0]


def test_a_selection_of_a_floor_keeps_its_order():
    """Keys pick the floors of their series."""
    floor = variance.Floor(np.array([1.0, 2.0, 3.0]), np.array([4.0, 5.0, 6.0])).of(np.array([2, 0]))

    assert (floor.loq.tolist(), floor.blank.tolist()) == ([3.0, 1.0], [6.0, 4.0])


@settings(deadline=None)
@given(
    signals=st.lists(st.floats(0.5, 10), min_size=4, max_size=4),
    factor=st.floats(0.01, 100),
    model=st.sampled_from(["constant", "proportional", "counting"]),
)
def test_unit_of_the_signal_does_not_matter(signals, factor, model):
    """Signals times a factor give the same C = α/β under every model, the floor going along."""
    y = np.cumsum(signals)

    one, other = fit(model, y=y).lines, fit(model, y=factor * y).lines

    assert other.intercept[0] / other.slope[0] == pytest.approx(one.intercept[0] / one.slope[0], rel=1e-8, abs=1e-9)


def test_no_series_need_no_weights():
    """An export without additions gives empty columns and no warning."""
    nothing = np.zeros(0)

    found = variance.fit(
        nothing, nothing, nothing, nothing, variance.Floor(nothing, nothing), "proportional", Segments.of_sizes([])
    )

    assert len(found.weights) == len(found.lines.slope) == 0
