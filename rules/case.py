"""Everything computed about an export, in one place: what checks judge and what results are written from."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules import bracket
from rules.exceptions import LimitClasses

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.additions import Fits
    from rules.blanks import Blanks, Keys
    from rules.bracket import Brackets
    from rules.calibration import Calibrations
    from rules.check_standards import CheckStandards
    from rules.detection_limits import DetectionLimits
    from rules.dilutions import Dilutions
    from rules.interval import Interval
    from rules.line import Floats, Integers
    from rules.method import Method
    from rules.reading_back import ReadBack
    from rules.recovery import Recoveries
    from rules.result import Results
    from rules.seen import Seen
    from rules.series import Series
    from rules.solutions import Solutions
    from rules.spiked_blanks import SpikedBlanks
    from rules.vessels import Vessels


#: Without a limit of quantification, readings below so many times the blanks' signal scatter by nature (method, 8).
BLANK_MULTIPLE = 10


class Reported(IntEnum):
    """Which result of a series is reported."""

    ADDITIONS = 1
    CALIBRATION = 2


#: A residual is taken in percent of the fitted signal, but of no less than this fraction of the series' highest: a
#: native near zero has no percentage worth the name.
LEAST_OF_HIGHEST = 0.1


@dataclass(frozen=True)
class Case:
    """One export, computed and not yet judged.

    Arrays have one entry for each series unless said otherwise.

    Attributes
    ----------
    key
        Analyte and channel of each series.
    fits, additions, interval
        Lines, results and (for each fit) the interval with g.
    u_line
        Standard uncertainty of the line's share, in the sample.
    back
        Calibration results.
    seen
        What is read back from, and from what.
    reported
        Codes of `Reported`.
    faults
        Series to the sentences of what its inputs lack.
    """

    readings: Readings
    method: Method
    solutions: Solutions
    vessels: Vessels
    series: Series
    keys: Keys
    key: Integers
    blanks: Blanks
    fits: Fits
    additions: Results
    interval: Interval
    u_line: Floats
    seen: Seen
    check_standards: CheckStandards
    spiked_blanks: SpikedBlanks
    dilutions: Dilutions
    back: ReadBack
    recoveries: Recoveries
    reported: NDArray[np.int8]
    faults: dict[int, list[str]]

    def __len__(self) -> int:
        """Return the number of series."""
        return len(self.series)

    @property
    def calibrations(self) -> Calibrations:
        """The calibrations, by standards or by the instrument."""
        return self.seen.calibrations

    @property
    def limits(self) -> DetectionLimits:
        """Limits of detection and quantification by analyte and channel."""
        return self.seen.limits

    @cached_property
    def limit_classes(self) -> LimitClasses:
        """Which limits hold for each series."""
        readings, series = self.readings, self.series
        return LimitClasses.of(self.method, readings.sample, readings.analyte, series.sample, series.analyte)

    @cached_property
    def relative_residuals(self) -> Floats:
        """Residual of each point of the fits in percent of its fitted signal, of no less than a tenth of the highest.

        Each stands for the solution ``series.members[fits.places]``.
        """
        fits = self.fits
        with np.errstate(invalid="ignore", divide="ignore"):
            fitted = np.abs(fits.fitted_gross)
            least = LEAST_OF_HIGHEST * fits.segments.spread(fits.segments.max(fitted))
            return np.asarray(100 * (fits.net - fits.fitted_gross) / np.maximum(fitted, least))

    @cached_property
    def brackets(self) -> Brackets:
        """The check standards before, between and after each series."""
        return bracket.find(self.readings, self.solutions, self.series, self.key, self.check_standards, self.keys)

    @cached_property
    def open_brackets(self) -> dict[int, str]:
        """Series whose bracket nothing opens or closes, with the sentence that says so."""
        found = self.brackets
        sentences = {}
        for i in np.flatnonzero(found.wanted & ~(found.opened & found.closed)).tolist():
            if not found.opened[i]:
                sentences[i] = "no check standard and no calibration was measured before it: the bracket is open"
                continue
            row = int(self.solutions.rows[found.opened_by[i]])
            of = f" of {self.readings.origin[row]}" if self.readings.origin[row] else ""
            place = f"on line {self.readings.line[row]}{of}"
            sentences[i] = f"no check standard was measured after it, the last one is {place}"
            if self.readings.role[row] == Role.STANDARD:
                sentences[i] = f"no check standard was measured after it; the calibration ended {place}"
        return sentences

    @cached_property
    def large_enough(self) -> NDArray[np.bool_]:
        """Solutions whose readings are high enough for a relative scatter or difference to mean something.

        Above the limit of quantification; without one above ten times the blanks' signal.
        """
        rows = self.solutions.rows
        key = self.keys.code(self.readings.analyte.codes[rows], self.readings.channel.codes[rows])
        at = self.calibrations.of_key[key]
        lines = self.calibrations.lines
        threshold = BLANK_MULTIPLE * np.abs(self.seen.blanks.mean[key])
        if len(lines.slope):
            by_loq = lines.intercept[at] + lines.slope[at] * self.limits.loq[key]
            threshold = np.where((at >= 0) & np.isfinite(by_loq), by_loq, threshold)
        with np.errstate(invalid="ignore"):
            return np.asarray(np.isnan(threshold) | (self.seen.solutions.signal > threshold), dtype=bool)

    @cached_property
    def native(self) -> Floats:
        """Best estimate of what the sample brings to the aliquot: by calibration where there is one.

        Below zero or not detected it counts as measured.
        """
        per_aliquot = self.series.segments.max(self.vessels.predilution[self.series.members])
        by_calibration = self.back.results.value / per_aliquot
        return np.where(np.isfinite(by_calibration), by_calibration, self.additions.value / per_aliquot)

    @cached_property
    def top_addition(self) -> Floats:
        """Largest A of each series; NaN where there is none."""
        a = np.where(self.series.spiked, self.vessels.addition[self.series.members], -np.inf)
        top = self.series.segments.max(a)
        return np.where(np.isfinite(top) & (top > 0), top, np.nan)

    @property
    def judged(self) -> NDArray[np.bool_]:
        """Series that additions were made to and that hold an unspiked solution."""
        return self.series.has_additions & self.series.has_native

    def reported_value(self) -> Floats:
        """Return the value that each series reports."""
        return np.where(self.reported == Reported.ADDITIONS, self.additions.value, self.back.results.value)

    def analyte(self, series: int) -> str:
        """Return the name of a series' analyte."""
        return self.readings.analyte.names[int(self.series.analyte[series])]

    def sample(self, series: int) -> str:
        """Return a series' sample."""
        return self.readings.sample.names[int(self.series.sample[series])]

    def channel(self, series: int) -> str | None:
        """Return a series' channel, None where there is none."""
        code = int(self.series.channel[series])
        return None if code < 0 else self.readings.channel.names[code]

    def name(self, series: int) -> str:
        """Return sample and analyte, as people call a series."""
        channel = self.channel(series)
        return f"{self.sample(series)} {self.analyte(series)}" + (f" {channel}" if channel else "")

    def label(self, solution: int) -> str:
        """Return the label of a solution; one that another export lends says so."""
        row = int(self.solutions.rows[solution])
        label, origin = self.readings.label[row] or "", self.readings.origin[row]
        return f"{label} of {origin}" if origin else label

    def lines_of(self, solutions: list[int]) -> list[int]:
        """Return the lines of solutions in this export; those that another one lends have none here."""
        own = self.readings.origin.codes < 0
        return sorted(
            {int(self.readings.line[row]) for s in solutions for row in self.solutions.rows_of(s) if own[row]}
        )

    def series_lines(self, series: int) -> list[int]:
        """Return the export lines of a series."""
        return self._lines_of_series[series]

    @cached_property
    def _lines_of_series(self) -> list[list[int]]:
        """Export lines of every series: nearly every check rests on all of them."""
        rows, sizes = self._rows_of_members
        of_series = np.repeat(self.series.segments.owner, sizes)
        own = self.readings.origin.codes[rows] < 0
        rows, of_series = rows[own], of_series[own]
        lines = self.readings.line[rows]
        order = np.lexsort((lines, of_series))
        lines, of_series = lines[order], of_series[order]
        new = np.ones(len(lines), dtype=bool)
        new[1:] = (lines[1:] != lines[:-1]) | (of_series[1:] != of_series[:-1])
        counts = np.bincount(of_series[new], minlength=len(self))
        return [part.tolist() for part in np.split(lines[new], np.cumsum(counts)[:-1])]

    @property
    def _rows_of_members(self) -> tuple[Integers, Integers]:
        """All rows of the members of all series, and how many each member has."""
        starts, sizes = (
            column[self.series.members] for column in (self.solutions.segments.starts, self.solutions.segments.sizes)
        )
        offsets = np.repeat(starts - np.concatenate(([0], np.cumsum(sizes)[:-1])), sizes) if len(sizes) else starts
        return self.solutions.members[offsets + np.arange(int(sizes.sum()))], sizes
