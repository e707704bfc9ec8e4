"""Samples of one export are evaluated at once and independently: the numbers of each are those it has alone."""

from __future__ import annotations

import numpy as np
import pytest

RESULT = ("value", "low", "high", "standard_uncertainty", "expanded_uncertainty", "coverage_factor", "dof")
RECOVERY = ("slope", "slope_u", "slope_dof", "levels")


def batch(make_standards, make_blanks):
    """What all samples share."""
    return [
        *make_standards([0, 2, 5, 10], [0.021, 0.219, 0.522, 1.018]),
        *make_blanks([0.019, 0.022, 0.021]),
        *make_standards([5], [0.52], role="check_standard"),
    ]


def samples(random, count):
    """Samples of 2 to 7 solutions with random natives, levels, dilutions and noise, each a list of rows."""
    made = []
    for i in range(count):
        native, slope, n = random.uniform(0, 4), random.uniform(0.07, 0.12), int(random.integers(2, 8))
        added = np.concatenate([[0.0], np.sort(random.uniform(0.5, 5, n - 1))])
        signals = (0.02 + slope * (native + added)) * (1 + random.normal(0, 0.02, n))
        predilution = float(random.choice([1, 2, 10]))
        made.append(
            [
                {"sample": f"SED-{i}", "role": "spiked" if a else "unspiked", "signal": float(s)}
                | {"predilution": predilution}
                | ({"added": float(a)} if a else {})
                for a, s in zip(added, signals, strict=True)
            ]
        )
    return made


def numbers(out, i):
    """Every number of a series: results, recoveries of the series and its additions, what the checks measured."""
    case, found = out.case, {}
    for name, results in (("additions", case.additions), ("calibration", case.back.results)):
        found |= {f"{name} {part}": getattr(results, part)[i] for part in RESULT}
    found |= {name: getattr(case.recoveries, name)[i] for name in RECOVERY}
    mine = np.flatnonzero(case.series.segments.owner == i)
    found |= {f"R {k}": case.recoveries.each[place] for k, place in enumerate(mine)}
    for check in out.checks:
        found |= {f"{check.name} value": check.value[i], f"{check.name} outcome": check.outcome[i]}
    return found


@pytest.mark.parametrize(
    ("count", "report", "variance"),
    [
        (60, "additions", "constant"),
        (60, "calibration", "proportional"),
        (60, "automatic", "constant"),
        pytest.param(10_000, "automatic", "proportional", marks=pytest.mark.proof),
    ],
)
def test_samples_at_once_are_samples_one_by_one(outcomes, make_standards, make_blanks, count, report, variance):
    """Random samples evaluated in one export and each in its own agree to 1e-12 in results, recoveries and checks."""
    shared, each = batch(make_standards, make_blanks), samples(np.random.default_rng(19), count)
    decisions = {"report": report, "variance": variance, "blank": "subtract"}

    together = outcomes([*shared, *(row for rows in each for row in rows)], **decisions)

    place = {together.case.sample(i): i for i in range(len(together.case))}
    apart = []
    for rows in each:
        one = numbers(outcomes([*shared, *rows], **decisions), 0)
        many = numbers(together, place[rows[0]["sample"]])
        assert one.keys() == many.keys()
        apart += [
            (rows[0]["sample"], name, one[name], many[name])
            for name in one
            if not np.isclose(one[name], many[name], rtol=1e-12, atol=1e-13, equal_nan=True)
        ]
    assert apart == []
    # a comparison of nothing with nothing would prove nothing
    assert np.isfinite([together.reported(i).value[i] for i in range(count)]).mean() > 0.95
