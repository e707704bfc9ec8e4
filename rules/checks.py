"""What a check is: a measured value, a limit, an outcome and one plain sentence, for every series at once.

The checks themselves stand in `line_checks`, `recovery_checks` and `batch_checks`. Simple acceptance on unrounded
values; a value that is missing or not finite never passes.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from typing import TYPE_CHECKING, Any

import numpy as np

from rules.exceptions import limits_of
from rules.figures import percent

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from rules.case import Case, Reported
    from rules.limits import CheckLimits
    from rules.line import Floats

    Outcomes = NDArray[np.int8]


FAULTY_INPUTS = "the inputs are faulty"


class Outcome(IntEnum):
    """What a check says of a series."""

    NOT_EVALUATED = 0
    PASS = 1
    WARN = 2
    FAIL = 3

    @property
    def word(self) -> str:
        """The word that results and mails use."""
        return self.name.lower().replace("_", " ")


@dataclass(frozen=True, slots=True)
class Check:
    """One check on all series of an export.

    Attributes
    ----------
    name
        As in results and settings.
    judges
        The reported result that it decides on; None: both.
    unit
        Of the value.
    value
        float64[m]; NaN where it was not evaluated.
    outcome
        int8[m], codes of `Outcome`.
    limits
        What each class of limits is judged by; None for checks that are a must.
    sentence
        Series to one plain sentence.
    lines
        Series to the export lines that the check rests on.
    """

    name: str
    judges: Reported | None
    unit: str
    value: Floats
    outcome: Outcomes
    limits: tuple[CheckLimits, ...] | None
    sentence: Callable[[int], str]
    lines: Callable[[int], list[int]]

    def decides(self, case: Case) -> NDArray[np.bool_]:
        """Whether the check's warnings count for the result that each series reports."""
        if self.judges is None:
            return np.ones(len(case), dtype=bool)
        return np.asarray(case.reported == self.judges, dtype=bool)

    def stated_fail(self, case: Case) -> NDArray[np.bool_]:
        """Whether the laboratory itself stated a fail limit: it decides whatever is reported."""
        if self.limits is None:
            return np.zeros(len(case), dtype=bool)
        stated = np.array([limit.stated and limit.fail is not None for limit in self.limits], dtype=bool)
        return stated[case.limit_classes.of_series]

    def limit_text(self, case: Case, series: int) -> str:
        """Return the limit in words."""
        if self.limits is None:
            return "must"
        return self.limits[int(case.limit_classes.of_series[series])].text


def series_limits(case: Case, check: str) -> tuple[CheckLimits, ...]:
    """Return the limits of a check for each class of limits of an export's series."""
    return case.limit_classes.limits(case.method, check)


def batch_limits(case: Case, check: str) -> tuple[CheckLimits, ...]:
    """Return the limits of a check for each analyte of an export, for what belongs to no sample."""
    return limits_of(case.method, case.readings.analyte.names, check)


def judge(case: Case, limits: tuple[CheckLimits, ...], value: Floats) -> Outcomes:
    """Judge one value for each series by the limits of its class."""
    return judge_values(limits, case.limit_classes.of_series, value)


def judge_values(limits: tuple[CheckLimits, ...], code: NDArray[Any], value: Floats) -> Outcomes:
    """Judge values by the limits that their codes choose; NaN is not evaluated, and neither is a check that is off."""
    outcome = np.full(len(value), Outcome.PASS, dtype=np.int8)
    for level, severity in (("warn", Outcome.WARN), ("fail", Outcome.FAIL)):
        chosen = [getattr(limit, level) for limit in limits]
        low = np.array([-np.inf if limit is None else limit.low for limit in chosen])[code]
        high = np.array([np.inf if limit is None else limit.high for limit in chosen])[code]
        closed = np.array([limit is None or limit.closed for limit in chosen], dtype=bool)[code]
        with np.errstate(invalid="ignore"):
            inside = np.where(closed, (value >= low) & (value <= high), (value > low) & (value < high))
        outcome[~inside] = severity
    off = np.array([limit.off for limit in limits], dtype=bool)[code]
    outcome[np.isnan(value) | off] = Outcome.NOT_EVALUATED
    return outcome


def severest(
    limits: tuple[CheckLimits, ...],
    code: NDArray[Any],
    value: Floats,
    away: Floats,
    owner: NDArray[np.int64],
    count: int,
) -> NDArray[np.int64]:
    """Return the place of each owner's value that its limits judge hardest; -1 where it has none.

    Among values judged alike the one that lies farthest `away`, then the first. The farthest alone would not do: of
    83 and 112 % only the second lies outside 80 to 110 %.
    """
    finite = np.flatnonzero(np.isfinite(value))
    hardness = judge_values(limits, code, value)[finite]
    ascending = finite[np.lexsort((-finite, away[finite], hardness))]
    place = np.full(count, -1, dtype=np.int64)
    place[owner[ascending]] = ascending
    return place


def percents(case: Case, name: str, value: Floats) -> Callable[[int], str]:
    """Return what writes a check's value in % so that nobody reads it on the wrong side of its limits."""
    bounds = [limit.bounds for limit in series_limits(case, name)]
    return lambda series: percent(float(value[series]), *bounds[int(case.limit_classes.of_series[series])])


def judged(
    case: Case,
    name: str,
    judges: Reported | None,
    unit: str,
    value: Floats,
    sentence: Callable[[int, Outcome], str],
    lines: Callable[[int], list[int]] | None = None,
) -> Check:
    """Make a check that is judged by its configured limits.

    What judges a result is not evaluated where the inputs are faulty: the fault would come back in other words.
    """
    limits = series_limits(case, name)
    if judges is not None and case.faults:
        value = value.copy()
        value[list(case.faults)] = np.nan
    outcome = judge(case, limits, value)

    def say(series: int) -> str:
        if limits[int(case.limit_classes.of_series[series])].off:
            return f"{name}: switched off in the settings"
        if judges is not None and series in case.faults:
            return FAULTY_INPUTS
        if outcome[series] == Outcome.NOT_EVALUATED and judges is not None and not case.judged[series]:
            return "no unspiked solution" if case.series.has_additions[series] else "no additions were made"
        return sentence(series, Outcome(int(outcome[series])))

    return Check(name, judges, unit, value, outcome, limits, say, lines or case.series_lines)
