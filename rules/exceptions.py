"""Limits that differ for some samples: which ones hold for each series of an export.

The first exception that a sample matches and that states a check decides on it; then the analyte's own limits, the
laboratory's, the defaults.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules.limits import DEFAULTS, RECOVERY_AFTER_PREPARATION

if TYPE_CHECKING:
    import re
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from parsers.readings import Texts
    from rules.limits import CheckLimits
    from rules.method import Method


@dataclass(frozen=True, slots=True)
class LimitException:
    """Limits for the samples that a pattern finds.

    Attributes
    ----------
    samples
        Searched in the sample's name.
    analytes
        Analytes that it is for; empty: all.
    limits
        Check to limits.
    """

    samples: re.Pattern[str]
    analytes: frozenset[str]
    limits: Mapping[str, CheckLimits]


@dataclass(frozen=True, slots=True)
class LimitClasses:
    """Series that are judged by the same limits.

    Attributes
    ----------
    of_series
        int64[m], the class of each series.
    analyte, exceptions
        Of each class: the analyte and the exceptions that hold, in the order written.
    """

    of_series: NDArray[np.int64]
    analyte: tuple[str, ...]
    exceptions: tuple[tuple[LimitException, ...], ...]

    @classmethod
    def of(
        cls, method: Method, samples: Texts, analytes: Texts, sample: NDArray[np.int32], analyte: NDArray[np.int32]
    ) -> LimitClasses:
        """Sort series by what limits hold for them.

        Parameters
        ----------
        samples, analytes
            Columns that name what the codes stand for.
        sample, analyte
            int32[m], codes of each series.
        """
        matched = np.array(
            [[one.samples.search(name) is not None for name in samples.names] for one in method.exceptions], dtype=bool
        ).reshape(len(method.exceptions), len(samples.names))
        meant = np.array(
            [[not one.analytes or name in one.analytes for name in analytes.names] for one in method.exceptions],
            dtype=bool,
        ).reshape(len(method.exceptions), len(analytes.names))
        holds = matched[:, sample] & meant[:, analyte]
        keys = np.vstack([analyte[np.newaxis, :], holds])
        distinct, of_series = np.unique(keys, axis=1, return_inverse=True)
        return cls(
            of_series.reshape(-1).astype(np.int64),
            tuple(analytes.names[code] for code in distinct[0].tolist()),
            tuple(
                tuple(one for one, held in zip(method.exceptions, column, strict=True) if held)
                for column in distinct[1:].T.tolist()
            )
            if len(method.exceptions)
            else ((),) * distinct.shape[1],
        )

    def limits(self, method: Method, check: str) -> tuple[CheckLimits, ...]:
        """Return the limits of a check for each class."""
        general = limits_of(method, self.analyte, check)
        return tuple(
            next((one.limits[check] for one in exceptions if check in one.limits), usual)
            for exceptions, usual in zip(self.exceptions, general, strict=True)
        )


def limits_of(method: Method, analytes: tuple[str, ...], check: str) -> tuple[CheckLimits, ...]:
    """Return the limits of a check for each analyte: the analyte's own, else the laboratory's, else the default."""
    default = DEFAULTS[check]
    if check == "recovery" and method.spiked_at == "after preparation":
        default = RECOVERY_AFTER_PREPARATION
    general = method.limits.get(check, default)
    return tuple(method.analyte(name).limits.get(check, general) for name in analytes)
