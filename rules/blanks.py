"""Blanks of an export: their mean signal for each analyte and channel, and its uncertainty."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules.interval import student_t

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.line import Floats, Integers
    from rules.solutions import Solutions


@dataclass(frozen=True, slots=True)
class Keys:
    """Analyte and channel as one number: what a blank, a calibration or a check standard belongs to."""

    analytes: int
    channels: int

    @classmethod
    def of(cls, readings: Readings) -> Keys:
        """Count analytes and channels of an export."""
        return cls(len(readings.analyte.names), len(readings.channel.names) + 1)

    @property
    def count(self) -> int:
        """Number of keys."""
        return self.analytes * self.channels

    def code(self, analyte: NDArray[np.int32], channel: NDArray[np.int32]) -> Integers:
        """Return the key of codes of analyte and channel (-1: no channel)."""
        return analyte.astype(np.int64) * self.channels + channel + 1

    def split(self, key: int) -> tuple[int, int]:
        """Return the codes of analyte and channel of a key."""
        return key // self.channels, key % self.channels - 1


@dataclass(frozen=True, slots=True)
class Blanks:
    """Mean blank of each key.

    Attributes
    ----------
    solutions
        int64[b], the blank solutions; `key` says what each belongs to.
    mean, sd
        float64[keys], mean signal y_B; standard deviation between blank solutions; NaN where there is none.
    count
        float64[keys].
    variance
        float64[keys], t_B² u²(y_B) for the confidence; NaN with a single blank, whose scatter nobody knows.
    standard_uncertainty
        float64[keys], u(y_B).
    """

    solutions: Integers
    key: Integers
    mean: Floats
    sd: Floats
    count: Floats
    variance: Floats
    standard_uncertainty: Floats


def collect(readings: Readings, solutions: Solutions, keys: Keys, confidence: float) -> Blanks:
    """Average the blanks of each analyte and channel."""
    blank = np.flatnonzero(readings.role[solutions.rows] == Role.BLANK)
    rows = solutions.rows[blank]
    key = keys.code(readings.analyte.codes[rows], readings.channel.codes[rows])
    y = solutions.signal[blank]
    count = np.bincount(key, minlength=keys.count).astype(float)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.bincount(key, weights=y, minlength=keys.count) / np.where(count > 0, count, np.nan)
        squares = np.bincount(key, weights=(y - mean[key]) ** 2, minlength=keys.count)
        sd = np.sqrt(squares / np.where(count > 1, count - 1, np.nan))
        uncertainty = sd / np.sqrt(count)
        t = student_t(confidence, count - 1)
    return Blanks(blank, key, mean, sd, count, (t * uncertainty) ** 2, uncertainty)
