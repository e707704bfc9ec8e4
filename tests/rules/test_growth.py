"""Standard on top of the aliquot: the vessel grows, and the calibration's intercept must not look like recovery."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.method import Bench, Measure, Stock

ON_TOP = Bench(aliquot=Measure(10, "mL"))
ZN = (Stock("ZN-500", {"Zn": Measure(500, "mg/L")}),)
VOLUMES = (0.0, 0.1, 0.2, 0.3, 0.5)


def grown(a, b, native=4.0, blank=0.0):
    """Signals of a matrix-free sample: a + b (f C + c) with f = 10/(10 + v), as the calibration reads it."""
    rows = []
    for v in VOLUMES:
        f, c = 10 / (10 + v), 500 * v / (10 + v)
        rows.append(
            {
                "sample": "ROOF-7",
                "role": "spiked" if v else "unspiked",
                "signal": a + b * (f * native + c) + blank,
                **({"spike_volume": v} if v else {}),
            }
        )
    return rows


@given(a=st.floats(-0.2, 0.5), b=st.floats(0.05, 5), native=st.floats(0, 20))
def test_a_sample_without_matrix_recovers_exactly_all(outcomes, make_standards, a, b, native):
    """Whatever the intercept of the calibration, slope recovery and every R_j are 100 %."""
    standards = make_standards([0, 10, 30], [a, a + 10 * b, a + 30 * b])

    out = outcomes(standards + grown(a, b, native), bench=ON_TOP, stocks=ZN, blank="none")

    assert out.case.faults == {}
    assert out.case.recoveries.slope[0] == pytest.approx(100, rel=1e-7)
    assert out.case.recoveries.each[1:] == pytest.approx(np.full(4, 100.0), rel=1e-7)


def test_a_subtracted_blank_does_not_enter_the_ratio(outcomes, make_standards, make_blanks):
    """With blanks subtracted the slope recovery is the same for any blank, since the calibration holds it as well."""
    found = []
    for blank in (0.05, 0.3):
        standards = make_standards([0, 10, 30], [0.1, 1.1, 3.1])
        rows = standards + grown(0.1, 0.1) + make_blanks([blank, blank + 0.002])
        found.append(outcomes(rows, bench=ON_TOP, stocks=ZN, blank="subtract").case.recoveries.slope[0])

    assert found == pytest.approx([100, 100], rel=1e-9)


def test_a_constant_vessel_takes_no_share_of_the_intercept(outcomes, make_standards):
    """Made up to one volume the slope recovery is β/b and nothing else (numpy.polyfit)."""
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))
    volumes, signals = [0.0, 1.0, 2.0, 3.0], [0.3, 1.31, 2.29, 3.3]
    rows = [
        {"sample": "R", "role": "spiked" if v else "unspiked", "signal": s, **({"spike_volume": v} if v else {})}
        for v, s in zip(volumes, signals, strict=True)
    ]

    out = outcomes(make_standards([0, 10, 30], [0.2, 1.21, 3.2]) + rows, bench=bench, stocks=ZN, blank="none")

    beta = np.polyfit([500 * v / 50 for v in volumes], signals, 1)[0]
    b = np.polyfit([0, 10, 30], [0.2, 1.21, 3.2], 1)[0]
    assert out.case.recoveries.slope[0] == pytest.approx(100 * beta / b)
