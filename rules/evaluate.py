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
    agreement_checks,
    batch_checks,
    blanks,
    budget,
    calibration,
    check_standards,
    detection_limits,
    dilutions,
    instrument,
    line_checks,
    reading_back,
    recovery,
    recovery_checks,
    series,
    solutions,
    spiked_blanks,
    variance,
    vessels,
)
from rules.case import Case, Reported
from rules.checks import Check, Outcome
from rules.outcomes import Outcomes, decide
from rules.seen import Seen
from rules.spanning import joined, lacks, lend
from rules.substances import of_analytes

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping

    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.result import Results
    from rules.spanning import Key, Loan, Other


def evaluate(
    readings: Readings, method: Method, accepted_at: float, others: Callable[[], Iterable[Other]] | None = None
) -> Outcomes:
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
    others
        Gives the exports of the same layout that may lend something; called only where something is missing that
        the method lets others lend.
    """
    # absurd numbers overflow to infinity, and what is not finite never passes: no warning is needed on top
    with np.errstate(over="ignore"):
        case = compute(readings, method, accepted_at)
        loans: tuple[Loan, ...] = ()
        if others is not None and lacks(case):
            case, loans = _with_loans(readings, method, accepted_at, case, tuple(others()))
        checks = check(case)
        if unexplained := _without_explanation(case, checks):
            case = replace(case, faults=case.faults | unexplained)
            # only the inputs are judged anew: the other checks say what they found before
            checks = tuple(batch_checks.inputs(case) if one.name == "inputs" else one for one in checks)
        return decide(case, checks, loans)


def _with_loans(
    readings: Readings, method: Method, accepted_at: float, case: Case, others: tuple[Other, ...]
) -> tuple[Case, tuple[Loan, ...]]:
    """Take what others lend, and then what a lent calibration's check standard makes necessary: one that closes."""
    loans: tuple[Loan, ...] = ()
    refused: dict[Key, str] = {}
    for _ in range(2):
        more, reasons = lend(case, accepted_at, others, lambda o: compute(o.readings, method, o.accepted_at))
        if not more and not reasons:
            break
        loans, refused = (*loans, *more), refused | reasons
        case = compute(joined(readings, loans, accepted_at), method, accepted_at, refused)
    return case, loans


def compute(readings: Readings, method: Method, accepted_at: float, refused: Mapping[Key, str] | None = None) -> Case:
    """Compute results, recoveries and faults; judge nothing.

    `refused` says of analytes why the calibration of another export may not be used.
    """
    gathered = solutions.gather(readings)
    filled = vessels.fill(readings, gathered, method, accepted_at)
    grouped = series.group(readings, gathered, filled, method)
    filled = dilutions.on_one_base(filled, grouped)
    keys = blanks.Keys.of(readings)
    key = keys.code(grouped.analyte, grouped.channel)
    measured_blanks = blanks.collect(readings, gathered, keys, method.confidence)
    floor = _floor(readings, measured_blanks, keys, method)
    fits = additions.fit(grouped, gathered, filled, measured_blanks, key, floor.of(key), method)
    common = budget.common(grouped, filled, method)
    results, interval, u_line = additions.evaluate(fits, grouped, filled, common, method)
    calibrations, read_back_from, unread = instrument.stand_in(
        readings, gathered, filled, calibration.calibrate(readings, gathered, keys, floor, method), keys, method
    )
    _note_refused(readings, keys, calibrations, refused or {})
    seen_blanks, seen_fits = measured_blanks, fits
    if read_back_from is not gathered:
        gathered = replace(gathered, faults=_merged(gathered.faults, unread))
        seen_blanks = blanks.collect(readings, read_back_from, keys, method.confidence)
        seen_fits = additions.fit(grouped, read_back_from, filled, seen_blanks, key, floor.of(key), method)
    limits = detection_limits.evaluate(readings, seen_blanks, calibrations, keys, method)
    seen = Seen(read_back_from, seen_blanks, calibrations, limits)
    back = reading_back.evaluate(grouped, filled, seen, key, method)
    recoveries = recovery.evaluate(grouped, filled, seen, seen_fits, back, key, method)
    by_additions = _by_additions(grouped, results, method)
    if method.report == "automatic":
        back = reading_back.with_matrix_effect(back, recoveries, ~by_additions, method)
    case = Case(
        readings=readings,
        method=method,
        solutions=gathered,
        vessels=filled,
        series=grouped,
        keys=keys,
        key=key,
        blanks=measured_blanks,
        fits=fits,
        additions=results,
        interval=interval,
        u_line=u_line,
        seen=seen,
        check_standards=check_standards.read(readings, seen, keys, method),
        spiked_blanks=spiked_blanks.read(readings, seen, filled, keys, method),
        dilutions=dilutions.evaluate(
            grouped,
            gathered,
            filled,
            measured_blanks.mean[key],
            _baseline(seen, measured_blanks.mean[key], key, by_additions, method),
            method,
        ),
        back=back,
        recoveries=recoveries,
        reported=np.where(by_additions, Reported.ADDITIONS, Reported.CALIBRATION).astype(np.int8),
        faults={},
    )
    return replace(case, faults=batch_checks.collect_faults(case))


def _by_additions(grouped: series.Series, results: Results, method: Method) -> NDArray[np.bool_]:
    """Series that report the result of their additions.

    Left to the program, additions are reported wherever their line gives a number; never the one that passes, since
    choosing by outcome covers as little as 1 %.
    """
    if method.report == "calibration":
        return np.zeros(len(grouped), dtype=bool)
    if method.report == "additions":
        return grouped.has_additions
    return grouped.has_additions & np.isfinite(results.value)


def _baseline(seen: Seen, blank: Floats, key: Integers, by_additions: NDArray[np.bool_], method: Method) -> Floats:
    """Return the signal of every vessel that a result allows for: a blank or the calibration's intercept."""
    subtracted = blank if method.blank == "subtract" else np.zeros(len(key))
    calibrations = seen.calibrations
    at = calibrations.of_key[key]
    read = (at >= 0) & ~by_additions & ~np.append(calibrations.instrument, True)[at]
    return np.where(read, np.append(calibrations.lines.intercept, np.nan)[at], subtracted)


def _note_refused(
    readings: Readings, keys: blanks.Keys, calibrations: calibration.Calibrations, refused: Mapping[Key, str]
) -> None:
    for (analyte, channel), sentence in refused.items():
        of_channel = -1 if channel is None else readings.channel.names.index(channel)
        codes = (np.array([readings.analyte.names.index(analyte)]), np.array([of_channel]))
        calibrations.refused.setdefault(int(keys.code(codes[0], codes[1])[0]), []).append(sentence)


def _merged(faults: dict[int, list[str]], more: dict[int, list[str]]) -> dict[int, list[str]]:
    return {solution: [*faults.get(solution, ()), *more.get(solution, ())] for solution in faults | more}


def _floor(readings: Readings, measured: blanks.Blanks, keys: blanks.Keys, method: Method) -> variance.Floor:
    """Return what floors the weights of each analyte and channel: the LOQ, else three SD of the blanks."""
    loq = of_analytes(readings, method, "loq")
    return variance.Floor(np.repeat(loq, keys.channels), 3 * measured.sd)


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
        agreement_checks.duplicate(case),
        batch_checks.check_standard(case),
        batch_checks.bracket(case),
        batch_checks.blank(case),
        batch_checks.spiked_blank(case),
        agreement_checks.channels_agree(case),
        agreement_checks.dilution_test(case),
        batch_checks.stock(case),
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
