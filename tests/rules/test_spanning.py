"""Exports that lend each other what is missing: calibrations, closing check standards, the other runs of a sample."""

from __future__ import annotations

import numpy as np
import pytest

from rules.evaluate import evaluate
from rules.outcomes import Verdict
from rules.spanning import Other

HOUR = 3600.0
STANDARDS = [
    {"role": "standard", "label": f"STD {n}", "nominal": n, "signal": 0.02 + 0.1 * n + e}
    for n, e in ((0, 0.001), (5, -0.002), (10, 0.001))
]


def checked(signal=0.52):
    """A check standard of 5 mg/L."""
    return {"role": "check_standard", "label": "QC 5", "nominal": 5, "signal": signal}


def sample(signal, added=0.0, name="RIV-17"):
    """A run of a sample."""
    role = "spiked" if added else "unspiked"
    return {"sample": name, "role": role, "signal": signal, **({"added": added} if added else {})}


@pytest.fixture(scope="session")
def judged(make_readings, make_method):
    """Outcomes of the export at hour 0 beside others, given as (hour, rows)."""

    def made(rows, *others, pair=12.0, calibration=24.0, timed=True, **method):
        def readings(hour, some):
            stamped = [row | ({"measured_at": hour * HOUR + 60 * k} if timed else {}) for k, row in enumerate(some)]
            return make_readings(stamped)

        spans = {"pair_seconds": pair * HOUR, "calibration_seconds": calibration * HOUR}
        lending = tuple(
            Other(f"FL-{k}.csv", f"{k:064}", 1, hour * HOUR, readings(hour, some))
            for k, (hour, some) in enumerate(others)
        )
        return evaluate(readings(0.0, rows), make_method(**spans | method), 0.0, lambda: lending)

    return made


ADDITIONS = [sample(0.22), sample(0.421, 2.0), sample(0.619, 4.0), sample(0.82, 6.0)]


@pytest.mark.parametrize("timed", [True, False])
def test_the_last_valid_calibration_reads_the_sample_back(judged, outcomes, timed):
    """An export without standards gives the numbers that it gives with those of the morning in it."""
    alone = outcomes([*STANDARDS, checked(), *ADDITIONS, checked()], report="calibration")

    out = judged([*ADDITIONS, checked()], (-3.0, [*STANDARDS, checked()]), report="calibration", timed=timed)

    for part in ("value", "low", "high", "expanded_uncertainty"):
        assert getattr(out.reported(0), part)[0] == pytest.approx(getattr(alone.reported(0), part)[0])
    assert out.case.recoveries.slope[0] == pytest.approx(alone.case.recoveries.slope[0])
    assert [(loan.other.name, loan.purpose) for loan in out.loans] == [("FL-0.csv", "calibration of Zn")]
    assert out.case.series_lines(0) == [2, 3, 4, 5]


@pytest.mark.parametrize(
    ("others", "sentence"),
    [
        ([(-30.0, [*STANDARDS, checked()])], "no calibration in this export"),
        (
            [(-3.0, STANDARDS)],
            "no calibration: no check standard that holds was measured since the calibration of FL-0.csv",
        ),
        (
            [(-3.0, [*STANDARDS, checked(0.7)])],
            "no calibration: the check standard after the calibration of FL-0.csv does not hold",
        ),
        ([(-3.0, [*STANDARDS[:2], checked()])], "no calibration in this export"),
        ([(3.0, [*STANDARDS, checked()])], "no calibration in this export"),
    ],
    ids=["too old", "unchecked", "check fails", "too few standards", "measured later"],
)
def test_a_calibration_that_may_not_be_used_says_why(judged, others, sentence):
    """Too old, not checked since, or no calibration at all: there is no number, and the reason is said."""
    out = judged(ADDITIONS, *others, report="calibration")

    assert np.isnan(out.reported(0).value[0])
    assert out.text(0) == sentence


