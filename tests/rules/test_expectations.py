"""What a batch is expected to hold, and brackets that nothing closes yet: incomplete, with what to do."""

from __future__ import annotations

import pytest

from rules.method import Measure, Stock
from rules.outcomes import Verdict
from rules.plan import next_step

NOMINAL, READ = [0, 5, 10], [0.021, 0.519, 1.02]
ZN = (Stock("ZN-5", {"Zn": Measure(5, "mg/L")}),)


def ordinary(number):
    """A sample without additions."""
    return {"sample": f"SED-{number}", "role": "unspiked", "signal": 0.3}


def checked(signal=0.52, **more):
    """A check standard of 5 mg/L."""
    return {"role": "check_standard", "label": "QC 5", "nominal": 5, "signal": signal, **more}


def of_sample(out, name):
    """The series of a sample."""
    return next(i for i in range(len(out.case)) if out.case.sample(i) == name)


def test_a_batch_with_too_few_spiked_samples_is_incomplete(outcomes, make_additions, make_standards):
    """One per twenty expected and one of twenty-one found: every sample of the analyte waits for another spike."""
    additions = make_additions([0.22, 0.421, 0.619, 0.82], [0, 2, 4, 6.0])
    rows = make_standards(NOMINAL, READ) + additions + [ordinary(n) for n in range(20)]

    out = outcomes(rows, expected_spiked=(1, 20), stocks=ZN)
    enough = outcomes(rows[:-1], expected_spiked=(1, 20), stocks=ZN)

    assert {out.verdict_of(i) for i in range(21)} == {Verdict.INCOMPLETE}
    assert out.reasons(5) == ["1 of 21 samples are spiked with Zn, and the laboratory expects 1 per 20 (expect.spiked)"]
    assert next_step(out, 5) == (
        "Spike as many further samples of this batch as the laboratory expects, and measure them."
    )
    assert {enough.verdict_of(i) for i in range(20)} == {Verdict.PASS, Verdict.NOT_SPIKED}


def test_an_analyte_that_no_stock_holds_needs_no_spikes(outcomes, make_standards):
    """What cannot be spiked is not expected."""
    rows = make_standards(NOMINAL, READ, analyte="Pb") + [ordinary(n) | {"analyte": "Pb"} for n in range(3)]

    out = outcomes(rows, expected_spiked=(1, 20), stocks=ZN)

    assert {out.verdict_of(i) for i in range(3)} == {Verdict.NOT_SPIKED}


def test_fewer_additions_than_expected_are_incomplete(outcomes, make_additions):
    """Two of three additions leave the series incomplete until the third is measured."""
    out = outcomes(make_additions([0.22, 0.42, 0.62], [0, 2, 4.0]), expected_levels=3)

    assert out.verdict_of(0) is Verdict.INCOMPLETE
    assert out.reasons(0)[0] == "2 of the 3 additions that the laboratory expects (expect.levels)"
    assert next_step(out, 0) == "Measure the additions of RIV-17 that are still missing, and export again."


def test_what_was_measured_since_the_last_check_standard_waits_for_the_next(outcomes, make_standards):
    """Samples between two check standards are judged; those after the last one are incomplete until one follows."""
    rows = [*make_standards(NOMINAL, READ), checked(), ordinary(1), checked(), ordinary(2)]

    open_, closed = outcomes(rows), outcomes([*rows, checked()])

    assert open_.verdict_of(of_sample(open_, "SED-1")) is Verdict.NOT_SPIKED
    last = of_sample(open_, "SED-2")
    assert open_.verdict_of(last) is Verdict.INCOMPLETE
    assert open_.reasons(last) == ["no check standard was measured after it, the last one is on line 7"]
    assert next_step(open_, last) == (
        "Measure a check standard now; until it holds, release nothing that was measured since the last one."
    )
    assert closed.verdict_of(last) is Verdict.NOT_SPIKED


def test_a_sample_hears_only_of_the_check_standards_of_its_bracket(outcomes, make_standards, check):
    """The check standards nearest before and after count, not those farther away."""
    rows = [*make_standards(NOMINAL, READ), checked(0.62), checked(), ordinary(1), checked(), ordinary(2), checked(0.7)]

    bracket = check(outcomes(rows), "bracket")

    assert [bracket.outcome[i].item() for i in (0, 1)] == [1, 3]


@pytest.mark.parametrize("key", ["measured_at", "position"])
def test_brackets_follow_the_order_of_the_run(outcomes, make_standards, check, key):
    """Times, else positions, say what was measured before and after; the order of the file does not."""
    rows = [*make_standards(NOMINAL, READ), checked(), ordinary(1), checked(0.7), ordinary(2), checked()]
    numbered = [row | {key: float(k)} for k, row in enumerate(rows)]

    shuffled = outcomes(numbered[::-1])

    bracket = check(shuffled, "bracket")
    assert [bracket.outcome[of_sample(shuffled, name)].item() for name in ("SED-1", "SED-2")] == [3, 3]
    first = outcomes([*numbered[:4], numbered[7] | {key: 4.5}, numbered[4]])
    assert check(first, "bracket").outcome[0] == 1


def test_the_time_of_measurement_goes_before_the_position(outcomes, make_standards):
    """Where positions and times disagree, the time says that the check standard was measured after the sample."""
    rows = [*make_standards(NOMINAL, READ), checked(), checked(), ordinary(1)]
    times, positions = [0.0, 1.0, 2.0, 3.0, 5.0, 4.0], range(6)
    numbered = [
        row | {"measured_at": t, "position": float(p)} for row, t, p in zip(rows, times, positions, strict=True)
    ]

    timed = outcomes(numbered)
    placed = outcomes([{k: v for k, v in row.items() if k != "measured_at"} for row in numbered])

    assert timed.verdict_of(0) is Verdict.NOT_SPIKED
    assert placed.verdict_of(0) is Verdict.INCOMPLETE


def test_a_bracket_may_be_switched_off(outcomes, make_standards):
    """Where the laboratory does not bracket, an open one is no matter."""
    from rules.limits import parse_check_limits  # noqa: PLC0415

    rows = [*make_standards(NOMINAL, READ), checked(), ordinary(1)]

    out = outcomes(rows, limits={"bracket": parse_check_limits("off")})

    assert out.verdict_of(0) is Verdict.NOT_SPIKED
    assert out.check("bracket").sentence(0) == "bracket: switched off in the settings"
