"""START HERE: readings and a method become outcomes.

    readings → solutions → vessels → series → lines, calibrations → results, recoveries → checks → verdicts

Every step works on all series at once. Sentences are made when somebody asks for them.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from rules import (
    additions,
    batch_checks,
    blanks,
    budget,
    calibration,
    check_standards,
    line_checks,
    reading_back,
    recovery,
    recovery_checks,
    series,
    solutions,
    units,
    variance,
    vessels,
)
from rules.case import Case, Reported
from rules.checks import Check, Outcome
from rules.outcomes import Outcomes, decide

if TYPE_CHECKING:
    from parsers.readings import Readings
    from rules.method import Method


def evaluate(readings: Readings, method: Method, accepted_at: float) -> Outcomes:
    """Compute and judge everything that one export holds.

    Parameters
    ----------
    readings
        What the export says.
    method
        What the laboratory decided.
    accepted_at
        Seconds since 1970-01-01 in the laboratory's local time; judges the dates of stocks where the export has no
        times.
    """
    # absurd numbers overflow to infinity, and what is not finite never passes: no warning is needed on top
    with np.errstate(over="ignore"):
        case = compute(readings, method, accepted_at)
        checks = check(case)
        if unexplained := _without_explanation(case, checks):
            case = replace(case, faults=case.faults | unexplained)
            # only the inputs are judged anew: the other checks say what they found before
            checks = tuple(batch_checks.inputs(case) if one.name == "inputs" else one for one in checks)
        return decide(case, checks)


def compute(readings: Readings, method: Method, accepted_at: float) -> Case:
    """Compute results, recoveries and faults; judge nothing."""
    gathered = solutions.gather(readings)
    filled = vessels.fill(readings, gathered, method, accepted_at)
    grouped = series.group(readings, gathered, filled, method)
    keys = blanks.Keys.of(readings)
    key = keys.code(grouped.analyte, grouped.channel)
    measured_blanks = blanks.collect(readings, gathered, keys, method.confidence)
    floor = _floor(readings, measured_blanks, keys, method)
    calibrations = calibration.calibrate(readings, gathered, keys, floor, method)
    fits = additions.fit(grouped, gathered, filled, measured_blanks, key, floor.of(key), method)
    common = budget.common(grouped, filled, method)
    results, interval, u_line = additions.evaluate(fits, grouped, filled, common, method)
    back = reading_back.evaluate(grouped, gathered, filled, measured_blanks, calibrations, key, method)
    by_additions = grouped.has_additions & (method.report == "additions")
    case = Case(
        readings=readings,
        method=method,
        solutions=gathered,
        vessels=filled,
        series=grouped,
        keys=keys,
        key=key,
        blanks=measured_blanks,
        calibrations=calibrations,
        check_standards=check_standards.read(readings, gathered, calibrations, keys, method),
        fits=fits,
        additions=results,
        interval=interval,
        u_line=u_line,
        back=back,
        recoveries=recovery.evaluate(grouped, gathered, filled, fits, calibrations, back, method),
        reported=np.where(by_additions, Reported.ADDITIONS, Reported.CALIBRATION).astype(np.int8),
        faults={},
    )
    return replace(case, faults=batch_checks.collect_faults(case))


def _floor(readings: Readings, measured: blanks.Blanks, keys: blanks.Keys, method: Method) -> variance.Floor:
    """Return what floors the weights of each analyte and channel: the LOQ, else three SD of the blanks."""
    stated = [method.analyte(name).loq for name in readings.analyte.names]
    loq = [np.nan if limit is None else units.of_measure(limit, method.vessel_unit) for limit in stated]
    return variance.Floor(np.repeat(np.array(loq), keys.channels), 3 * measured.sd)


def check(case: Case) -> tuple[Check, ...]:
    """Run every check on every series."""
    size = recovery_checks.spike_size(case)
    return (
        batch_checks.inputs(case),
        line_checks.levels(case),
        line_checks.slope_certainty(case),
        line_checks.correlation(case),
        line_checks.curvature(case),
        line_checks.lack_of_fit(case),
        line_checks.residual(case),
        line_checks.addition_size(case),
        recovery_checks.recovery(case, size),
        size,
        recovery_checks.matrix_effect(case),
        batch_checks.repeatability(case),
        batch_checks.check_standard(case),
        batch_checks.blank(case),
        line_checks.linear_evidence(case),
        line_checks.detection(case),
    )


def _without_explanation(case: Case, checks: tuple[Check, ...]) -> dict[int, list[str]]:
    """Judged series that report no number although no check says why, with the reason of the result itself.

    Checks can be switched off in the settings; a result that is not there cannot, and never passes.
    """
    said = np.zeros(len(case), dtype=bool)
    for one in checks:
        said |= (one.outcome == Outcome.FAIL) & one.decides(case)
    no_calibration = (case.reported == Reported.CALIBRATION) & (case.back.calibration < 0)
    silent = case.judged & ~np.isfinite(case.reported_value()) & ~said & ~no_calibration
    by_additions = case.reported == Reported.ADDITIONS
    return {
        i: [(case.additions if by_additions[i] else case.back.results).reasons.get(i, "no result can be given")]
        for i in np.flatnonzero(silent).tolist()
    }
