"""Internal standards: every reading is divided by its reference before anything is averaged."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.method import Bench, Measure

ADDED = [0.0, 1.0, 2.0, 3.0]


def rows(sensitivity, native=2.0, scatter=(0.002, -0.003, -0.001, 0.002), **more):
    """Additions whose signal and reference both follow the sensitivity of the moment."""
    return [
        {
            "sample": "BRN-3",
            "role": "spiked" if a else "unspiked",
            "signal": s * (0.1 * (native + a) + e),
            "reference_signal": s * 50.0,
            **({"added": a} if a else {}),
            **more,
        }
        for a, s, e in zip(ADDED, sensitivity, scatter, strict=True)
    ]


def test_a_drift_that_the_reference_sees_cancels(outcomes):
    """Signals that fall by 30 % during the run give the same result as steady ones."""
    steady, drifting = outcomes(rows([1.0] * 4)), outcomes(rows([1.0, 0.9, 0.8, 0.7]))

    for part in ("value", "low", "high"):
        assert getattr(drifting.reported(0), part)[0] == pytest.approx(getattr(steady.reported(0), part)[0])


@given(scale=st.floats(1e-3, 1e3))
def test_the_unit_of_the_reference_does_not_matter(outcomes, scale):
    """Scaling every reference signal leaves the result."""
    plain = rows([1.0, 1.1, 0.9, 1.0])
    scaled = [row | {"reference_signal": scale * row["reference_signal"]} for row in plain]

    assert outcomes(scaled).reported(0).value[0] == pytest.approx(outcomes(plain).reported(0).value[0], rel=1e-9)


@given(scale=st.floats(1e-3, 1e3))
def test_the_unit_of_the_reference_does_not_matter_to_a_calibration(outcomes, make_standards, scale):
    """Scaling every reference signal, the standards' included, leaves the calibration's result and U."""
    sample = rows([1.0, 1.1, 0.9, 1.0])
    standards = make_standards([0, 5, 10], [0.01, 0.5, 1.02], reference_signal=50.0)

    plain, scaled = (
        outcomes(
            [row | {"reference_signal": k * row["reference_signal"]} for row in [*standards, *sample]],
            report="calibration",
        ).reported(0)
        for k in (1.0, scale)
    )

    assert scaled.value[0] == pytest.approx(plain.value[0], rel=1e-9)
    assert scaled.expanded_uncertainty[0] == pytest.approx(plain.expanded_uncertainty[0], rel=1e-9)


def test_each_reading_is_divided_before_averaging(outcomes):
    """Two replicate rows with their own references give the mean of ratios, not the ratio of means."""
    pairs = [(4.0, 2.0), (9.0, 3.0)]
    given_rows = [
        {
            "sample": "BRN-3",
            "role": "unspiked",
            "label": "V1",
            "replicate": float(k),
            "signal": s,
            "reference_signal": r,
        }
        for k, (s, r) in enumerate(pairs, 1)
    ]

    solutions = outcomes(given_rows).case.solutions

    assert solutions.signal.tolist() == [2.5]


BENCH = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(20, "mL"))


@pytest.mark.parametrize(("reference", "native"), [("per vessel", 4.0), ("diluted with the sample", 4.0)])
def test_how_the_reference_came_in_decides_on_the_dilution(outcomes, reference, native):
    """A reference in every vessel leaves f in the signal; one diluted with the sample takes it out: 4 mg/L.

    Signals are made from the model: aliquot 10 mL made up to 20 mL (f = 1/2), additions c in the vessel.
    """
    f, c_sample, beta = 0.5, 4.0, 0.1
    given_rows = []
    for c in ADDED:
        analyte = beta * (f * c_sample + c)
        held = 50.0 if reference == "per vessel" else 50.0 * f
        role = "spiked" if c else "unspiked"
        given_rows.append(
            {
                "sample": "BRN-3",
                "role": role,
                "signal": analyte,
                "reference_signal": held,
                **({"added": c} if c else {}),
            }
        )

    out = outcomes(given_rows, bench=BENCH, added_refers_to="vessel", reference=reference)

    assert out.case.faults == {}
    assert out.case.additions.value[0] == pytest.approx(native)
    assert out.case.vessels.fraction[0] == pytest.approx(f)


def test_a_reference_in_diluted_vessels_must_be_declared(outcomes):
    """Where aliquot and vessel differ nothing is assumed about the internal standard."""
    out = outcomes(rows([1.0] * 4), bench=BENCH, added_refers_to="vessel")

    assert out.case.faults[0][0] == (
        "line 2: aliquot and vessel differ in volume, and nothing says whether the internal standard was added to each "
        "vessel or diluted with the sample: state reference: per vessel, or diluted with the sample"
    )


@pytest.mark.parametrize(("bad", "said"), [(np.nan, "nothing"), (0.0, "0"), (-3.0, "-3")])
def test_a_missing_or_impossible_reference_is_a_fault(outcomes, bad, said):
    """A reading whose reference is missing, zero or below fails its series, with its line."""
    given_rows = rows([1.0] * 4)
    given_rows[1]["reference_signal"] = bad

    out = outcomes(given_rows)

    assert out.case.faults[0][0] == (
        f"line 3: expected the signal of the internal standard above 0, got {said}: the other readings of Zn have one; "
        f"correct the export or measure it again"
    )
    assert out.verdict_of(0).word == "fail"


def test_standards_are_divided_too(outcomes, make_standards):
    """Calibration and sample share the internal standard: a reference twice as high everywhere changes nothing."""
    standards = [
        row | {"reference_signal": 50.0 * k}
        for k, row in zip((1.0, 2.0, 1.5), make_standards([0, 5, 10], [0.0, 1.0, 1.5]), strict=True)
    ]

    out = outcomes([*standards, *rows([1.0] * 4)], report="calibration")

    b, a = np.polyfit([0, 5, 10], [0.0, 0.5 / 50, 1.0 / 50], 1)
    assert out.reported(0).value[0] == pytest.approx((0.202 / 50 - a) / b)
