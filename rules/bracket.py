"""Brackets: the check standards measured before, between and after the solutions of a series, in run order.

A calibration just measured opens a bracket as well. One that nothing closes yet is incomplete, never passed: the
samples since the last good check standard wait for the next one. EPA SW-846 6010D: after every ten samples and at the
end of the run.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.blanks import Keys
    from rules.check_standards import CheckStandards
    from rules.line import Integers
    from rules.series import Series
    from rules.solutions import Solutions


@dataclass(frozen=True, slots=True)
class Brackets:
    """The bracket of each series.

    Attributes
    ----------
    order
        int64[c], check standards by analyte and channel and, within those, in run order: indices of `CheckStandards`.
    first, last
        int64[m], the places in `order` of the bracket's check standards: from `first` up to but not including `last`.
    wanted
        bool[m], whether the batch has check standards of the analyte and channel at all.
    opened, closed
        bool[m], by a check standard or the calibration before; by a check standard after.
    opened_by
        int64[m], the solution that opens the bracket; -1 where none does.
    """

    order: Integers
    first: Integers
    last: Integers
    wanted: NDArray[np.bool_]
    opened: NDArray[np.bool_]
    closed: NDArray[np.bool_]
    opened_by: Integers


def find(
    readings: Readings, solutions: Solutions, series: Series, key: Integers, checks: CheckStandards, keys: Keys
) -> Brackets:
    """Find the bracket of every series; solutions stand in run order."""
    order = np.lexsort((checks.solutions, checks.key))
    span = len(solutions) + 1
    # one ascending number for analyte, channel and place in the run
    at = checks.key[order] * span + checks.solutions[order]
    begins = key * span + series.segments.min(series.members.astype(float)).astype(np.int64)
    ends = key * span + series.segments.max(series.members.astype(float)).astype(np.int64)
    group_first, group_last = np.searchsorted(at, key * span), np.searchsorted(at, (key + 1) * span)
    before, after = np.searchsorted(at, begins) - 1, np.searchsorted(at, ends)
    checked = before >= group_first
    closed = after < group_last
    standard = _last_standard(readings, solutions, keys, begins, span)
    earlier = np.append(checks.solutions[order], -1)[np.where(checked, before, -1)]
    return Brackets(
        order=order,
        first=np.where(checked, before, group_first).astype(np.int64),
        last=np.where(closed, after + 1, group_last).astype(np.int64),
        wanted=group_last > group_first,
        opened=checked | (standard >= 0),
        closed=closed,
        opened_by=np.where(checked, earlier, standard),
    )


def _last_standard(
    readings: Readings, solutions: Solutions, keys: Keys, begins: NDArray[np.int64], span: int
) -> Integers:
    """Return the last standard of the analyte and channel before each series; -1 where there is none."""
    chosen = np.flatnonzero(readings.role[solutions.rows] == Role.STANDARD)
    rows = solutions.rows[chosen]
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    at = np.sort(key * span + chosen)
    place = np.searchsorted(at, begins) - 1
    found = np.append(at, -1)[np.where(place >= 0, place, -1)]
    same = (found >= 0) & (found // span == begins // span)
    return np.where(same, found % span, -1).astype(np.int64)
