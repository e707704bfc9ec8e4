"""Which solutions belong together: samples, analytes, channels, attempts, run order."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules.method import Bench, Measure, Stock


def run(marks, sample="RIV-17", **more):
    """One row for each mark: ``u`` unspiked, a digit for an addition of so many mg/L."""
    return [
        {"sample": sample, "role": "unspiked", "signal": 0.2 + 0.001 * i, **more}
        if mark == "u"
        else {"sample": sample, "role": "spiked", "added": float(mark), "signal": 0.2 + 0.1 * int(mark), **more}
        for i, mark in enumerate(marks)
    ]


def attempts(out):
    """For each series its attempt and its number of solutions."""
    return list(zip(out.case.series.attempt.tolist(), out.case.series.segments.sizes.tolist(), strict=True))


@pytest.mark.parametrize(
    ("marks", "expected"),
    [
        ("u123", [(1, 4)]),
        ("123u", [(1, 4)]),
        ("u1u", [(1, 3)]),  # an unspiked solution at the end is followed by no addition
        ("uu12", [(1, 4)]),
        ("u11", [(1, 3)]),  # a repeated level is a further preparation
        ("u12u12", [(1, 3), (2, 3)]),
        ("u12uu12", [(1, 3), (2, 4)]),
        ("u1u1u1", [(1, 2), (2, 2), (3, 2)]),
        ("12u12", [(1, 5)]),  # no unspiked solution before: the attempt was not complete
        ("u12u12u", [(1, 3), (2, 4)]),
    ],
)
def test_attempts_open_at_an_unspiked_solution_between_additions(outcomes, marks, expected):
    """A new attempt opens at an unspiked solution after the additions of a complete one, if an addition follows."""
    assert attempts(outcomes(run(marks))) == expected


def test_attempts_are_judged_each_for_itself(outcomes):
    """Both attempts stay on record, each with its own line."""
    first, second = run("u123"), run("u123")
    for row in second:
        row["signal"] *= 2

    out = outcomes(first + second)

    slopes = out.case.fits.spread(out.case.fits.lines.slope)
    assert slopes[1] == pytest.approx(2 * slopes[0])


def test_same_series_keeps_repeats_together(outcomes):
    """With repeats: same series everything measured of a sample is one series."""
    assert attempts(outcomes(run("u12u12"), repeats="same series")) == [(1, 6)]


def test_refused_repeats_fail_the_inputs(outcomes):
    """With repeats: refuse a sample measured again fails and says so."""
    out = outcomes(run("u12u12") + run("u12", sample="SED-12"), repeats="refuse")

    assert attempts(out) == [(1, 6), (1, 3)]
    assert out.reasons(0)[0] == "the sample was measured again, and the settings say repeats: refuse"
    assert "inputs" not in out.failed_checks(1)


def test_vessels_without_the_analyte_open_no_attempt_and_hide_none(outcomes):
    """A vessel spiked with another analyte's stock stands between addition and unspiked solution unnoticed."""
    rows = [
        {"sample": "RIV-17", "role": role, "signal": signal, "analyte": "Zn"} | ({"stock": stock} if stock else {})
        for role, signal, stock in [
            ("unspiked", 0.20, None),
            ("spiked", 0.40, "ZN-5"),
            ("spiked", 0.20, "PB-5"),
            ("unspiked", 0.21, None),
            ("spiked", 0.41, "ZN-5"),
            ("spiked", 0.20, "PB-5"),
        ]
    ]
    for row in rows:
        if row["role"] == "spiked":
            row["spike_volume"] = 1.0
    stocks = (Stock("ZN-5", {"Zn": Measure(5, "mg/L")}), Stock("PB-5", {"Pb": Measure(5, "mg/L")}))

    out = outcomes(rows, bench=Bench(aliquot=Measure(10, "mL")), stocks=stocks)

    assert attempts(out) == [(1, 3), (2, 3)]
    assert out.case.fits.lines.n.tolist() == [2, 2]


