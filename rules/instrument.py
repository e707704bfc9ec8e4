"""Concentrations that the instrument itself computed, where the export holds no standards to read back from.

They serve as a calibration with intercept 0 and slope 1, without an uncertainty of its own: the instrument states
none. Results and recoveries from them are named as such.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules.line import Lines
from rules.substances import concentrations

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.blanks import Keys
    from rules.calibration import Calibrations
    from rules.line import Floats
    from rules.method import Method
    from rules.solutions import Solutions
    from rules.vessels import Vessels


def stand_in(
    readings: Readings,
    solutions: Solutions,
    vessels: Vessels,
    calibrations: Calibrations,
    keys: Keys,
    method: Method,
) -> tuple[Calibrations, Solutions, dict[int, list[str]]]:
    """Let the instrument's concentrations stand in where an analyte has no standards.

    Returns
    -------
    tuple
        The calibrations with the instrument's among them; the solutions with concentrations in the vessel as the
        signal of what is read back from those; and solutions with what is wrong with their concentrations.
    """
    if not np.isfinite(readings.concentration.values).any():
        return calibrations, solutions, {}
    rows = solutions.rows
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    found, faults = _in_vessel(readings, solutions, vessels, method)
    role = readings.role[rows]
    sample = (role == Role.UNSPIKED) | (role == Role.SPIKED)
    standards = np.unique(key[role == Role.STANDARD])
    given = np.isfinite(found) | np.isin(np.arange(len(rows)), list(faults))
    used = np.setdiff1d(np.unique(key[given & sample]), standards)
    if not len(used):
        return calibrations, solutions, {}
    at = np.isin(key, used)
    for solution in np.flatnonzero(at & sample & ~given).tolist():
        line = readings.line[rows[solution]]
        faults[solution].append(
            f"line {line}: the instrument gives no concentration here and gives it for other solutions: correct the "
            f"export or measure it again"
        )
    seen = replace(solutions, signal=np.where(at, found, solutions.signal))
    return (
        _with_identity(calibrations, used),
        seen,
        {solution: said for solution, said in faults.items() if at[solution]},
    )


def _in_vessel(
    readings: Readings, solutions: Solutions, vessels: Vessels, method: Method
) -> tuple[Floats, defaultdict[int, list[str]]]:
    """Return the mean concentration of each solution as it is in the vessel, and what is wrong."""
    values, reasons = concentrations(readings, readings.concentration, solutions.members, method)
    owner, segments = solutions.segments.owner, solutions.segments
    faults: defaultdict[int, list[str]] = defaultdict(list)
    for place, reason in reasons.items():
        line = readings.line[solutions.members[place]]
        faults[int(owner[place])].append(f"line {line}: concentration: {reason}")
    present = np.isfinite(values)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = segments.sum(np.where(present, values, 0.0)) / segments.sum(present.astype(float))
        role = readings.role[solutions.rows]
        sample = (role == Role.UNSPIKED) | (role == Role.SPIKED)
        scale = np.where(sample, vessels.fraction / vessels.predilution, 1.0)
    diluted = sample & np.isfinite(mean) & (np.abs(scale - 1) > 1e-9)
    if method.concentration_refers_to is None:
        for solution in np.flatnonzero(diluted).tolist():
            line = readings.line[solutions.rows[solution]]
            faults[solution].append(
                f"line {line}: nothing says whether the instrument's concentration refers to the vessel or to the "
                f"sample: state concentration_refers_to: vessel, or sample"
            )
        mean = np.where(diluted, np.nan, mean)
    elif method.concentration_refers_to == "sample":
        mean = mean * scale
    return mean, faults


def _with_identity(calibrations: Calibrations, used: NDArray[np.int64]) -> Calibrations:
    """Add a line of intercept 0 and slope 1 for every key."""
    count, first = len(used), len(calibrations.key)
    of_key = calibrations.of_key.copy()
    of_key[used] = first + np.arange(count)
    refused = {key: said for key, said in calibrations.refused.items() if key not in set(used.tolist())}

    def longer(column: NDArray[np.float64], value: float) -> NDArray[np.float64]:
        return np.concatenate([column, np.full(count, value)])

    return replace(
        calibrations,
        key=np.concatenate([calibrations.key, used]),
        of_key=of_key,
        lines=calibrations.lines.extended(Lines.identity(count)),
        lowest=longer(calibrations.lowest, -np.inf),
        top=longer(calibrations.top, np.inf),
        top_signal=longer(calibrations.top_signal, np.nan),
        t=longer(calibrations.t, 0.0),
        least=longer(calibrations.least, np.nan),
        instrument=np.concatenate([calibrations.instrument, np.ones(count, dtype=bool)]),
        refused=refused,
    )
