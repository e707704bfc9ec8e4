"""Verdicts: which checks decide, what they add up to, and the words that people read.

A series fails if a deciding check fails; it is incomplete if something expected is missing; it warns if a deciding
check warns; else it passes. An ordinary sample without spikes is `not spiked` and judged by its batch only.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from rules import expectations
from rules.case import Reported
from rules.checks import Check, Outcome
from rules.figures import figure, percent, plus_minus, span
from rules.slips import find_slips

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.case import Case
    from rules.result import Results
    from rules.slips import Slip
    from rules.spanning import Loan


class Verdict(IntEnum):
    """What is said of a series."""

    PASS = 0
    WARN = 1
    FAIL = 2
    INCOMPLETE = 3
    NOT_SPIKED = 4

    @property
    def word(self) -> str:
        """The word that results and mails use."""
        return self.name.lower().replace("_", " ")


@dataclass(frozen=True)
class Outcomes:
    """One export, judged.

    Attributes
    ----------
    case
        Everything computed.
    checks
        All checks.
    verdict
        int8[m], codes of `Verdict`.
    missing
        Series to what is expected and not there.
    loans
        What other exports lend.
    """

    case: Case
    checks: tuple[Check, ...]
    verdict: NDArray[np.int8]
    missing: dict[int, str]
    loans: tuple[Loan, ...] = ()

    def verdict_of(self, series: int) -> Verdict:
        """Return the verdict of a series."""
        return Verdict(int(self.verdict[series]))

    def check(self, name: str) -> Check:
        """Return a check by its name."""
        return next(check for check in self.checks if check.name == name)

    def deciding(self, series: int, outcome: Outcome) -> list[Check]:
        """Return the checks that decide on a series with an outcome."""
        return self._deciding[outcome].get(series, [])

    @cached_property
    def _deciding(self) -> dict[Outcome, dict[int, list[Check]]]:
        found: dict[Outcome, dict[int, list[Check]]] = {Outcome.FAIL: {}, Outcome.WARN: {}}
        for check in self.checks:
            decides = check.decides(self.case)
            for outcome, counts in ((Outcome.FAIL, decides | check.stated_fail(self.case)), (Outcome.WARN, decides)):
                for series in np.flatnonzero((check.outcome == outcome) & counts).tolist():
                    found[outcome].setdefault(series, []).append(check)
        return found

    @cached_property
    def slips(self) -> dict[int, Slip]:
        """Series that one vessel explains, which does not fit the line of the others."""
        return find_slips(self)

    def reasons(self, series: int) -> list[str]:
        """Return one sentence for each thing that keeps a series from passing."""
        found = self.failing_sentences(series)
        if series in self.missing:
            found.append(self.missing[series])
        return found + [check.sentence(series) for check in self.deciding(series, Outcome.WARN)]

    def failing_sentences(self, series: int) -> list[str]:
        """Return one sentence for each fact that fails a series: a check standard that fails its bracket is one."""
        failing = self.deciding(series, Outcome.FAIL)
        names = {check.name for check in failing}
        return [check.sentence(series) for check in failing if check.name != "bracket" or "check_standard" not in names]

    def failed_checks(self, series: int) -> tuple[str, ...]:
        """Return the names of the checks that fail a series, or ``incomplete``."""
        names = tuple(check.name for check in self.deciding(series, Outcome.FAIL))
        return names or (("incomplete",) if series in self.missing else ())

    def headline(self, series: int) -> str:
        """Return what is wrong in one phrase: ``recovery 61 % (limits 75 to 125)``."""
        failing = self.deciding(series, Outcome.FAIL) or self.deciding(series, Outcome.WARN)
        if series in self.missing and not self.deciding(series, Outcome.FAIL):
            return self.missing[series]
        if not failing:
            return self.verdict_of(series).word
        check = min(failing, key=lambda c: _URGENCY.index(c.name))
        return measured(check, self.case, series)

    def text(self, series: int) -> str:
        """Return the reported result as people read it, or why there is no number."""
        results = self.reported(series)
        return result_text(results, series, self.case, self.case.method.confidence)

    def reported(self, series: int) -> Results:
        """Return the results that a series is reported from."""
        by_additions = self.case.reported[series] == Reported.ADDITIONS
        return self.case.additions if by_additions else self.case.back.results


#: Checks from the one whose failure explains most to the one that explains least.
_URGENCY = (
    "inputs",
    "stock",
    "check_standard",
    "bracket",
    "blank",
    "spiked_blank",
    "recovery",
    "slope_certainty",
    "curvature",
    "lack_of_fit",
    "linear_evidence",
    "dilution_test",
    "duplicate",
    "channels_agree",
    "correlation",
    "residual",
    "repeatability",
    "levels",
    "addition_size",
    "detection",
    "spike_size",
    "matrix_effect",
)


def measured(check: Check, case: Case, series: int) -> str:
    """Return check, value and limits in one phrase."""
    name = check.name.replace("_", " ")
    value = float(check.value[series])
    if check.name == "inputs" or not np.isfinite(value):
        said = check.sentence(series)
        return said if said.startswith(f"{name} ") else f"{name}: {said}"
    if check.limits is None:
        return f"{name} {figure(value)} {check.unit}".rstrip() + f": {check.sentence(series)}"
    limits = check.limits[int(case.limit_classes.of_series[series])]
    number = percent(value, *limits.bounds) if check.unit == "%" else f"{figure(value)} {check.unit}".rstrip()
    limit = limits.fail if check.outcome[series] == Outcome.FAIL else limits.warn
    words = "" if limit is None else limit.text.removesuffix("%").removesuffix("LOQ").strip()
    prefix = "limits" if " to " in words else "limit"
    return f"{name} {number} ({prefix} {words})"


def result_text(results: Results, series: int, case: Case, confidence: float) -> str:
    """Write a result: ``17.3 ± 1.9 µg/L (95 %, k = 2.57, t with 5 dof)``, ``< 0.02 mg/L``, or why there is none."""
    unit = case.method.result_unit
    value, low, high = (float(column[series]) for column in (results.value, results.low, results.high))
    if series in case.faults:
        return "no result: the inputs are faulty"
    if not np.isfinite(value):
        return results.reasons.get(series, "no result")
    level = f"{confidence * 100:g} %"
    if not results.detected[series] and np.isfinite(results.less_than[series]):
        by = level if results is case.additions else "limit of detection"
        return f"< {figure(float(results.less_than[series]))} {unit} (not detected, {by})"
    if not np.isfinite(results.expanded_uncertainty[series]):
        reason = results.reasons.get(series, "uncertainty absent")
        return f"{figure(value)} {unit} ({reason})"
    if not results.symmetric(series):
        return f"{span(value, low, high)} {unit} ({level})"
    expanded, k = float(results.expanded_uncertainty[series]), float(results.coverage_factor[series])
    by_t = f"{level}, k = {k:.2f}, t with {results.dof[series]:g} dof"
    by_factor = f"k = {k:g}, fixed"
    return f"{plus_minus(value, expanded)} {unit} ({by_factor if k == case.method.fixed_factor else by_t})"


def decide(case: Case, checks: tuple[Check, ...], loans: tuple[Loan, ...] = ()) -> Outcomes:
    """Add the checks up to a verdict for every series."""
    count = len(case)
    failing = np.zeros(count, dtype=bool)
    warning = np.zeros(count, dtype=bool)
    for check in checks:
        decides = check.decides(case)
        failing |= (check.outcome == Outcome.FAIL) & (decides | check.stated_fail(case))
        warning |= (check.outcome == Outcome.WARN) & decides
    missing = expectations.missing(case)
    lacking = np.zeros(count, dtype=bool)
    lacking[list(missing)] = True
    ordinary = ~case.series.has_additions
    verdict = np.full(count, Verdict.PASS, dtype=np.int8)
    verdict[warning] = Verdict.WARN
    verdict[ordinary] = Verdict.NOT_SPIKED
    verdict[lacking] = Verdict.INCOMPLETE
    verdict[failing] = Verdict.FAIL
    return Outcomes(case, checks, verdict, missing, loans)
