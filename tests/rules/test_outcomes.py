"""Verdicts, reasons, texts and next steps; whatever is broken, nothing passes that should not and nothing vanishes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules.checks import Outcome
from rules.limits import parse_check_limits
from rules.method import AnalyteRules, Bench, Measure, Stock
from rules.outcomes import _URGENCY, Verdict
from rules.plan import _STEPS, next_step

NOMINAL, READ = [0, 5, 10], [0.021, 0.519, 1.02]
SAMPLES = ("SED-12", "BRN-3", "ROOF-7")

CORRECT = (
    "Correct what is named: cells and labels in the instrument's program, levels, stocks and units in the settings; "
    "then export again. If a reading is lost, measure {} again."
)


@pytest.fixture(scope="session")
def batch(make_additions, make_standards, make_blanks):
    """Rows of a sound export: standards, a check standard, blanks, and three samples with three additions each."""

    def made():
        rows = make_standards(NOMINAL, READ)
        rows += make_standards([5], [0.52], role="check_standard")
        rows += make_blanks([0.020, 0.021])
        for k, sample in enumerate(SAMPLES):
            signals = [0.22 + 0.01 * k, 0.421 + 0.01 * k, 0.619 + 0.01 * k, 0.82 + 0.01 * k]
            rows += make_additions(signals, [0, 2, 4, 6.0], sample=sample)
        return rows + make_standards([5], [0.519], role="check_standard")

    return made


def by_name(out):
    """Series by name."""
    return {out.case.name(i): i for i in range(len(out.case))}


@pytest.mark.parametrize("report", ["additions", "calibration"])
def test_a_sound_batch_passes(outcomes, batch, report):
    """Everything in order passes by either result, with no reason and no next step."""
    out = outcomes(batch(), report=report, blank="none")

    assert [out.verdict_of(i) for i in range(3)] == [Verdict.PASS] * 3
    for i in range(3):
        assert out.reasons(i) == []
        assert out.failed_checks(i) == ()
        assert out.headline(i) == "pass"
        assert next_step(out, i) == ""


def test_spiked_without_unspiked_is_incomplete(outcomes, make_additions):
    """Additions whose unspiked solution is missing are incomplete, say so and say what to measure."""
    out = outcomes(make_additions([0.42, 0.62], [2, 4.0]))

    assert out.verdict_of(0) is Verdict.INCOMPLETE
    assert out.reasons(0) == ["the unspiked solution is missing"]
    assert out.failed_checks(0) == ("incomplete",)
    assert out.headline(0) == "the unspiked solution is missing"
    assert next_step(out, 0) == "Measure RIV-17 unspiked now, from the same aliquot and dilution as its additions."


def test_calibration_result_without_calibration_is_incomplete(outcomes, make_additions):
    """A series that is to be reported from a calibration the export lacks is incomplete."""
    out = outcomes(make_additions([0.22, 0.42, 0.62], [0, 2, 4.0]), report="calibration")

    assert out.verdict_of(0) is Verdict.INCOMPLETE
    assert out.reasons(0) == ["the settings report the calibration's result: no calibration in this export"]
    assert next_step(out, 0) == (
        "Measure the calibration standards for Zn and export them together with RIV-17, or state report: additions."
    )


def test_fail_goes_before_incomplete(outcomes, make_additions):
    """A series that fails and lacks something fails, with both reasons."""
    rows = make_additions([0.42, 0.62], [2, 4.0])
    rows[0]["fault"] = "expected a number, got 'x'"

    out = outcomes(rows)

    assert out.verdict_of(0) is Verdict.FAIL
    assert out.reasons(0) == [
        "line 2, column 'Reading': expected a number, got 'x'",
        "the unspiked solution is missing",
    ]


def test_an_ordinary_sample_is_not_spiked_and_read_from_the_calibration(outcomes, batch):
    """A sample without additions is reported from the calibration whatever the settings report, and is not judged."""
    *rows, last = batch()

    out = outcomes([*rows, {"sample": "RIV-17", "role": "unspiked", "signal": 0.32}, last], blank="none")

    i = by_name(out)["RIV-17 Zn"]
    assert out.verdict_of(i) is Verdict.NOT_SPIKED
    assert out.verdict_of(i).word == "not spiked"
    b, a = np.polyfit(NOMINAL, READ, 1)
    assert out.reported(i).value[i] == pytest.approx((0.32 - a) / b)


def test_an_ordinary_sample_is_judged_by_its_batch(outcomes, batch):
    """A check standard that does not hold fails ordinary samples too."""
    *rows, last = batch()
    rows[3]["signal"] = 0.70

    out = outcomes([*rows, {"sample": "RIV-17", "role": "unspiked", "signal": 0.32}, last], blank="none")

    i = by_name(out)["RIV-17 Zn"]
    assert out.failed_checks(i) == ("check_standard", "bracket")
    assert out.reasons(i) == ["check standard check_standard 5 reads 136 % of nominal: the calibration does not hold"]


def test_an_analyte_that_no_stock_contains_is_not_judged_for_recovery(outcomes, make_standards):
    """Pb in vessels spiked with a stock of Zn is not spiked: no recovery, no line, the native as read."""
    rows = []
    for analyte, signal in (("Zn", 0.72), ("Pb", 0.22)):
        rows += make_standards(NOMINAL, READ, analyte=analyte)
        rows += [
            {"sample": "SED-12", "role": "unspiked", "signal": 0.22, "analyte": analyte},
            {"sample": "SED-12", "role": "spiked", "signal": signal, "analyte": analyte, "spike_volume": 1.0},
        ]
    bench = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(10 + 1, "mL"))
    stocks = (Stock("ZN-50", {"Zn": Measure(55, "mg/L")}),)

    out = outcomes(rows, report="calibration", bench=bench, stocks=stocks)

    zinc, lead = by_name(out)["SED-12 Zn"], by_name(out)["SED-12 Pb"]
    assert out.verdict_of(lead) is Verdict.NOT_SPIKED
    assert np.isnan(out.check("recovery").value[lead])
    assert np.isfinite(out.reported(lead).value[lead])
    assert out.verdict_of(zinc) is not Verdict.NOT_SPIKED
    assert out.check("recovery").value[zinc] == pytest.approx(100, abs=1)


def test_a_single_addition_warns_and_carries_its_value(outcomes, make_additions):
    """One addition is reported with its value, warns of linearity, and the next step names levels."""
    out = outcomes(make_additions([0.2, 0.5], [0, 3.0]))

    assert out.verdict_of(0) is Verdict.WARN
    assert out.headline(0) == "levels 1.00 (limit at least 3)"
    assert next_step(out, 0) == ("Next time make three additions to RIV-17, near 1.0 / 2.0 / 3.0 mg/L in the aliquot.")


@pytest.mark.parametrize(
    ("change", "failed", "step"),
    [
        (
            {"signals": [0.22, 0.341, 0.459, 0.58]},
            "recovery",
            (
                "Keep the vials: check the spike volume, the stock and losses in preparation; then prepare SED-12 "
                "again with "
                "three additions and report the additions' result."
            ),
        ),
        (
            {"signals": [0.22, 0.521, 0.819, 1.12]},
            "recovery",
            (
                "Keep the vials: check the spike volume, the stock and contamination; then prepare SED-12 again with "
                "three "
                "additions and report the additions' result."
            ),
        ),
        (
            {"signals": [1.22, 1.421, 1.619, 1.82]},
            "linear_evidence",
            "Dilute SED-12 so that its highest solution stays in the linear range, and measure it again.",
        ),
        (
            {"verify": 0.70},
            "check_standard",
            "Calibrate again, then measure SED-12 and every sample since the last good check standard again.",
        ),
        (
            {"fault": "expected a number, got 'x'"},
            "inputs",
            CORRECT.format("SED-12"),
        ),
    ],
)
def test_next_step_follows_from_the_most_telling_failure(outcomes, batch, change, failed, step):
    """Each failure of a calibration result leads to its own advice."""
    rows = batch()
    first = next(i for i, row in enumerate(rows) if row.get("sample") == "SED-12")
    for i, signal in enumerate(change.get("signals", ())):
        rows[first + i]["signal"] = signal
    rows[3]["signal"] = change.get("verify", rows[3]["signal"])
    if "fault" in change:
        rows[first + 1]["fault"] = change["fault"]

    out = outcomes(rows, report="calibration", blank="none")

    i = by_name(out)["SED-12 Zn"]
    assert failed in out.failed_checks(i)
    assert next_step(out, i) == step


@pytest.mark.parametrize(
    ("signals", "added", "step"),
    [
        (
            [1.0, 1.101, 1.199, 1.3],
            [0, 1, 2, 3.0],
            (
                "Repeat the additions of RIV-17 with a top addition near 30 mg/L in the aliquot (it was 3.0), inside "
                "the "
                "linear range."
            ),
        ),
        (
            [0.020, 0.121, 0.219, 0.32],
            [0, 1, 2, 3.0],
            "Repeat the additions of RIV-17 with a top addition near 0.61 mg/L in the aliquot (it was 3.0).",
        ),
        (
            [0.200, 0.300, 0.381, 0.440, 0.482],
            [0, 1, 2, 3, 4.0],
            "Dilute RIV-17 or make smaller additions so that the response stays linear, and measure it again.",
        ),
        (
            [0.5, 0.4, 0.3],
            [0, 1, 2.0],
            (
                "Repeat the additions of RIV-17 with a top addition near 4.0 mg/L in the aliquot (it was 2.0), "
                "inside the "
                "linear range."
            ),
        ),
    ],
    ids=["too small", "too large", "bent", "falling"],
)
def test_next_step_of_an_additions_result(outcomes, make_additions, signals, added, step):
    """Sizes are computed from the native level: three times it, or twice the top where it is unknown."""
    out = outcomes(make_additions(signals, added))

    assert out.verdict_of(0) is Verdict.FAIL
    assert next_step(out, 0) == step


def test_additions_too_large_are_advised_by_their_own_native(outcomes, make_standards, make_additions):
    """A calibration that reads the native below zero does not make the advised addition negative."""
    rows = make_standards(NOMINAL, [0.2, 0.7, 1.21]) + make_additions([0.020, 0.121, 0.219, 0.32], [0, 1, 2, 3.0])

    out = outcomes(rows)

    assert "top addition near 0.61 mg/L" in next_step(out, 0)


def test_every_check_has_its_urgency_and_step(outcomes, make_additions):
    """No check can fail or warn without a place among headlines and a next step."""
    names = {check.name for check in outcomes(make_additions([0.2, 0.5], [0, 3.0])).checks}

    assert names == set(_URGENCY) == {name for name, _ in _STEPS}


def test_faulty_inputs_show_no_result(outcomes, make_additions):
    """A faulty series keeps its computed fit and shows no result."""
    rows = make_additions([0.2, 0.31, 0.39], [0, 1, 2.0])
    rows[1]["fault"] = "expected a number, got '0.3I'"

    out = outcomes(rows)

    assert out.text(0) == "no result: the inputs are faulty"
    assert out.headline(0) == "inputs: line 3, column 'Reading': expected a number, got '0.3I'"


def test_text_says_confidence_k_and_degrees_of_freedom(outcomes, make_additions):
    """The text of a result carries its level of confidence, k and the degrees of freedom."""
    out = outcomes(make_additions([0.2, 0.302, 0.399, 0.501], [0, 1, 2, 3.0]), confidence=0.9)

    assert out.text(0).endswith(" mg/L (90 %, k = 2.92, t with 2 dof)")


# --- whatever is broken

POISONS = ("signal", "addition", "fault", "infinite")


def poisoned(rows, row, poison):
    """Break one row; None where it does not have what is to be broken."""
    broken = [dict(one) for one in rows]
    key = {"signal": "signal", "infinite": "signal"}.get(poison)
    if poison == "fault":
        broken[row]["fault"] = "expected a number, got 'x'"
    elif key:
        broken[row][key] = np.inf if poison == "infinite" else np.nan
    else:
        found = [name for name in ("added", "nominal") if name in broken[row]]
        if not found:
            return None
        del broken[row][found[0]]
    return broken


@settings(max_examples=200, deadline=None)
@given(
    row=st.integers(0, 17),
    poison=st.sampled_from(POISONS),
    report=st.sampled_from(["additions", "calibration", "automatic"]),
    blank=st.sampled_from(["none", "subtract", "preparation"]),
)
def test_one_poisoned_number_never_passes_and_never_spreads(outcomes, batch, row, poison, report, blank):
    """Whatever one number is lost, its series does not pass, none vanishes, and the other samples stay bit by bit."""
    rows = batch()
    rows.append({"sample": "RIV-17", "role": "unspiked", "signal": 0.32})
    row = min(row, len(rows) - 1)
    broken = poisoned(rows, row, poison)
    if broken is None:
        return

    sound, out = (outcomes(one, report=report, blank=blank) for one in (rows, broken))

    names = by_name(out)
    assert set(names) == set(by_name(sound))
    sample = rows[row].get("sample")
    for name, i in names.items():
        if sample is None or name.startswith(f"{sample} "):
            # what belongs to no sample belongs to the batch, and the batch to every series
            assert out.verdict_of(i) in (Verdict.FAIL, Verdict.INCOMPLETE), name
            assert next_step(out, i), name
        else:
            assert out.verdict_of(i) is sound.verdict_of(i), name
            for part in ("value", "low", "high", "expanded_uncertainty"):
                a, b = getattr(sound.reported(i), part)[i], getattr(out.reported(i), part)[i]
                assert a == b or (np.isnan(a) and np.isnan(b)), (name, part)


numbers = st.one_of(st.floats(-1, 3), st.sampled_from([0.0, np.nan, np.inf, -np.inf, 1e-30, 1e30]))


@settings(max_examples=250, deadline=None)
@given(
    rows=st.lists(
        st.fixed_dictionaries(
            {
                "role": st.sampled_from(["unspiked", "spiked", "standard", "blank", "check_standard", "spiked_blank"]),
                "sample": st.sampled_from(SAMPLES),
                "signal": st.one_of(numbers, st.lists(numbers, min_size=2, max_size=3)),
            },
            optional={
                "added": numbers,
                "nominal": numbers,
                "spike_volume": numbers,
                "aliquot": numbers,
                "made_up_to": numbers,
                "predilution": numbers,
                "level": st.sampled_from(["A1", "A9"]),
                "stock": st.sampled_from(["ZN-5", "ZN-7"]),
                "replicate": st.sampled_from([1.0, 2.0]),
                "concentration": numbers,
                "reference_signal": numbers,
                "duplicate_of": st.sampled_from(SAMPLES),
                "channel": st.sampled_from(["213.8", "202.5"]),
                "measured_at": st.floats(0, 1e5),
                "fault": st.just("expected a number, got 'x'"),
            },
        ),
        max_size=14,
    ),
    report=st.sampled_from(["additions", "calibration", "automatic"]),
    blank=st.sampled_from([None, "none", "subtract", "preparation"]),
    refers=st.sampled_from([None, "vessel", "aliquot", "nominal"]),
    more=st.fixed_dictionaries(
        {},
        optional={
            "reference": st.sampled_from(["per vessel", "diluted with the sample"]),
            "concentration_refers_to": st.sampled_from(["vessel", "sample"]),
            "undetected_native": st.just("as zero"),
            "expected_levels": st.just(2),
            "expected_spiked": st.just((1, 2)),
            "fixed_factor": st.just(2.0),
        },
    ),
)
def test_random_exports_are_judged_whole(outcomes, rows, report, blank, refers, more):
    """Any export gives a verdict, sentences and a text for every series, and what does not pass has a next step."""
    bench = Bench(aliquot=Measure(10, "mL"), levels={"A1": Measure(1, "mL")})
    stocks = (Stock("ZN-5", {"Zn": Measure(5, "mg/L")}),)

    out = outcomes(rows, report=report, blank=blank, added_refers_to=refers, bench=bench, stocks=stocks, **more)

    samples = {row["sample"] for row in rows if row["role"] in ("unspiked", "spiked")}
    assert {out.case.sample(i) for i in range(len(out.case))} == samples
    for i in range(len(out.case)):
        verdict = out.verdict_of(i)
        reasons = out.reasons(i)
        assert all(check.sentence(i) for check in out.checks)
        assert out.text(i)
        assert out.headline(i)
        if verdict is Verdict.PASS:
            assert np.isfinite(out.reported(i).value[i])
            assert reasons == []
        if verdict in (Verdict.FAIL, Verdict.INCOMPLETE, Verdict.WARN):
            step = next_step(out, i)
            assert reasons
            assert step
            assert "no number" not in step
            assert "nan" not in step
        if verdict is Verdict.FAIL:
            assert out.failed_checks(i)
            assert any(check.outcome[i] == Outcome.FAIL for check in out.checks)
        for name in ("low", "high", "expanded_uncertainty", "standard_uncertainty"):
            column = getattr(out.reported(i), name)[i]
            assert not np.isinf(column), name


STATED = {
    name: parse_check_limits(text) for name, text in (("matrix_effect", "-20 to 20 %"), ("recovery", "75 to 125 %"))
}


@pytest.fixture(scope="session")
def export(make_additions, make_standards, make_blanks):
    """Signals of one sample, of standards and of blanks to rows."""

    def made(given):
        rows = make_additions(*given["signals"]) + make_blanks(given.get("blanks", []))
        return rows + (make_standards(NOMINAL, given["standards"]) if "standards" in given else [])

    return made


@pytest.mark.parametrize(
    ("rows", "method", "check", "step"),
    [
        (
            {"signals": ([0.2, 0.4, 0.48, 0.8], [0, 1, 2, 3.0])},
            {"limits": {"slope_certainty": parse_check_limits("off"), "correlation": parse_check_limits("off")}},
            "residual",
            "Measure the solutions of RIV-17 again; if they still lie off the line, prepare them again.",
        ),
        (
            {"signals": ([[0.2, 0.2, 0.2], [0.4, 0.5, 0.6], [0.8, 0.8, 0.8]], [0, 3.0, 6.0])},
            {"limits": {"slope_certainty": parse_check_limits("off"), "correlation": parse_check_limits("off")}},
            "repeatability",
            "Check sample introduction and rinse, then measure the named solution and RIV-17 again.",
        ),
        (
            {"signals": ([-0.50, -0.401, -0.299, -0.2], [0, 1, 2, 3.0])},
            {},
            "detection",
            "Check blank and baseline; measure RIV-17 with more replicates or a larger aliquot.",
        ),
        (
            {"signals": ([0.22, 0.40, 0.58, 0.759], [0, 2, 4, 6.0]), "standards": READ, "blanks": [0.06]},
            {"blank": "none", "analytes": {"Zn": AnalyteRules(loq=Measure(0.2, "mg/L"))}},
            "blank",
            "Find the contamination or carry-over, measure a clean blank, then RIV-17 again.",
        ),
        (
            {"signals": ([0.22, 0.361, 0.499, 0.64], [0, 2, 4, 6.0]), "standards": READ},
            {"limits": STATED},
            "recovery",
            (
                "Keep the vials: check the spike volume, the stock and losses in preparation; then prepare RIV-17 "
                "again, unspiked and with its additions."
            ),
        ),
        (
            {"signals": ([0.22, 0.361, 0.499, 0.64], [0, 2, 4, 6.0]), "standards": READ},
            {"limits": {"matrix_effect": STATED["matrix_effect"]}},
            "matrix_effect",
            "Report the additions' result of RIV-17; the calibration does not hold in this matrix.",
        ),
        (
            {"signals": ([0.22, 0.361, 0.499, 0.64], [0, 2, 4, 6.0]), "standards": READ},
            {"report": "calibration", "limits": {"recovery": parse_check_limits("50 to 150 %")}},
            "matrix_effect",
            "Report RIV-17 by standard additions, or dilute it until the matrix no longer matters.",
        ),
        (
            {"signals": ([0.82, 0.90], [0, 0.8]), "standards": [0.02, 0.52, 1.02]},
            {"report": "calibration"},
            "spike_size",
            "Spike RIV-17 with at least 2.0 mg/L in the aliquot to judge its recovery.",
        ),
        (
            {"signals": ([-0.1, 0.2], [0, 3.0])},
            {},
            "levels",
            "Next time make three additions to RIV-17, evenly spaced.",
        ),
        (
            {"signals": ([0.2, np.nan, 0.4], [0, 1, 2.0])},
            {},
            "inputs",
            CORRECT.format("RIV-17"),
        ),
    ],
    ids=[
        "residual",
        "readings",
        "detection",
        "blank",
        "recovery",
        "matrix",
        "matrix read back",
        "spike",
        "levels",
        "cells",
    ],
)
def test_each_check_leads_to_its_own_advice(outcomes, export, rows, method, check, step):
    """The advice is that of the check that keeps the series from passing, and fits the result that is reported."""
    out = outcomes(export(rows), **method)

    decisive = out.deciding(0, Outcome.FAIL) or out.deciding(0, Outcome.WARN)
    assert check in [one.name for one in decisive]
    assert next_step(out, 0) == step