def test_replicate_rows_are_one_solution_of_an_attempt(outcomes):
    """Replicate rows of one vessel neither open an attempt nor count as preparations."""
    rows = []
    for row in run("u12u12"):
        rows += [row | {"label": f"vial {len(rows) // 3}", "replicate": float(r)} for r in (1, 2, 3)]

    out = outcomes(rows)

    assert attempts(out) == [(1, 3), (2, 3)]
    assert out.case.fits.lines.n.tolist() == [3, 3]


def test_samples_analytes_and_channels_make_series_of_their_own(outcomes):
    """Nothing is merged over samples, analytes or channels; series stand in the order of the run."""
    rows = run("u12", sample="SED-12") + run("u12", analyte="Pb") + run("u12", channel="213.9") + run("u12")

    out = outcomes(rows)

    assert [out.case.name(i) for i in range(len(out.case))] == [
        "SED-12 Zn",
        "RIV-17 Pb",
        "RIV-17 Zn 213.9",
        "RIV-17 Zn",
    ]


def test_blanks_and_standards_belong_to_no_series(outcomes, make_standards, make_blanks):
    """What recurs by nature forms no series and no attempt."""
    rows = make_blanks([0.01]) + run("u12") + make_standards([0, 1, 2], [0, 0.1, 0.21]) + make_blanks([0.01])

    assert attempts(outcomes(rows, blank="none")) == [(1, 3)]


@pytest.mark.parametrize("key", ["measured_at", "position"])
def test_run_order_follows_time_else_position(outcomes, key):
    """Rows written in another order than measured are sorted into their attempts by time, else by position."""
    rows = [row | {key: float(i)} for i, row in enumerate(run("u12u12"))]
    shuffled = [rows[i] for i in (5, 2, 0, 4, 1, 3)]

    out = outcomes(shuffled)

    assert attempts(out) == [(1, 3), (2, 3)]


def test_time_goes_before_position_and_gaps_count_as_absent(outcomes):
    """Times decide over positions; a single missing time leaves positions to decide."""
    rows = [
        row | {"measured_at": float(i), "position": float(p)}
        for i, (row, p) in enumerate(zip(run("u12u12"), (6, 2, 3, 1, 4, 5), strict=True))
    ]

    by_time = outcomes(rows)
    rows[0]["measured_at"] = float("nan")
    by_position = outcomes(rows)

    assert attempts(by_time) == [(1, 3), (2, 3)]
    assert attempts(by_position) == [(1, 6)]


@settings(max_examples=60, deadline=None)
@given(order=st.permutations(range(8)), key=st.sampled_from(["measured_at", "position"]))
def test_order_of_rows_is_irrelevant_where_the_run_is_known(outcomes, order, key):
    """However rows are written, results, verdicts and attempts are the same bit by bit or to rounding."""
    rows = [row | {key: float(i), "label": f"vial {i}"} for i, row in enumerate(run("u123u124"))]

    plain, shuffled = outcomes(rows), outcomes([rows[i] for i in order])

    assert attempts(shuffled) == attempts(plain)
    assert shuffled.verdict.tolist() == plain.verdict.tolist()
    for name in ("value", "low", "high", "expanded_uncertainty"):
        a, b = getattr(plain.case.additions, name), getattr(shuffled.case.additions, name)
        assert b.tolist() == pytest.approx(a.tolist(), rel=1e-12, nan_ok=True)


@settings(max_examples=60, deadline=None)
@given(order=st.permutations(range(5)))
def test_order_of_additions_within_an_attempt_is_irrelevant(outcomes, order):
    """Without times, the additions of one attempt may be measured in any order after the unspiked solutions."""
    rows = [*run("uu"), *run("12345")]
    natives, spiked = rows[:2], rows[2:]
    for i, row in enumerate(spiked):
        row["signal"] += 0.003 * (-1) ** i

    plain, other = outcomes(rows), outcomes(natives + [spiked[i] for i in order])

    assert attempts(other) == [(1, 7)]
    assert other.case.additions.value[0] == pytest.approx(plain.case.additions.value[0], rel=1e-11)
    assert other.case.additions.high[0] == pytest.approx(plain.case.additions.high[0], rel=1e-10)


def test_an_export_without_rows_has_no_series(outcomes):
    """No rows give no series and no error."""
    assert len(outcomes([]).case) == 0
