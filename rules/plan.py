"""What to do next: one sentence for each series that does not pass, written for the person at the bench.

The most telling failed check decides. Where new solutions are needed, `rules.pipetting` says which.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from rules import pipetting
from rules.case import Reported
from rules.checks import Outcome
from rules.figures import figure
from rules.outcomes import Verdict

if TYPE_CHECKING:
    from collections.abc import Callable

    from rules.case import Case
    from rules.outcomes import Outcomes
    from rules.pipetting import PipettingPlan


def batch_step(check: str, names: str) -> str:
    """Return what to do about a check that fails for a whole batch, with the names of all that must wait for it."""
    if check in ("check_standard", "bracket"):
        return f"Calibrate again, then measure {names} and every sample since the last good check standard again."
    if check == "spiked_blank":
        return (
            f"Stock or spiking suspect: check the stock's concentration and lot and the pipette, then spike {names} "
            f"and the blank again."
        )
    if check == "stock":
        return f"Prepare the additions of {names} again from a stock within its dates, or correct its dates."
    return f"Find the contamination or carry-over, measure a clean blank, then {names} again."


def solutions(outcomes: Outcomes, series: int) -> PipettingPlan | None:
    """Return which solutions to prepare, where a check failed that new ones can settle and the plan can be made."""
    failing = {check.name for check in outcomes.deciding(series, Outcome.FAIL)}
    one_vessel = series in outcomes.slips
    if not failing or one_vessel or "inputs" in failing or not failing <= pipetting.SETTLED:
        return None
    return pipetting.plan_for(outcomes.case, series)


def next_step(outcomes: Outcomes, series: int) -> str:
    """Return the next step for a series; empty where it passes or is an ordinary sample in order."""
    verdict = outcomes.verdict_of(series)
    failing = {check.name for check in outcomes.deciding(series, Outcome.FAIL)}
    if not failing and series in outcomes.missing:
        return _complete(outcomes, series)
    if series in outcomes.slips:
        return _vessel(outcomes, series)
    warning = {check.name for check in outcomes.deciding(series, Outcome.WARN)}
    for name, step in _STEPS:
        if name in (failing or warning):
            return step(outcomes.case, series)
    if verdict is Verdict.FAIL:
        return f"Prepare and measure {outcomes.case.sample(series)} again."
    return ""


def _vessel(outcomes: Outcomes, i: int) -> str:
    slip = outcomes.slips[i]
    return (
        f"{slip.sentence[0].upper()}{slip.sentence[1:]}: prepare it again and measure "
        f"{outcomes.case.sample(i)} with it. Until then the point stays in the line."
    )


def _complete(outcomes: Outcomes, i: int) -> str:
    case = outcomes.case
    if not case.series.has_native[i]:
        return f"Measure {case.sample(i)} unspiked now, from the same aliquot and dilution as its additions."
    if outcomes.missing[i].endswith("(expect.levels)"):
        return f"Measure the additions of {case.sample(i)} that are still missing, and export again."
    if outcomes.missing[i].endswith("(expect.spiked)"):
        return "Spike as many further samples of this batch as the laboratory expects, and measure them."
    if outcomes.missing[i] == case.open_brackets.get(i):
        if not case.brackets.opened[i]:
            return f"Calibrate or measure a check standard, then {case.sample(i)} and a check standard again."
        return "Measure a check standard now; until it holds, release nothing that was measured since the last one."
    return (
        f"Measure the calibration standards for {case.analyte(i)} and export them together with {case.sample(i)}, or "
        f"state report: additions."
    )


def _inputs(case: Case, i: int) -> str:
    return (
        f"Correct what is named: cells and labels in the instrument's program, levels, stocks and units in the "
        f"settings; then export again. If a reading is lost, measure {case.sample(i)} again."
    )


def _check_standard(case: Case, i: int) -> str:
    return batch_step("check_standard", case.sample(i))


def _blank(case: Case, i: int) -> str:
    return batch_step("blank", case.sample(i))


def _spiked_blank(case: Case, i: int) -> str:
    return batch_step("spiked_blank", case.sample(i))


def _stock(case: Case, i: int) -> str:
    return batch_step("stock", case.sample(i))


def _duplicate(case: Case, i: int) -> str:
    return f"Mix {case.sample(i)} well, then prepare and measure both portions again."


def _channels(case: Case, i: int) -> str:
    return (
        f"Look for an interference on the lines or masses of {case.analyte(i)}, and report {case.sample(i)} from the "
        f"one that is free of it."
    )


def _baseline(case: Case, i: int) -> str:
    return (
        f"Correct the background, or dilute {case.sample(i)} until it no longer shifts the baseline; then measure it "
        f"again with its additions."
    )


def _recovery(case: Case, i: int) -> str:
    low = case.recoveries.slope[i] < 100
    cause = (
        "the spike volume, the stock and losses in preparation"
        if low
        else "the spike volume, the stock and contamination"
    )
    if case.reported[i] == Reported.CALIBRATION:
        return (
            f"Keep the vials: check {cause}; then prepare {case.sample(i)} again with three additions and report the "
            f"additions' result."
        )
    return f"Keep the vials: check {cause}; then prepare {case.sample(i)} again, unspiked and with its additions."


def _larger_additions(case: Case, i: int) -> str:
    native, top = float(case.native[i]), float(case.top_addition[i])
    unit = case.method.result_unit
    target = max(3 * native, 2 * top) if np.isfinite(native) and native > 0 else 2 * top
    return (
        f"Repeat the additions of {case.sample(i)} with a top addition near {figure(target, 2)} {unit} in the aliquot "
        f"(it was {figure(top, 2)}), inside the linear range."
    )


def _addition_size(case: Case, i: int) -> str:
    # the check compares with the additions' own native level, so the advice does too
    native = float(case.fits.spread(case.fits.native)[i])
    top = float(case.top_addition[i])
    if top < native:
        return _larger_additions(case, i)
    return (
        f"Repeat the additions of {case.sample(i)} with a top addition near {figure(3 * native, 2)} "
        f"{case.method.result_unit} in the aliquot (it was {figure(top, 2)})."
    )


def _levels(case: Case, i: int) -> str:
    native = float(case.native[i])
    if not np.isfinite(native) or native <= 0:
        return f"Next time make three additions to {case.sample(i)}, evenly spaced."
    levels = " / ".join(figure(native * share, 2) for share in (0.5, 1.0, 1.5))
    unit = case.method.result_unit
    return f"Next time make three additions to {case.sample(i)}, near {levels} {unit} in the aliquot."


def _dilute(case: Case, i: int) -> str:
    return f"Dilute {case.sample(i)} so that its highest solution stays in the linear range, and measure it again."


def _straighten(case: Case, i: int) -> str:
    return f"Dilute {case.sample(i)} or make smaller additions so that the response stays linear, and measure it again."


def _scatter(case: Case, i: int) -> str:
    return f"Measure the solutions of {case.sample(i)} again; if they still lie off the line, prepare them again."


def _readings(case: Case, i: int) -> str:
    return f"Check sample introduction and rinse, then measure the named solution and {case.sample(i)} again."


def _matrix(case: Case, i: int) -> str:
    if case.reported[i] == Reported.CALIBRATION:
        return f"Report {case.sample(i)} by standard additions, or dilute it until the matrix no longer matters."
    return f"Report the additions' result of {case.sample(i)}; the calibration does not hold in this matrix."


def _spike_size(case: Case, i: int) -> str:
    least = f"{figure(0.25 * float(case.native[i]), 2)} {case.method.result_unit}"
    return f"Spike {case.sample(i)} with at least {least} in the aliquot to judge its recovery."


def _detection(case: Case, i: int) -> str:
    return f"Check blank and baseline; measure {case.sample(i)} with more replicates or a larger aliquot."


#: The most telling check first: a broken batch explains its series, not the other way round.
_STEPS: tuple[tuple[str, Callable[[Case, int], str]], ...] = (
    ("inputs", _inputs),
    ("stock", _stock),
    ("check_standard", _check_standard),
    ("bracket", _check_standard),
    ("blank", _blank),
    ("spiked_blank", _spiked_blank),
    ("dilution_test", _baseline),
    ("linear_evidence", _dilute),
    ("curvature", _straighten),
    ("lack_of_fit", _straighten),
    ("recovery", _recovery),
    ("slope_certainty", _larger_additions),
    ("duplicate", _duplicate),
    ("channels_agree", _channels),
    ("correlation", _scatter),
    ("residual", _scatter),
    ("repeatability", _readings),
    ("addition_size", _addition_size),
    ("levels", _levels),
    ("detection", _detection),
    ("matrix_effect", _matrix),
    ("spike_size", _spike_size),
)
