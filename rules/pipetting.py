"""A pipetting plan: which solutions to prepare so that a repeated standard addition says as much as it can.

The line is y = β(C + A) with scatter of a stated variance model. For additions A_i with weights w_i the variance of
C = α/β follows from the covariance of the weighted line (W. E. Deming, Statistical Adjustment of Data, 1943):
u_C² = s²[1/Σw + (C + Ā)²/S_AA], weighted means. For constant scatter two clusters, unspiked and top, in the ratio
(T + C) : C are best; one solution halfway shows gross curvature. How solutions are shared out is found by trying all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from scipy import special

from rules.figures import figure
from rules.substances import of_analytes

if TYPE_CHECKING:
    from rules.case import Case
    from rules.method import Pipette

#: Additions beyond so many times the native level gain little: (C + Ā)²/S_AA falls no further.
MOST_OF_NATIVE = 3.0
#: Least top addition, in native levels, for which a plan is worth its vials.
LEAST_OF_NATIVE = 0.5
#: Predilutions that a bench makes in one step.
PREDILUTIONS = (1.0, 2.0, 4.0, 5.0, 10.0, 20.0, 25.0, 50.0, 100.0)
#: Vials of a plan, unless the series had more.
VIALS = 5
#: Most that a standard on top may add to the aliquot.
ON_TOP = 0.1
#: A plan is refused where no finite interval is more likely than this.
MOST_UNBOUNDED = 0.05
#: Scatter relative to the highest signal that is assumed at least: two degrees of freedom may show less by luck.
LEAST_SCATTER = 0.005
#: Failed checks that new solutions can settle.
SETTLED = frozenset(
    ("recovery", "slope_certainty", "addition_size", "levels", "linear_evidence", "curvature", "lack_of_fit",
     "correlation", "residual", "spike_size", "stock")
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class Need:
    """What a plan must serve.

    Attributes
    ----------
    native, linear_to
        C in the aliquot without predilution, and the highest proved concentration in the vessel (NaN where none).
    aliquot, made_up_to
        mL; no `made_up_to`: the standard goes on top.
    stock
        Concentration of the stock, in the unit of `native`.
    scatter
        s as a concentration in the aliquot (constant), or as a fraction (proportional).
    proportional
        Whether the scatter goes with the signal.
    pipettes
        What the laboratory has; none: volumes are written to two digits.
    vials
        How many.
    """

    native: float
    linear_to: float
    aliquot: float
    made_up_to: float | None
    stock: float
    scatter: float
    proportional: bool = False
    pipettes: tuple[Pipette, ...] = ()
    vials: int = VIALS

    @property
    def share(self) -> float:
        """What of the vessel is sample, before the standard."""
        return self.aliquot / self.made_up_to if self.made_up_to else 1.0

    @property
    def room(self) -> float:
        """Most stock that a vessel takes, mL."""
        return self.made_up_to - self.aliquot if self.made_up_to else ON_TOP * self.aliquot


@dataclass(frozen=True)
class PipettingPlan:
    """Solutions to prepare.

    Attributes
    ----------
    need
        What it serves.
    predilution
        Further dilution of the sample before the aliquot is taken.
    volumes
        Stock in each vial, mL, ascending; the unspiked ones first.
    """

    need: Need
    predilution: float
    volumes: tuple[float, ...]

    @property
    def native(self) -> float:
        """C in the aliquot."""
        return self.need.native / self.predilution

    @property
    def additions(self) -> tuple[float, ...]:
        """A of each vial, in the aliquot."""
        return tuple(volume * self.need.stock / self.need.aliquot for volume in self.volumes)

    @cached_property
    def _covariance(self) -> np.ndarray:
        """Covariance of intercept and slope (relative to the slope) of the weighted line."""
        a, c = np.array(self.additions), self.native
        sd = self.need.scatter * (c + a) if self.need.proportional else np.full(len(a), self.need.scatter)
        design = np.stack([np.ones_like(a), a], axis=1) / sd[:, None]
        return np.asarray(np.linalg.inv(design.T @ design))

    @cached_property
    def relative_uncertainty(self) -> float:
        """u_C/C that the line alone gives."""
        c = self.native
        gradient = np.array([1.0, -c])  # of α/β at β = 1, α = C
        return float(math.sqrt(gradient @ self._covariance @ gradient) / c)

    @cached_property
    def unbounded(self) -> float:
        """Probability that the slope is not told from zero, so that there is no finite interval."""
        dof = len(self.volumes) - 2
        critical, shift = special.stdtrit(dof, 0.975), 1 / math.sqrt(self._covariance[1, 1])
        return float(special.nctdtr(dof, shift, critical) - special.nctdtr(dof, shift, -critical))

    @property
    def top_in_vessel(self) -> float:
        """Highest concentration in a vessel."""
        return self.need.share * (self.native + max(self.additions))


def make_plan(need: Need) -> PipettingPlan | None:
    """Return the best plan; None where no volumes fit, or the line would too often say nothing.

    The least predilution is chosen that leaves room for a top addition of twice the native level within the proved
    range; the top addition is then as large as the range, the vessel and three native levels allow.
    """
    if not (need.native > 0 and need.stock > 0 and need.aliquot > 0 and need.scatter > 0):
        return None
    for wish in (2.0, 1.0, LEAST_OF_NATIVE):
        for predilution in PREDILUTIONS:
            native = need.native / predilution
            top = min(_highest(need, native), MOST_OF_NATIVE * native)
            if top >= wish * native and (plan := _with_top(need, predilution, top)) is not None:
                return plan
    return None


def _highest(need: Need, native: float) -> float:
    """Return the largest top addition that the proved range and the vessel allow."""
    by_room = need.room * need.stock / need.aliquot
    if math.isnan(need.linear_to):
        return by_room
    return min(by_room, need.linear_to / need.share - native)


def _with_top(need: Need, predilution: float, top: float) -> PipettingPlan | None:
    volume = _pipetted(top * need.aliquot / need.stock, need.pipettes)
    middle = _pipetted(volume / 2, need.pipettes) if volume else None
    if not volume or not middle or middle >= volume or volume > need.room:
        return None
    shared = need.vials - 1
    plans = [
        PipettingPlan(need, predilution, (*[0.0] * unspiked, middle, *[volume] * (shared - unspiked)))
        for unspiked in range(1, shared)
    ]
    best = min(plans, key=lambda plan: plan.relative_uncertainty)
    return best if best.unbounded <= MOST_UNBOUNDED else None


def _pipetted(volume: float, pipettes: tuple[Pipette, ...]) -> float | None:
    """Return the largest volume not above the wanted one that can be set; None where no pipette reaches it."""
    if not pipettes:
        digits = 1 - math.floor(math.log10(volume)) if volume > 0 else 0
        return float(math.floor(volume * 10**digits + 1e-9) / 10**digits)
    settable: list[float] = [
        pipette.least + math.floor((min(volume, pipette.most) - pipette.least) / pipette.step + 1e-9) * pipette.step
        for pipette in pipettes
        if pipette.least <= volume * (1 + 1e-9)
    ]
    return max(settable, default=None)


def plan_for(case: Case, i: int) -> PipettingPlan | None:
    """Return a plan for the solutions of a series; None where something that it needs is not known."""
    if case.method.solid or case.fits.of_series[i] < 0:
        return None
    at = int(case.fits.of_series[i])
    members = case.series.members_of(i)
    vessels, slope = case.vessels, float(case.fits.lines.slope[at])
    aliquots, vessel_volumes = _only(vessels.aliquot[members]), _only(vessels.made_up_to[members])
    spiked = [m for m in members.tolist() if vessels.by_volume[m] and vessels.spike_volume[m] > 0]
    f = vessels.dilution[members]
    if aliquots is None or not spiked or slope <= 0 or not np.isfinite(f).all():
        return None
    first = spiked[0]
    stock = float(vessels.addition[first] * vessels.aliquot[first] / vessels.spike_volume[first])
    by_line, top = float(case.additions.value[i] / vessels.predilution[members].max()), float(case.top_addition[i])
    # in a matrix that changes the response the line's own C is the better one, if it has a finite interval
    native = by_line if math.isfinite(by_line) and by_line > 0 else float(case.native[i])
    proportional = case.method.variance == "proportional"
    residual = float(case.fits.lines.residual_sd[at])
    scatter = residual if proportional else residual / (slope * float(f.mean()))
    least = LEAST_SCATTER * (1.0 if proportional else native + top)
    return make_plan(
        Need(
            native=native,
            linear_to=_proved(case, i),
            aliquot=aliquots,
            made_up_to=vessel_volumes,
            stock=stock,
            scatter=max(scatter, least) if math.isfinite(scatter) else least,
            proportional=proportional,
            pipettes=case.method.bench.pipettes,
            vials=max(VIALS, len(members)),
        )
    )


def _only(values: np.ndarray) -> float | None:
    """Return the one value that all have; None where they differ or are not known."""
    distinct = np.unique(values)
    return float(distinct[0]) if len(distinct) == 1 and np.isfinite(distinct[0]) else None


def _proved(case: Case, i: int) -> float:
    """Return up to which concentration in the vessel the response is proved: as stated, else the top standard."""
    stated = of_analytes(case.readings, case.method, "linear_to")[case.series.analyte[i]]
    calibration = int(case.back.calibration[i])
    top = float(case.calibrations.top[calibration]) if calibration >= 0 else math.nan
    return top if math.isnan(stated) else float(stated)


def sentence(plan: PipettingPlan, unit: str) -> str:
    """Say a plan in one sentence for the bench."""
    need = plan.need
    unspiked = plan.volumes.count(0.0)
    counts = {volume: plan.volumes.count(volume) for volume in plan.volumes if volume}
    spiked = " and ".join(f"{_vials(count)} with {volume:g} mL of the stock" for volume, count in counts.items())
    first = f"Dilute the sample 1 in {plan.predilution:g} first. " if plan.predilution > 1 else ""
    vessel = f", made up to {need.made_up_to:g} mL" if need.made_up_to else ", the stock on top"
    return (
        f"{first}Prepare {_vials(unspiked)} unspiked, {spiked}, each with {need.aliquot:g} mL of sample{vessel}: "
        f"the top addition is {figure(max(plan.additions))} {unit} in the aliquot. With today's scatter the line then "
        f"gives the concentration to {figure(100 * plan.relative_uncertainty, 2)} % (standard uncertainty)."
    )


def _vials(count: int) -> str:
    return f"{count} vial{'s' if count != 1 else ''}"


def plain(plan: PipettingPlan, unit: str) -> dict[str, Any]:
    """Return a plan as JSON values."""
    need = plan.need
    counts = {volume: plan.volumes.count(volume) for volume in plan.volumes}
    added = dict(zip(plan.volumes, plan.additions, strict=True))
    return {
        "predilution": plan.predilution,
        "aliquot": {"value": need.aliquot, "unit": "mL"},
        "made_up_to": None if need.made_up_to is None else {"value": need.made_up_to, "unit": "mL"},
        "solutions": [
            {"vials": count, "spike_volume": {"value": volume, "unit": "mL"}, "added_to_aliquot": added[volume]}
            for volume, count in counts.items()
        ],
        "unit": unit,
        "relative_uncertainty": 100 * plan.relative_uncertainty,
        "sentence": sentence(plan, unit),
    }
