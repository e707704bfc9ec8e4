"""What the laboratory decided: everything that calculating needs besides the readings, as plain values.

Made from settings and layouts by the watcher; nothing here knows how they are written.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

from rules import units

if TYPE_CHECKING:
    from collections.abc import Mapping

    from rules.exceptions import LimitException
    from rules.limits import CheckLimits

Report = Literal["additions", "calibration", "automatic"]
BlankUse = Literal["subtract", "preparation", "none"]
VarianceModel = Literal["constant", "proportional", "counting"]
AddedRefersTo = Literal["vessel", "aliquot", "nominal"]
Reference = Literal["per vessel", "diluted with the sample"]


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
class Pipette:
    """A pipette: the volumes that can be set, in mL."""

    least: float
    most: float
    step: float


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
    pipettes
        What there is to add stock with; plans keep to them.
    """

    aliquot: Measure | None = None
    made_up_to: Measure | None = None
    levels: Mapping[str, Measure] = field(default_factory=dict)
    predilution: float = 1.0
    tolerances: Mapping[str, Measure] = field(default_factory=dict)
    preparation: Preparation | None = None
    pipettes: tuple[Pipette, ...] = ()


@dataclass(frozen=True, slots=True)
class AnalyteRules:
    """What holds for one analyte only.

    Attributes
    ----------
    linear_to
        Concentration in the vessel up to which the response is proved linear.
    proved_on
        When that was proved, as written.
    loq, lod
        The laboratory's limits of quantification and of detection.
    molar_mass
        In g/mol, where the name is no formula or another value is wanted.
    limits
        Check to limits, before those that hold for all analytes.
    """

    linear_to: Measure | None = None
    proved_on: str = ""
    loq: Measure | None = None
    lod: Measure | None = None
    molar_mass: float | None = None
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
    unit_words
        What ``ppm``, ``ppb`` and ``ppt`` mean where exports write them.
    variance
        How the scatter of a signal goes with it.
    confidence
        Of intervals, as a fraction.
    fixed_factor
        k of U where at least ten effective degrees of freedom allow it; None: by Student's t always.
    added_refers_to
        What an added concentration in the export refers to; None where not declared.
    concentration_refers_to
        What the instrument's own concentration refers to; None where not declared.
    reference
        How the internal standard came into the vessel; None where not declared.
    undetected_native
        What a native below its decision limit counts in recoveries.
    expected_spiked, expected_levels
        So many spiked samples for so many samples of a batch; additions of a spiked sample. None where nothing is
        expected.
    pair_seconds, calibration_seconds
        How far exports may lie apart that a series and its bracket span, and how old a calibration may be that another
        export lends; 0 where every export stands alone.
    spiked_at
        ``before preparation`` or ``after preparation``.
    repeats
        ``new attempt``, ``same series`` or ``refuse``.
    limits
        Check to limits, as the laboratory stated them.
    exceptions
        Limits that hold for some samples only, the first that matches before the others.
    """

    report: Report
    export_unit: str
    result_unit: str
    unit_words: Mapping[str, str] = field(default_factory=dict)
    blank: BlankUse | None = None
    stocks: tuple[Stock, ...] = ()
    bench: Bench = field(default_factory=Bench)
    analytes: Mapping[str, AnalyteRules] = field(default_factory=dict)
    limits: Mapping[str, CheckLimits] = field(default_factory=dict)
    exceptions: tuple[LimitException, ...] = ()
    variance: VarianceModel = "constant"
    confidence: float = 0.95
    fixed_factor: float | None = None
    added_refers_to: AddedRefersTo | None = None
    concentration_refers_to: Literal["vessel", "sample"] | None = None
    reference: Reference | None = None
    undetected_native: Literal["as measured", "as zero"] = "as measured"
    expected_spiked: tuple[int, int] | None = None
    expected_levels: int | None = None
    pair_seconds: float = 0.0
    calibration_seconds: float = 0.0
    spiked_at: Literal["before preparation", "after preparation"] = "before preparation"
    repeats: Literal["new attempt", "same series", "refuse"] = "new attempt"

    @property
    def solid(self) -> bool:
        """Whether results are contents of a solid, mass or amount per mass."""
        return any(units.same_kind(self.result_unit, kind) for kind in (units.MASS_FRACTION, units.AMOUNT_CONTENT))

    @property
    def vessel_unit(self) -> str:
        """Unit of concentrations in the vessel: that of results, or mg/L (mmol/L) where they are contents of solids."""
        if not self.solid:
            return self.result_unit
        by_mass = units.same_kind(self.result_unit, units.MASS_FRACTION)
        return units.CONCENTRATION if by_mass else units.AMOUNT_CONCENTRATION

    def spelled_out(self, unit: str) -> str:
        """Return what the laboratory declares ppm and the like to mean; any other unit as it is."""
        return self.unit_words.get(unit.lower(), unit)

    def analyte(self, name: str) -> AnalyteRules:
        """Return what holds for an analyte; nothing particular where nothing is stated."""
        return self.analytes.get(name, AnalyteRules())
