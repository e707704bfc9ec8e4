"""What a read-back can tell from nothing: decision limit, limit of detection, limit of quantification.

    L_C = t(0.99, n - 1) s_B √(1 + 1/n) / b,   LOD = 2 L_C,   LOQ = 10 s_B / b

from n ≥ 7 independent preparations of the blank and the slope b of the calibration, in the vessel. L. A. Currie,
Anal. Chem. 40 (1968) 586; the t of 99 % and the seven preparations as in 40 CFR 136, appendix B. What the laboratory
states goes before what the blanks of one day show.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import stdtrit

from rules.substances import of_analytes

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.blanks import Blanks, Keys
    from rules.calibration import Calibrations
    from rules.line import Floats
    from rules.method import Method

#: Preparations of the blank that a decision limit rests on.
LEAST_PREPARATIONS = 7


@dataclass(frozen=True, slots=True)
class DetectionLimits:
    """Limits of each analyte and channel, as concentration in the vessel.

    Attributes
    ----------
    decision, lod, loq
        float64[keys]; NaN where nobody knows them.
    stated
        bool[keys]: the limit of quantification is the laboratory's own.
    blanks
        int64[keys], preparations of the blank behind the limits; 0 where they are the laboratory's.
    """

    decision: Floats
    lod: Floats
    loq: Floats
    stated: NDArray[np.bool_]
    blanks: NDArray[np.int64]


def evaluate(
    readings: Readings, blanks: Blanks, calibrations: Calibrations, keys: Keys, method: Method
) -> DetectionLimits:
    """Find the limits of every analyte and channel."""
    n = np.where(blanks.count >= LEAST_PREPARATIONS, blanks.count, np.nan)
    slope = np.full(keys.count, np.nan)
    has = calibrations.of_key >= 0
    slope[has] = calibrations.lines.slope[calibrations.of_key[has]]
    with np.errstate(invalid="ignore", divide="ignore"):
        known = np.where(blanks.sd > 0, blanks.sd, np.nan) / slope
        decision = stdtrit(n - 1, 0.99) * known * np.sqrt(1 + 1 / n)
        loq = np.where(np.isfinite(n), 10 * known, np.nan)
    stated_lod, stated_loq = (np.repeat(of_analytes(readings, method, name), keys.channels) for name in ("lod", "loq"))
    of_blanks = np.isfinite(decision) & np.isnan(stated_lod)
    return DetectionLimits(
        decision=np.where(np.isfinite(stated_lod), stated_lod / 2, decision),
        lod=np.where(np.isfinite(stated_lod), stated_lod, 2 * decision),
        loq=np.where(np.isfinite(stated_loq), stated_loq, loq),
        stated=np.isfinite(stated_loq),
        blanks=np.where(of_blanks, blanks.count, 0).astype(np.int64),
    )
