"""Uncertainties common to all solutions of a series, from what the settings state.

Independent errors of each vessel are already in the residuals and are not added again. A half-width a counts as
a/√3 (JCGM 100:2008, 4.3.7). What nobody stated is listed as absent, never taken as zero silently.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt
from typing import TYPE_CHECKING

import numpy as np

from rules import units

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.line import Floats
    from rules.method import Measure, Method
    from rules.series import Series
    from rules.vessels import Vessels

#: JCGM 100:2008, 4.3.7: a rectangular distribution of half-width a has the standard deviation a/√3.
RECTANGULAR = sqrt(3.0)


@dataclass(frozen=True, slots=True)
class Common:
    """One relative uncertainty common to the solutions of a series.

    Attributes
    ----------
    component
        ``stock``, ``aliquot``, ``spike_volume``, ``made_up_to`` or ``predilution``.
    relative
        float64[m], standard uncertainty as a fraction; NaN where it matters and nobody stated it; 0 where it does not
        matter.
    """

    component: str
    relative: Floats


def common(series: Series, vessels: Vessels, method: Method) -> tuple[Common, ...]:
    """Return the common uncertainties of an additions result, component by component.

    A = c_S v / V_a carries the stock's, the spike volume's and the aliquot's; the vessel volume cancels. A
    concentration that the export states carries its vessel's and aliquot's only where it must be scaled by them.
    """
    spiked = series.spiked
    members = series.members
    by_volume = _any(series, spiked & vessels.by_volume[members])
    scaled = ~by_volume & _any(series, spiked & (np.abs(vessels.dilution[members] - 1) > 1e-9))
    if method.added_refers_to == "aliquot":
        scaled &= False
    predilution = series.segments.max(vessels.predilution[members])
    tolerances = method.bench.tolerances
    smallest = _smallest_step(series, vessels)
    solid = np.full(len(series), method.solid)
    aliquot, vessel = (_smallest(series, column[members]) for column in (vessels.aliquot, vessels.made_up_to))
    nothing = np.zeros(len(series))
    return (
        Common("stock", np.where(by_volume, _stock(series, vessels, method), nothing)),
        Common("spike_volume", np.where(by_volume, _relative(tolerances.get("spike_volume"), smallest), nothing)),
        Common("aliquot", np.where(by_volume | scaled, _relative(tolerances.get("aliquot"), aliquot), nothing)),
        Common("made_up_to", np.where(scaled, _relative(tolerances.get("made_up_to"), vessel), nothing)),
        *_of_solid(solid, method),
        Common(
            "predilution",
            np.where(predilution != 1, _relative(tolerances.get("predilution"), predilution), nothing),
        ),
    )


def _of_solid(solid: NDArray[np.bool_], method: Method) -> tuple[Common, ...]:
    """Return what weighing and making up a digest adds; tolerances of these are stated in percent."""
    nothing = np.zeros(len(solid))
    return tuple(
        Common(name, np.where(solid, _relative(method.bench.tolerances.get(name), nothing + 1), nothing))
        for name in ("mass", "digest_volume")
    )


def common_of_recovery(series: Series, vessels: Vessels, method: Method) -> Floats:
    """Return Σ u² of the relative uncertainties of the added concentration c = c_S v / V that the settings state.

    The aliquot cancels here: it dilutes spiked and unspiked alike. What nobody stated counts as nothing, as in U.
    """
    members = series.members
    by_volume = _any(series, series.spiked & vessels.by_volume[members])
    tolerances = method.bench.tolerances
    smallest = _smallest_step(series, vessels)
    vessel = _smallest(series, vessels.made_up_to[members])
    parts = (
        _stock(series, vessels, method),
        _relative(tolerances.get("spike_volume"), smallest),
        _relative(tolerances.get("made_up_to"), vessel),
    )
    return np.where(by_volume, sum((np.nan_to_num(part) ** 2 for part in parts), np.zeros(len(series))), 0.0)


def common_of_read_back(series: Series, vessels: Vessels, method: Method) -> tuple[Common, ...]:
    """Return the common uncertainties of a result read back from a calibration: those of the way to the sample."""
    members = series.members
    filled = np.isfinite(vessels.made_up_to[members]) & (vessels.aliquot[members] != vessels.made_up_to[members])
    diluted = _any(series, series.unspiked & filled)
    predilution = series.segments.max(vessels.predilution[members])
    tolerances = method.bench.tolerances
    aliquot, vessel = (_smallest(series, column[members]) for column in (vessels.aliquot, vessels.made_up_to))
    nothing = np.zeros(len(series))
    return (
        *_of_solid(np.full(len(series), method.solid), method),
        Common("aliquot", np.where(diluted, _relative(tolerances.get("aliquot"), aliquot), nothing)),
        Common("made_up_to", np.where(diluted, _relative(tolerances.get("made_up_to"), vessel), nothing)),
        Common(
            "predilution",
            np.where(predilution != 1, _relative(tolerances.get("predilution"), predilution), nothing),
        ),
    )


def _any(series: Series, members: NDArray[np.bool_]) -> NDArray[np.bool_]:
    return series.segments.sum(members.astype(float)) > 0


def _smallest(series: Series, values: Floats) -> Floats:
    """Smallest finite member; an absolute tolerance weighs most on it, so this errs on the safe side."""
    lowest = series.segments.min(np.where(np.isfinite(values), values, np.inf))
    return np.where(np.isfinite(lowest), lowest, np.nan)


def _smallest_step(series: Series, vessels: Vessels) -> Floats:
    """Return the smallest volume of standard that was dispensed in each series.

    Where the standard goes on top, volumes may be totals of one vessel to which standard was added again and again: the
    error of every step counts, so the smallest step between volumes decides. That errs on the safe side for vessels of
    their own.
    """
    members, owner = series.members, series.segments.owner
    volume = vessels.spike_volume[members]
    volume = np.where(series.spiked & np.isfinite(volume), volume, np.nan)
    smallest = _smallest(series, volume)
    order = np.lexsort((volume, owner))
    steps = np.diff(volume[order])
    same = (np.diff(owner[order]) == 0) & (steps > 1e-9 * np.nan_to_num(volume[order][1:]))
    on_top = np.isnan(vessels.made_up_to[members[order][1:]])
    step = np.full(len(members), np.nan)
    step[order[1:]] = np.where(same & on_top, steps, np.nan)
    return np.fmin(smallest, _smallest(series, step))


def _stock(series: Series, vessels: Vessels, method: Method) -> Floats:
    """The largest relative uncertainty among the stocks that a series used; NaN where one states none."""
    stated = np.array(
        # zero means that nobody stated it (method, section 6)
        [s.relative_uncertainty or np.nan for s in method.stocks] + [0]
    )
    used = series.spiked & (vessels.stock[series.members] >= 0)
    return series.segments.max(np.where(used, stated[vessels.stock[series.members]], 0.0))


def _relative(tolerance: Measure | None, size: Floats) -> Floats:
    if tolerance is None or tolerance.value == 0:
        return np.full(len(size), np.nan)
    if tolerance.unit == "%":
        return np.full(len(size), tolerance.value / 100 / RECTANGULAR)
    if tolerance.unit == "":  # of a factor, such as predilution
        return tolerance.value / RECTANGULAR / size
    return units.of_measure(tolerance, units.VOLUME) / RECTANGULAR / size
