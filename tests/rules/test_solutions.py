"""Rows become solutions: means of readings, replicate rows, stated scatter, faults."""

from __future__ import annotations

import numpy as np
import pytest

from rules.solutions import gather

SAMPLE = {"sample": "SED-12", "role": "unspiked"}


def test_readings_of_a_row_are_averaged(make_readings):
    """Mean, SD with n - 1 and number of the readings of one row."""
    found = gather(make_readings([SAMPLE | {"signal": [1.0, 2.0, 6.0]}]))

    assert found.signal.tolist() == [3.0]
    assert found.signal_sd[0] == pytest.approx(np.std([1, 2, 6], ddof=1))
    assert found.readings.tolist() == [3.0]


def test_rows_with_fewer_readings_use_what_they_have(make_readings):
    """A row of two readings in an export of three has the mean of two; one reading has no scatter."""
    found = gather(make_readings([SAMPLE | {"signal": s} for s in ([1.0, 2.0, 3.0], [4.0, 6.0], [5.0])]))

    assert found.signal.tolist() == [2.0, 5.0, 5.0]
    assert found.readings.tolist() == [3.0, 2.0, 1.0]
    assert np.isnan(found.signal_sd[2])


def test_replicate_rows_of_one_label_are_one_solution(make_readings):
    """Rows numbered 1, 2, 3 are one vessel; the number starting again begins the next."""
    rows = [
        SAMPLE | {"label": "SED-12", "signal": y, "replicate": r}
        for y, r in zip((1.0, 2.0, 3.0, 7.0, 9.0), (1, 2, 3, 1, 2), strict=True)
    ]

    found = gather(make_readings(rows))

    assert found.signal.tolist() == [2.0, 8.0]
    assert found.readings.tolist() == [3.0, 2.0]
    assert [found.rows_of(i).tolist() for i in range(2)] == [[0, 1, 2], [3, 4]]


def test_replicates_written_analyte_by_analyte_or_pass_by_pass_are_the_same(make_readings):
    """Interleaved replicate rows of two analytes and two labels are gathered as if they stood together."""
    rows = [
        {"sample": label, "label": label, "role": "unspiked", "analyte": analyte, "replicate": r, "signal": 10 * r + k}
        for r in (1, 2)
        for k, (label, analyte) in enumerate([("SED-12", "Zn"), ("SED-12", "Pb"), ("BRN-3", "Zn"), ("BRN-3", "Pb")])
    ]

    found = gather(make_readings(rows))

    assert found.signal.tolist() == [15.0, 16.0, 17.0, 18.0]
    assert found.readings.tolist() == [2.0] * 4


def test_rows_without_replicate_number_stay_apart(make_readings):
    """The same label measured twice without replicate number is two solutions."""
    found = gather(make_readings([SAMPLE | {"label": "SED-12", "signal": y} for y in (1.0, 2.0)]))

    assert len(found) == 2


@pytest.mark.parametrize(
    ("stated", "sd"),
    [({"signal_sd": 0.3}, 0.3), ({"signal_rsd": 5.0}, 0.2), ({"signal_sd": 0.3, "signal_rsd": 9.0}, 0.3)],
)
def test_stated_scatter_is_used_where_only_a_mean_is_given(make_readings, stated, sd):
    """SD as stated, else the RSD of the mean; the number of readings as stated."""
    found = gather(make_readings([SAMPLE | {"signal": 4.0, "readings": 5.0} | stated]))

    assert found.signal_sd[0] == pytest.approx(sd)
    assert found.readings.tolist() == [5.0]


def test_readings_themselves_go_before_stated_scatter(make_readings):
    """Where the readings are there, a stated SD does not replace theirs."""
    found = gather(make_readings([SAMPLE | {"signal": [1.0, 3.0], "signal_sd": 9.0}]))

    assert found.signal_sd[0] == pytest.approx(np.sqrt(2))


def test_a_solution_without_any_reading_is_kept(make_readings):
    """A row whose readings are all missing stays, with NaN."""
    found = gather(make_readings([SAMPLE | {"signal": np.nan}, SAMPLE | {"signal": 2.0}]))

    assert np.isnan(found.signal[0])
    assert found.signal[1] == 2.0


def test_faults_of_every_replicate_reach_the_solution(make_readings):
    """A fault in the second replicate row belongs to the whole vessel."""
    rows = [SAMPLE | {"label": "SED-12", "signal": 1.0, "replicate": r} for r in (1.0, 2.0)]
    rows[1]["fault"] = "expected a number, got 'OVR'"

    found = gather(make_readings(rows))

    assert found.faults == {0: ["line 3, column 'Reading': expected a number, got 'OVR'"]}


def test_solutions_stand_in_run_order(make_readings):
    """Rows are sorted by the time they were measured."""
    rows = [SAMPLE | {"signal": float(t), "measured_at": float(t)} for t in (30, 10, 20)]

    assert gather(make_readings(rows)).signal.tolist() == [10.0, 20.0, 30.0]


def test_replicates_numbered_downwards_are_one_solution(make_readings):
    """A number that comes again opens a further solution; falling numbers alone do not."""
    rows = [
        {"sample": "SED-12", "label": "SED-12", "role": "unspiked", "signal": 0.1 * n, "replicate": n}
        for n in (3, 2, 1, 3, 2, 1)
    ]

    found = gather(make_readings(rows))

    assert found.segments.sizes.tolist() == [3, 3]


def test_replicate_rows_that_disagree_are_a_fault(make_readings):
    """Two rows of one solution with different spike volumes cannot both be right."""
    rows = [
        {"sample": "SED-12", "label": "SED-12", "role": "spiked", "signal": 0.2, "replicate": n, "spike_volume": v}
        for n, v in ((1, 5.0), (2, 10.0))
    ]

    found = gather(make_readings(rows))

    assert found.faults == {0: ["line 2: its replicate rows disagree on spike_volume: correct the export"]}
