"""Check standards: solutions of known concentration, read back from the calibration during the run."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules.calibration import nominal_of

if TYPE_CHECKING:
    from parsers.readings import Readings
    from rules.blanks import Keys
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.seen import Seen


@dataclass(frozen=True, slots=True)
class CheckStandards:
    """All check standards of an export.

    Attributes
    ----------
    solutions, key
        int64[c], the solutions and the analyte and channel of each.
    nominal, measured, percent
        float64[c], in the unit of results; measured in % of nominal. NaN where there is no calibration.
    """

    solutions: Integers
    key: Integers
    nominal: Floats
    measured: Floats
    percent: Floats


def read(readings: Readings, seen: Seen, keys: Keys, method: Method) -> CheckStandards:
    """Read every check standard back."""
    solutions, calibrations = seen.solutions, seen.calibrations
    chosen = np.flatnonzero(readings.role[solutions.rows] == Role.CHECK_STANDARD)
    rows = solutions.rows[chosen]
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    nominal, _ = nominal_of(readings, rows, method)
    at = calibrations.of_key[key] if len(key) else np.zeros(0, dtype=np.int64)
    measured = np.full(len(chosen), np.nan)
    if len(calibrations.key):
        lines = calibrations.lines
        with np.errstate(invalid="ignore", divide="ignore"):
            measured = np.where(at >= 0, (solutions.signal[chosen] - lines.intercept[at]) / lines.slope[at], np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        percent = np.where(nominal > 0, 100 * measured / nominal, np.nan)
    return CheckStandards(chosen, key, nominal, measured, percent)
