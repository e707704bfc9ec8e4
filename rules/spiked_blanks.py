"""Spiked blanks: additions to a clean matrix, read back from the calibration. What fails here is no sample's fault."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.blanks import Keys
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.seen import Seen
    from rules.vessels import Vessels


@dataclass(frozen=True, slots=True)
class SpikedBlanks:
    """All spiked blanks of an export.

    Attributes
    ----------
    solutions, key
        int64[b], the solutions and the analyte and channel of each.
    stock
        int32[b], index of the stock in ``Method.stocks``; -1 where the export gives a concentration.
    added, measured, percent
        float64[b], in the vessel, in its unit; measured in % of added. NaN where there is no calibration.
    """

    solutions: Integers
    key: Integers
    stock: NDArray[np.int32]
    added: Floats
    measured: Floats
    percent: Floats


def read(readings: Readings, seen: Seen, vessels: Vessels, keys: Keys, method: Method) -> SpikedBlanks:
    """Read every spiked blank back.

    A blank that belongs to the preparation is taken off; one that is in every vessel is in the calibration as well.
    A vessel whose stock does not hold the analyte is no spiked blank of it.
    """
    solutions, blanks, calibrations = seen.solutions, seen.blanks, seen.calibrations
    chosen = np.flatnonzero((readings.role[solutions.rows] == Role.SPIKED_BLANK) & ~vessels.not_added)
    rows = solutions.rows[chosen]
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    measured = np.full(len(chosen), np.nan)
    at = calibrations.of_key[key] if len(key) else np.zeros(0, dtype=np.int64)
    if len(calibrations.key):
        lines, y = calibrations.lines, solutions.signal[chosen]
        if method.blank == "preparation":
            y = y - vessels.dilution[chosen] * blanks.mean[key]
        with np.errstate(invalid="ignore", divide="ignore"):
            measured = np.where(at >= 0, (y - lines.intercept[at]) / lines.slope[at], np.nan)
    added = vessels.added[chosen]
    with np.errstate(invalid="ignore", divide="ignore"):
        percent = np.where(added > 0, 100 * measured / added, np.nan)
    return SpikedBlanks(chosen, key, vessels.stock[chosen], added, measured, percent)