def test_a_check_standard_of_the_export_itself_backs_the_calibration(judged):
    """Where the morning ended with the standards, a check standard before the samples of the evening will do."""
    out = judged([checked(), *ADDITIONS, checked()], (-3.0, STANDARDS), report="calibration")

    assert out.reported(0).value[0] == pytest.approx(2.0, abs=0.05)


def test_the_instrument_must_be_the_same(judged):
    """A calibration of another instrument says nothing."""
    lent = [row | {"instrument": "bench 2"} for row in [*STANDARDS, checked()]]
    own = [row | {"instrument": "bench 1"} for row in ADDITIONS]

    assert judged(own, (-3.0, lent), report="calibration").loans == ()


def test_of_several_calibrations_the_last_is_used(judged):
    """The one nearest before the export goes first, whatever the order in which exports are named."""
    old = [row | {"signal": 2 * row["signal"]} for row in [*STANDARDS, checked()]]
    for others in ([(-9.0, old), (-3.0, [*STANDARDS, checked()])], [(-3.0, [*STANDARDS, checked()]), (-9.0, old)]):
        out = judged([*ADDITIONS, checked()], *others, report="calibration")

        assert out.reported(0).value[0] == pytest.approx(2.0, abs=0.05)


def test_a_later_export_closes_the_bracket(judged):
    """The next check standard closes the bracket; failing, it fails them; after a new calibration it does not."""
    rows = [*STANDARDS, checked(), *ADDITIONS]

    open_ = judged(rows)
    closed = judged(rows, (1.0, [checked(), sample(0.3, name="SED-12")]))
    failed = judged(rows, (1.0, [checked(0.7)]))
    again = judged(rows, (1.0, [*STANDARDS, checked()]))
    far = judged(rows, (20.0, [checked()]))

    assert [out.verdict_of(0) for out in (open_, closed, failed, again, far)] == [
        Verdict.INCOMPLETE,
        Verdict.PASS,
        Verdict.FAIL,
        Verdict.INCOMPLETE,
        Verdict.INCOMPLETE,
    ]
    assert (
        failed.check("bracket").sentence(0) == "check standard QC 5 of FL-0.csv of its bracket reads 136 % of nominal"
    )
    assert len(closed.case) == 1


@pytest.mark.parametrize("hour", [-2.0, 2.0], ids=["measured before", "measured after"])
def test_the_unspiked_run_may_lie_in_another_export(judged, outcomes, hour):
    """Additions without their unspiked run take it from the nearest export within the stated hours."""
    alone = outcomes(ADDITIONS)

    out = judged(ADDITIONS[1:], (hour, ADDITIONS[:1]))
    far = judged(ADDITIONS[1:], (10 * hour, ADDITIONS[:1]))

    assert out.reported(0).value[0] == pytest.approx(alone.reported(0).value[0])
    assert out.case.series_lines(0) == [2, 3, 4]
    assert far.verdict_of(0) is Verdict.INCOMPLETE
    assert len(out.case) == 1


def test_what_is_there_is_not_replaced(judged):
    """An export that lacks nothing takes nothing."""
    whole = [*STANDARDS, checked(), *ADDITIONS, checked()]

    out = judged(whole, (-1.0, whole), (1.0, whole))

    assert out.loans == ()


def test_exports_stand_alone_where_the_laboratory_says_nothing(judged):
    """Without hours nothing is lent."""
    out = judged(ADDITIONS[1:], (-1.0, [*STANDARDS, checked(), ADDITIONS[0]]), pair=0, calibration=0)

    assert out.loans == ()
    assert out.verdict_of(0) is Verdict.INCOMPLETE


def test_a_fault_of_a_lent_row_names_its_export(judged):
    """A cell that cannot be read fails the series that takes it, with the export that it stands in."""
    native = ADDITIONS[0] | {"fault": "expected a number, got 'x'"}

    out = judged(ADDITIONS[1:], (-1.0, [native]))

    assert out.case.faults[0][0] == "line 2, column 'Reading of FL-0.csv': expected a number, got 'x'"
