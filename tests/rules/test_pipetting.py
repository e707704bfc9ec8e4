"""Pipetting plans: solutions that fit the bench and say the most, against simulation and brute force."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from rules.method import Pipette
from rules.pipetting import MOST_UNBOUNDED, Need, PipettingPlan, make_plan, plain, sentence


def need(**facts: Any) -> Need:
    """A sample of 2 mg/L, 10 mL of it in 50 mL, proved to 3 mg/L in the vessel."""
    usual: dict[str, Any] = {
        "native": 2.0,
        "linear_to": 3.0,
        "aliquot": 10.0,
        "made_up_to": 50.0,
        "stock": 50.0,
        "scatter": 0.05,
    }
    return Need(**usual | facts)


def made(wanted: Need) -> PipettingPlan:
    """The plan, which must be there."""
    plan = make_plan(wanted)
    assert plan is not None
    return plan


def simulated(plan: PipettingPlan, trials: int = 200_000) -> tuple[float, float]:
    """Relative scatter of C, and share of trials whose slope is not told from zero, by simulated measurements.

    The line is fitted by numpy's polyfit, which shares nothing with the program.
    """
    a, c = np.array(plan.additions), plan.native
    sd = plan.need.scatter * (c + a) if plan.need.proportional else np.full(len(a), plan.need.scatter)
    y = c + a[:, None] + np.random.default_rng(2026).normal(size=(len(a), trials)) * sd[:, None]
    slope, intercept = np.polyfit(a, y, 1, w=1 / sd)
    left = ((y - intercept - np.outer(a, slope)) / sd[:, None]) ** 2
    dof = len(a) - 2
    weights = 1 / sd**2
    mean = (weights * a).sum() / weights.sum()
    spread = (weights * (a - mean) ** 2).sum()
    told = np.abs(slope) / np.sqrt(left.sum(axis=0) / dof / spread) > stats.t.ppf(0.975, dof)
    return float(np.std(intercept / slope) / c), float(1 - told.mean())


@pytest.mark.parametrize("facts", [{}, {"scatter": 0.02, "proportional": True}, {"vials": 8, "native": 0.5}])
def test_the_promised_uncertainty_is_that_of_simulated_measurements(facts: dict[str, Any]) -> None:
    """u_C/C of a plan agrees with two hundred thousand simulated ones within the linearisation's 3 %."""
    plan = made(need(**facts))

    assert plan.relative_uncertainty == pytest.approx(simulated(plan)[0], rel=0.03)


def test_the_risk_of_an_unbounded_interval_is_that_of_simulated_measurements() -> None:
    """Where the scatter is large, the chance of learning nothing agrees with simulation, and the plan is refused."""
    plan = PipettingPlan(need(scatter=1.0), 1.0, (0.0, 0.0, 0.4, 0.8, 0.8))

    assert plan.unbounded == pytest.approx(simulated(plan)[1], abs=0.005)
    assert plan.unbounded > MOST_UNBOUNDED
    assert make_plan(need(scatter=1.0)) is None


def test_constant_scatter_shares_vials_as_the_rule_says() -> None:
    """Unspiked and top vials stand in the ratio (T + C) : C, as far as whole vials can (method of two clusters)."""
    plan = made(need(vials=13))

    c, top = plan.native, max(plan.additions)
    unspiked = plan.volumes.count(0.0)
    assert unspiked == pytest.approx(12 * (top + c) / (top + 2 * c), abs=1.01)


def test_proportional_scatter_shares_vials_evenly() -> None:
    """Where the scatter goes with the signal, as many vials are unspiked as have the top addition."""
    plan = made(need(vials=13, proportional=True, scatter=0.02))

    assert plan.volumes.count(0.0) == pytest.approx(6, abs=1.01)


def test_a_strong_sample_is_diluted_first() -> None:
    """A native level near the end of the proved range leaves no room, so the sample is diluted as little as needed."""
    plan = made(need(native=12.0))

    assert plan.predilution > 1
    assert plan.top_in_vessel <= 3.0 + 1e-9
    assert max(plan.additions) >= 2 * plan.native * 0.9


PIPETTES = (Pipette(0.1, 1.0, 0.01), Pipette(1.0, 10.0, 0.1))


@given(
    native=st.floats(0.01, 50),
    linear_to=st.one_of(st.just(math.nan), st.floats(0.1, 20)),
    stock=st.floats(1, 1000),
    scatter=st.floats(0.001, 0.2),
    made_up_to=st.sampled_from([None, 50.0, 25.0]),
    pipettes=st.sampled_from([(), PIPETTES]),
)
def test_every_plan_can_be_carried_out(native: float, linear_to: float, stock: float, scatter: float,
                                       made_up_to: float | None, pipettes: tuple[Pipette, ...]) -> None:  # fmt: skip
    """Whatever the need, volumes can be set and fit, the top stays in the proved range, and the risk is small."""
    wanted = need(native=native, linear_to=linear_to, stock=stock, scatter=scatter * native, made_up_to=made_up_to,
                  pipettes=pipettes)  # fmt: skip

    plan = make_plan(wanted)

    if plan is None:
        return
    assert len(plan.volumes) == wanted.vials
    assert len(set(plan.volumes)) == 3
    assert max(plan.volumes) <= wanted.room * (1 + 1e-9)
    assert math.isnan(linear_to) or plan.top_in_vessel <= linear_to * (1 + 1e-6)
    assert plan.unbounded <= MOST_UNBOUNDED
    for volume in filter(None, plan.volumes):
        settable = [p for p in pipettes if p.least - 1e-9 <= volume <= p.most + 1e-9]
        steps = [(volume - p.least) / p.step for p in settable]
        assert not pipettes or any(abs(step - round(step)) < 1e-6 for step in steps)


def test_no_plan_without_what_it_needs() -> None:
    """No native level, no stock, or a stock too strong for any pipette: then nothing is proposed."""
    assert make_plan(need(native=0.0)) is None
    assert make_plan(need(stock=0.0)) is None
    assert make_plan(need(stock=1e6, pipettes=PIPETTES)) is None


def test_a_plan_says_what_to_do() -> None:
    """Dilution, vials, volumes and what comes of it stand in one text, the same as in the record."""
    plan = made(need(native=12.0))

    text, record = sentence(plan, "mg/L"), plain(plan, "mg/L")

    assert text.startswith(f"Dilute the sample 1 in {plan.predilution:g} first. Prepare ")
    assert record["sentence"] == text
    assert sum(one["vials"] for one in record["solutions"]) == len(plan.volumes)
    for one in record["solutions"]:
        added = one["spike_volume"]["value"] * 50.0 / 10.0
        assert one["added_to_aliquot"] == pytest.approx(added)
