"""What results are read back from: signals as the calibrations read them, blanks, calibrations, limits of detection."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rules.blanks import Blanks
    from rules.calibration import Calibrations
    from rules.detection_limits import DetectionLimits
    from rules.solutions import Solutions


@dataclass(frozen=True, slots=True)
class Seen:
    """An export as its calibrations see it.

    Attributes
    ----------
    solutions, blanks
        Those of the export; where the instrument's concentrations stand in for standards, with those as signals.
    calibrations
        By standards or by the instrument.
    limits
        Limits of detection and quantification by analyte and channel.
    """

    solutions: Solutions
    blanks: Blanks
    calibrations: Calibrations
    limits: DetectionLimits
