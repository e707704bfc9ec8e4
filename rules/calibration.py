"""Standards of an export become calibrations, one for each analyte and channel; samples are read back from them.

External calibration: y = a + b x over ≥ 3 distinct nominal concentrations. Standards, blanks and check standards
are undiluted. Says nothing of additions.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Role
from rules import line, variance
from rules.interval import Covariance, student_t
from rules.substances import concentrations

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.blanks import Keys
    from rules.line import Floats, Integers, Lines
    from rules.method import Method, VarianceModel
    from rules.solutions import Solutions

#: Distinct nominal concentrations that make a calibration; 0 is one (method, section 4).
DISTINCT_STANDARDS = 3


@dataclass(frozen=True, slots=True)
class Calibrations:
    """All calibrations of an export.

    Attributes
    ----------
    key
        int64[c], key of analyte and channel of each calibration.
    of_key
        int64[keys], index of the calibration of a key; -1 where there is none.
    solutions, nominal
        int64[s], float64[s]: the standards, those of one calibration together, and their concentrations in the
        result unit. `segments` says where each lies.
    lines
        The fits.
    lowest, top
        float64[c], concentrations of the lowest and the highest standard.
    top_signal
        float64[c], highest signal of a standard.
    t
        float64[c], Student's t.
    least, model
        Least signal that a weight was computed at, and the variance model.
    instrument
        bool[c]: no standards, but the concentrations that the instrument computed.
    refused
        Key to the sentences of why its standards make no calibration.
    """

    key: Integers
    of_key: Integers
    solutions: Integers
    nominal: Floats
    segments: line.Segments
    lines: Lines
    lowest: Floats
    top: Floats
    top_signal: Floats
    t: Floats
    least: Floats
    model: VarianceModel
    instrument: NDArray[np.bool_]
    refused: dict[int, list[str]]

    def variance_at(self, signal: Floats, calibration: Integers) -> Floats:
        """Return the variance of one signal, s² h, by the calibration that each belongs to."""
        s = self.lines.residual_sd[calibration]
        return s**2 * variance.at(signal, self.least[calibration], self.model)

    @property
    def covariance(self) -> Covariance:
        """Covariance of intercept and slope; NaN where the standards show no scatter at the export's resolution."""
        shown = np.where(self.lines.scatter, 1.0, np.nan)
        return Covariance(self.lines.var_intercept * shown, self.lines.covariance * shown, self.lines.var_slope * shown)


def nominal_of(readings: Readings, rows: Integers, method: Method) -> tuple[Floats, dict[int, str]]:
    """Return nominal concentrations in the unit of the vessel, and of which places they cannot be converted and why."""
    nominal, reasons = concentrations(readings, readings.nominal, rows, method)
    return nominal, {place: f"nominal: {reason}" for place, reason in reasons.items()}


def calibrate(
    readings: Readings, solutions: Solutions, keys: Keys, floor: variance.Floor, method: Method
) -> Calibrations:
    """Fit a line through the standards of every analyte and channel that has enough of them.

    `floor` holds the least signal of a weight for each key.

    A standard with a faulty cell spoils its calibration: the lost point may be the one that shows a fault, so nothing
    is calibrated around it.
    """
    standard = np.flatnonzero(readings.role[solutions.rows] == Role.STANDARD)
    rows = solutions.rows[standard]
    nominal, problems = nominal_of(readings, rows, method)
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    refused = _refusals(readings, solutions, standard, key, nominal, problems)
    order = np.argsort(key, kind="stable")
    standard, nominal, key = standard[order], nominal[order], key[order]
    distinct = _distinct(key, nominal, keys.count)
    usable = (distinct >= DISTINCT_STANDARDS) & ~np.isin(np.arange(keys.count), list(refused))
    for few in np.flatnonzero((distinct > 0) & (distinct < DISTINCT_STANDARDS)).tolist():
        refused.setdefault(few, []).append(
            f"{distinct[few]} distinct standards, and a calibration needs {DISTINCT_STANDARDS}"
        )
    keep = usable[key] if len(key) else np.zeros(0, dtype=bool)
    standard, nominal, key = standard[keep], nominal[keep], key[keep]
    present, sizes = np.unique(key, return_counts=True)
    segments = line.Segments.of_sizes(sizes)
    ones, zeros = np.ones(len(standard)), np.zeros(len(standard))
    signal = solutions.signal[standard]
    weighted = variance.fit(nominal, signal, ones, zeros, floor.of(present), method.variance, segments)
    lines = weighted.lines
    of_key = np.full(keys.count, -1, dtype=np.int64)
    of_key[present] = np.arange(len(present))
    _refuse_flat(lines, present, of_key, refused)
    return Calibrations(
        key=present,
        of_key=of_key,
        solutions=standard,
        nominal=nominal,
        segments=segments,
        lines=lines,
        lowest=segments.min(nominal),
        top=segments.max(nominal),
        top_signal=segments.max(solutions.signal[standard]),
        t=student_t(method.confidence, lines.dof),
        least=weighted.least,
        model=method.variance,
        instrument=np.zeros(len(present), dtype=bool),
        refused=refused,
    )


def _refusals(
    readings: Readings,
    solutions: Solutions,
    standard: Integers,
    key: Integers,
    nominal: Floats,
    problems: dict[int, str],
) -> dict[int, list[str]]:
    refused: dict[int, list[str]] = {}
    for place in np.flatnonzero(~np.isfinite(nominal) | ~np.isfinite(solutions.signal[standard])).tolist():
        solution = int(standard[place])
        at = f"line {readings.line[solutions.rows[solution]]}"
        sentences = solutions.faults.get(solution) or [
            f"{at}: {problems.get(place, 'a standard without nominal or signal')}"
        ]
        refused.setdefault(int(key[place]), []).extend(sentences)
    for place, index in enumerate(standard.tolist()):
        if index in solutions.faults and int(key[place]) not in refused:
            refused[int(key[place])] = list(solutions.faults[index])
    return refused


def _distinct(key: Integers, nominal: Floats, count: int) -> NDArray[Any]:
    """Count the distinct finite nominals of each key; `key` is sorted."""
    finite = np.isfinite(nominal)
    # 0.7 mg/L and 700 µg/L differ in their last bit and are one standard
    nominal = np.array([float(f"{value:.12g}") for value in nominal.tolist()])
    pairs = np.unique(np.column_stack((key[finite].astype(float), nominal[finite])), axis=0)
    return np.bincount(pairs[:, 0].astype(np.int64), minlength=count)


def _refuse_flat(lines: Lines, present: Integers, of_key: Integers, refused: dict[int, list[str]]) -> None:
    """A calibration that does not rise reads nothing back."""
    for place in np.flatnonzero(~(lines.slope > 0)):
        key = int(present[place])
        of_key[key] = -1
        refused.setdefault(key, []).append("the standards' signal does not rise with concentration")
