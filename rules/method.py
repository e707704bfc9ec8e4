"""What the laboratory decided: everything that calculating needs besides the readings, as plain values.

Made from settings and layouts by the watcher; nothing here knows how they are written.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

from rules import units

if TYPE_CHECKING:
    from collections.abc import Mapping

    from rules.limits import CheckLimits

Report = Literal["additions", "calibration", "automatic"]
BlankUse = Literal["subtract", "preparation", "none"]
VarianceModel = Literal["constant", "proportional", "counting"]
AddedRefersTo = Literal["vessel", "aliquot", "nominal"]


@dataclass(frozen=True, slots=True)
class Measure:
    """A number with its unit, as the settings state it."""

    value: float
    unit: str

    def __str__(self) -> str:
        """Write it as people do."""
        return f"{self.value:g} {self.unit}".strip()


@dataclass(frozen=True, slots=True)
class Stock:
    """A standard solution that additions are made from.

    Attributes
    ----------
    contains
        Analyte to concentration.
    valid_from, valid_until
        Seconds since 1970-01-01 in the laboratory's local time; None where open. Both ends belong to it.
    relative_uncertainty
        Standard uncertainty of the concentrations, as a fraction; None where not stated.
    """

    name: str
    contains: Mapping[str, Measure]
    lot: str = ""
    valid_from: float | None = None
    valid_until: float | None = None
    relative_uncertainty: float | None = None


@dataclass(frozen=True, slots=True)
class Preparation:
    """Scatter of whole preparations, known from the laboratory's own work.

    Attributes
    ----------
    rsd
        Relative standard deviation of the signal of a preparation, as a fraction.
    dof
        Degrees of freedom behind it.
    """

    rsd: float
    dof: float


@dataclass(frozen=True, slots=True)
class Bench:
    """How solutions are prepared where the export does not say it row by row.

    Attributes
    ----------
    aliquot, made_up_to
        Volume of sample in the vessel and of the vessel. Without `made_up_to` the standard goes on top.
    levels
        Name of a level to a volume of stock or a concentration.
    predilution
        Factor from aliquot to sample.
    tolerances
        ``aliquot``, ``spike_volume``, ``made_up_to``, ``predilution``: half-widths, in a unit of volume or in %.
    preparation
        Scatter of preparations, or None.
    """

    aliquot: Measure | None = None
    made_up_to: Measure | None = None
    levels: Mapping[str, Measure] = field(default_factory=dict)
    predilution: float = 1.0
    tolerances: Mapping[str, Measure] = field(default_factory=dict)
    preparation: Preparation | None = None


@dataclass(frozen=True, slots=True)
class AnalyteRules:
    """What holds for one analyte only.

    Attributes
    ----------
    linear_to
        Concentration in the vessel up to which the response is proved linear.
    proved_on
        When that was proved, as written.
    loq
        The laboratory's limit of quantification.
    limits
        Check to limits, before those that hold for all analytes.
    """

    linear_to: Measure | None = None
    proved_on: str = ""
    loq: Measure | None = None
    limits: Mapping[str, CheckLimits] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Method:
    """The laboratory's decisions for the exports of one layout.

    Attributes
    ----------
    report
        Which result is reported for a spiked sample.
    blank
        What is done with blanks; None where the settings do not say it.
    export_unit, result_unit
        Unit of concentrations that state none, and of results.
    variance
        How the scatter of a signal goes with it.
    confidence
        Of intervals, as a fraction.
    added_refers_to
        What an added concentration in the export refers to; None where not declared.
    spiked_at
        ``before preparation`` or ``after preparation``.
    repeats
        ``new attempt``, ``same series`` or ``refuse``.
    limits
        Check to limits, as the laboratory stated them.
    """

    report: Report
    export_unit: str
    result_unit: str
    blank: BlankUse | None = None
    stocks: tuple[Stock, ...] = ()
    bench: Bench = field(default_factory=Bench)
    analytes: Mapping[str, AnalyteRules] = field(default_factory=dict)
    limits: Mapping[str, CheckLimits] = field(default_factory=dict)
    variance: VarianceModel = "constant"
    confidence: float = 0.95
    added_refers_to: AddedRefersTo | None = None
    spiked_at: Literal["before preparation", "after preparation"] = "before preparation"
    repeats: Literal["new attempt", "same series", "refuse"] = "new attempt"

    @property
    def solid(self) -> bool:
        """Whether results are contents of a solid, mass per mass."""
        return units.same_kind(self.result_unit, units.MASS_FRACTION)

    @property
    def vessel_unit(self) -> str:
        """Unit of concentrations in the vessel: that of results, or mg/L where results are contents of a solid."""
        return units.CONCENTRATION if self.solid else self.result_unit

    def analyte(self, name: str) -> AnalyteRules:
        """Return what holds for an analyte; nothing particular where nothing is stated."""
        return self.analytes.get(name, AnalyteRules())
