"""What an analyte weighs: the molar mass that amounts of it are converted to masses with.

The laboratory's own value, else the standard atomic weights where the analyte's name is a formula (`Zn`, `NO3`).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules import units
from rules.atomic_weights import WEIGHTS, FormulaUnusable, composition, molar_mass

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Quantities, Readings
    from rules.line import Floats, Integers
    from rules.method import Measure, Method


#: Words that say nothing until a laboratory declares them.
PARTS = ("ppm", "ppb", "ppt")


@dataclass(frozen=True, slots=True)
class Substance:
    """An analyte as a substance.

    Attributes
    ----------
    name
        As exports and settings call it.
    molar_mass
        In g/mol; None where nobody states it and the name is no formula.
    source
        Where the molar mass comes from; for elements whose weight varies in nature which value was taken.
    """

    name: str
    molar_mass: float | None
    source: str

    @classmethod
    def of(cls, method: Method, name: str) -> Substance:
        """Look an analyte up."""
        if (stated := method.analyte(name).molar_mass) is not None:
            return cls(name, stated, "the settings")
        try:
            weighs, elements = molar_mass(name), composition(name)
        except FormulaUnusable:
            return cls(name, None, "")
        varying = [symbol for symbol in elements if WEIGHTS[symbol].interval]
        conventional = f", conventional value for {', '.join(varying)}" if varying else ""
        return cls(name, weighs, f"standard atomic weights, IUPAC 2021{conventional}")

    def convert(self, measure: Measure, target: str) -> float:
        """Return a stated quantity of the substance in another unit.

        Raises
        ------
        UnitUnusable
            If the units measure different things, or the molar mass is needed and not known.
        """
        return measure.value * self.factor(measure.unit, target)

    def factor(self, unit: str, target: str) -> float:
        """Return what a number in a unit must be multiplied with to be in another one.

        Raises
        ------
        UnitUnusable
            As `convert`.
        """
        direction = units.by_amount(unit, target)
        if not direction:
            return units.factor(unit, target)
        if self.molar_mass is None:
            raise units.UnitUnusable(
                f"'{unit}' becomes '{target}' only with the molar mass of {self.name}, which nobody states: write "
                f"analytes: {{{self.name}: {{molar_mass: … g/mol}}}}"
            )
        return units.factor_of_substance(unit, target, self.molar_mass)


def concentrations(
    readings: Readings, column: Quantities, rows: Integers, method: Method
) -> tuple[Floats, dict[int, str]]:
    """Return a column of concentrations in the unit of the vessel.

    Parameters
    ----------
    readings, column, rows
        The column and the rows wanted.
    method
        The unit of numbers that state none, what ppm and ppb mean, and molar masses.

    Returns
    -------
    tuple
        float64[len(rows)], NaN where there is no number or it cannot be converted; and the place of each number that
        cannot be converted with the reason.
    """
    values = column.values[rows]
    codes, analytes = column.units.codes[rows], readings.analyte.codes[rows]
    factors = np.ones(len(rows))
    reasons: dict[int, str] = {}
    present = np.isfinite(values)
    by_analyte = len(readings.analyte.names)
    pairs = np.where(present, codes.astype(np.int64) * by_analyte + analytes, -by_analyte - 1)
    for pair in np.unique(pairs[present]).tolist():
        here = np.flatnonzero(pairs == pair)
        code, analyte = divmod(pair, by_analyte)
        unit = method.export_unit if code < 0 else method.spelled_out(column.units.names[code])
        try:
            factors[here] = Substance.of(method, readings.analyte.names[analyte]).factor(unit, method.vessel_unit)
        except units.UnitUnusable as error:
            factors[here] = np.nan
            # what an instrument writes can be declared; what people write in the settings can be written out
            declared = f", or declare units: {{{unit.lower()}: mg/L}}" if unit.lower() in PARTS else ""
            reasons |= dict.fromkeys(here.tolist(), f"{error}{declared}")
    return values * factors, reasons


def molar_masses_used(readings: Readings, method: Method) -> dict[int, str]:
    """Return what to say of each analyte (code) whose amounts were converted to masses, or the other way round."""
    written = {
        method.spelled_out(name)
        for column in (readings.added, readings.nominal, readings.concentration)
        for name in column.units.names
    } | {method.export_unit}
    written |= {measure.unit for measure in method.bench.levels.values() if not units.same_kind(measure.unit, "mL")}
    found = {}
    for code, name in enumerate(readings.analyte.names):
        content = {stock.contains[name].unit for stock in method.stocks if name in stock.contains}
        if any(units.convertible(unit, method.vessel_unit) for unit in written | content):
            substance = Substance.of(method, name)
            found[code] = f"{name} counts {substance.molar_mass:g} g/mol ({substance.source})"
    return found


def of_analytes(readings: Readings, method: Method, wanted: str) -> NDArray[np.float64]:
    """Return a concentration that the settings state for analytes (`loq`, `lod`, `linear_to`); NaN where none."""
    return np.array(
        [
            np.nan
            if (stated := getattr(method.analyte(name), wanted)) is None
            else Substance.of(method, name).convert(stated, method.vessel_unit)
            for name in readings.analyte.names
        ],
        dtype=float,
    )
