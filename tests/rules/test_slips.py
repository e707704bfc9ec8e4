"""One vessel that was pipetted wrongly is named, once for all analytes; nothing else is called a slip."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules import plan
from rules.outcomes import Verdict

ADDED = (0.0, 1.0, 2.0, 3.0)
#: Signal of 1 mg/L, and native level, of each analyte.
ANALYTES = {"Zn": (0.2, 2.0), "Cu": (0.5, 1.0), "Pb": (0.1, 1.5), "Cd": (0.8, 0.7)}
NOISE = (0.002, -0.003, 0.001, -0.001)


def rows(actual: tuple[float, ...] = ADDED, factors: tuple[float, ...] = (1, 1, 1, 1), only: Any = ANALYTES) -> Any:
    """Rows of four vessels, with what was really added to each, and a factor on all that is in it."""
    return [
        {
            "sample": "SED-12",
            "label": f"SED-12 +A{level}" if level else "SED-12",
            "analyte": analyte,
            "role": "spiked" if level else "unspiked",
            "signal": slope * (native + actual[level]) * factors[level] * (1 + NOISE[level]),
        }
        | ({"added": ADDED[level]} if level else {})
        for analyte, (slope, native) in ANALYTES.items()
        if analyte in only
        for level in range(4)
    ]


@pytest.fixture(scope="session")
def slips_of(outcomes: Any) -> Any:
    """Rows to the judged export and its slips."""

    def judge(listed: Any) -> Any:
        found = outcomes(listed, added_refers_to="aliquot")
        return found, found.slips

    return judge


@pytest.mark.parametrize(
    ("actual", "label", "words"),
    [
        ((0, 1, 0, 3), "SED-12 +A2", "reads as if nothing had been added to it"),
        ((0, 2, 2, 3), "SED-12 +A1", "reads as if its addition had been made twice"),
        ((0, 1, 2, 0), "SED-12 +A3", "reads as if nothing had been added to it"),
        ((0, 3, 2, 3), "SED-12 +A1", "reads as if it had the addition of 'SED-12 +A3'"),
    ],
)
def test_a_simple_slip_is_named_with_its_vessel(
    actual: tuple[float, ...], label: str, words: str, slips_of: Any
) -> None:
    """No addition, a double one, a neighbour's: the vessel is named, in a single analyte as well."""
    found, slips = slips_of(rows(actual, only=("Zn",)))

    assert found.verdict_of(0) is Verdict.FAIL
    assert (slips[0].label, slips[0].words) == (label, words)
    assert f"'{label}' {words}: prepare it again" in plan.next_step(found, 0)
    assert plan.solutions(found, 0) is None


def test_a_vessel_off_by_a_common_factor_is_one_slip_of_all_its_analytes(slips_of: Any) -> None:
    """A vessel made up wrongly reads the same factor too high in every analyte: one cause, one sentence."""
    found, slips = slips_of(rows(factors=(1, 1, 1.4, 1)))

    assert len(slips) == len(ANALYTES)
    assert len(set(slips.values())) == 1
    (slip,) = set(slips.values())
    assert slip.label == "SED-12 +A2"
    assert slip.factor == pytest.approx(1.4, rel=0.03)
    assert len({plan.next_step(found, i) for i in slips}) == 1


def test_a_factor_in_one_analyte_is_no_slip(slips_of: Any) -> None:
    """A solution that is off in one analyte alone may be an interference; no vessel is blamed."""
    listed = rows()
    listed[2]["signal"] *= 1.4

    found, slips = slips_of(listed)

    assert found.verdict_of(0) is Verdict.FAIL
    assert slips == {}


def test_a_response_that_bends_over_is_no_slip(slips_of: Any) -> None:
    """A top that saturates in every analyte looks like a vessel that is off, and is not called one."""
    listed = rows(factors=(1, 1, 1, 0.75))

    found, slips = slips_of(listed)

    assert {found.verdict_of(i) for i in range(len(found.case))} == {Verdict.FAIL}
    assert slips == {}


@given(noise=st.lists(st.floats(-0.02, 0.02), min_size=4, max_size=4), recovery=st.floats(0.5, 1.5))
def test_sound_vessels_have_no_slips(slips_of: Any, noise: list[float], recovery: float) -> None:
    """Whatever the scatter of a sound series and however poor its recovery, no vessel is blamed."""
    listed = [
        row | {"signal": row["signal"] * (1 + error) * recovery}
        for row, error in zip(rows(only=("Zn",)), noise, strict=True)
    ]

    assert slips_of(listed)[1] == {}


def test_a_slip_costs_nothing_where_all_passes(slips_of: Any) -> None:
    """Series that pass are not looked at."""
    found, slips = slips_of(rows())

    assert {found.verdict_of(i) for i in range(len(found.case))} <= {Verdict.PASS, Verdict.WARN}
    assert slips == {}
    assert np.isfinite(found.case.native).all()
