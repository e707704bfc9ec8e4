"""A result with its uncertainty, for all series at once: value, u, U, k, interval, and why there is no number."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.line import Floats


#: Below so many effective degrees of freedom a fixed k = 2 says too much (method, 3).
LEAST_DOF_OF_FIXED_FACTOR = 10.0


@dataclass(frozen=True, slots=True)
class Share:
    """One component of a budget.

    Attributes
    ----------
    component
        What it is: ``line``, ``blank``, ``stock`` …
    standard_uncertainty
        float64[m], in the unit of the result; NaN where it matters and nobody stated it.
    dof
        float64[m], degrees of freedom; infinite where it was estimated otherwise than from repeats.
    """

    component: str
    standard_uncertainty: Floats
    dof: Floats


@dataclass(frozen=True, slots=True)
class Results:
    """One result for each series, in the unit of results, in the sample as received.

    Attributes
    ----------
    value, low, high
        float64[m]; NaN where there is no number or no finite interval.
    standard_uncertainty, expanded_uncertainty, coverage_factor
        float64[m]; NaN where the uncertainty is absent.
    dof
        float64[m], degrees of freedom of the line's share.
    detected
        bool[m]: False where the line alone cannot exclude zero, or a read-back stays below its decision limit.
    effective_dof
        float64[m], Welch and Satterthwaite's degrees of freedom of u, for information.
    less_than
        float64[m], what a result that is not detected is less than: the upper end of its interval, or the limit of
        detection.
    budget
        The components.
    reasons
        Series to the sentence of why there is no number, or no uncertainty.
    """

    value: Floats
    low: Floats
    high: Floats
    standard_uncertainty: Floats
    expanded_uncertainty: Floats
    coverage_factor: Floats
    dof: Floats
    detected: NDArray[np.bool_]
    less_than: Floats
    effective_dof: Floats
    budget: tuple[Share, ...] = ()
    reasons: dict[int, str] = field(default_factory=dict)

    def symmetric(self, series: int) -> bool:
        """Whether ± says the truth: the halves of the interval differ by no more than 25 %."""
        below, above = self.value[series] - self.low[series], self.high[series] - self.value[series]
        larger = max(below, above)
        return bool(np.isfinite(larger) and larger > 0 and abs(above - below) <= 0.25 * larger)


def combine(shares: tuple[Share, ...], t: tuple[Floats, ...]) -> tuple[Floats, Floats, Floats]:
    """Return u, U and k = U/u of a budget: U = √Σ(t(ν_i) u_i)².

    Components that nobody stated (NaN) are left out of both; they are listed as absent where the budget is shown.
    The line's share comes first: where it is absent there is no uncertainty at all.
    """
    line = shares[0].standard_uncertainty
    uncertainties = [line, *(np.nan_to_num(share.standard_uncertainty) for share in shares[1:])]
    with np.errstate(invalid="ignore", divide="ignore"):
        u = np.sqrt(sum((part**2 for part in uncertainties), np.zeros(len(line))))
        expanded = np.sqrt(
            sum(((q * part) ** 2 for q, part in zip(t, uncertainties, strict=True)), np.zeros(len(line)))
        )
        return u, expanded, np.where(u > 0, expanded / u, np.nan)


def effective_dof(shares: tuple[Share, ...], u: Floats) -> Floats:
    """Return Welch and Satterthwaite's degrees of freedom of u: ν = u⁴ / Σ u_i⁴/ν_i.

    JCGM 100:2008, G.4.1. For information, and to allow a fixed coverage factor: U does not rest on them.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        limited = sum(
            (
                np.nan_to_num(share.standard_uncertainty) ** 4 / np.where(share.dof > 0, share.dof, np.inf)
                for share in shares
            ),
            np.zeros(len(u)),
        )
        return np.where(np.isfinite(u) & (u > 0), u**4 / limited, np.nan)


def with_fixed_factor(
    shares: tuple[Share, ...], u: Floats, expanded: Floats, k: Floats, fixed: float | None
) -> tuple[Floats, Floats]:
    """Return U and k with the laboratory's fixed factor where ten effective degrees of freedom allow it."""
    if fixed is None:
        return expanded, k
    allowed = effective_dof(shares, u) >= LEAST_DOF_OF_FIXED_FACTOR
    return np.where(allowed, fixed * u, expanded), np.where(allowed, fixed, k)
