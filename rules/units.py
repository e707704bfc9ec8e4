"""Units of volumes and concentrations, on pint. Converts what is stated and refuses the rest.

Parts per million and per billion mean nothing until a laboratory declares them, so they are no units here.
"""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from parsers.readings import Quantities
    from rules.method import Measure

#: One unit of each kind, to compare dimensions with and to name in errors.
VOLUME, CONCENTRATION, MASS, MASS_FRACTION = "mL", "mg/L", "g", "mg/kg"
AMOUNT_CONCENTRATION, AMOUNT_CONTENT = "mmol/L", "mmol/kg"
_KINDS = {
    VOLUME: "a volume such as mL or µL",
    CONCENTRATION: "a concentration such as mg/L or µg/L",
    MASS: "a mass such as g or mg",
    MASS_FRACTION: "a content such as mg/kg or µg/g",
    AMOUNT_CONCENTRATION: "an amount concentration such as mmol/L",
    AMOUNT_CONTENT: "an amount content such as mmol/kg",
}


#: Units of every day, whose kind needs no library: building pint's registry takes longer than a small export.
_COMMON = {
    "mL": VOLUME, "µL": VOLUME, "L": VOLUME, "g": MASS, "mg": MASS, "kg": MASS,
    "g/L": CONCENTRATION, "mg/L": CONCENTRATION, "µg/L": CONCENTRATION, "ng/L": CONCENTRATION,
    "mg/kg": MASS_FRACTION, "µg/kg": MASS_FRACTION, "µg/g": MASS_FRACTION, "g/kg": MASS_FRACTION,
    "mol/L": AMOUNT_CONCENTRATION, "mmol/L": AMOUNT_CONCENTRATION, "µmol/L": AMOUNT_CONCENTRATION,
    "mmol/kg": AMOUNT_CONTENT, "µmol/kg": AMOUNT_CONTENT, "µmol/g": AMOUNT_CONTENT,
}  # fmt: skip


class UnitUnusable(ValueError):
    """A unit is unknown, or of the wrong kind for the place where it stands."""


@cache
def _registry() -> Any:
    # imported when first needed: parsing its definitions takes longer than all the rest of a small export
    import pint  # noqa: PLC0415

    return pint.UnitRegistry(cache_folder=None)


@cache
def factor(unit: str, target: str) -> float:
    """Return what a number in `unit` must be multiplied with to be in `target`.

    Raises
    ------
    UnitUnusable
        If a unit is not known or the two are not of the same kind.

    >>> factor("mg/L", "µg/L")
    1000.0
    >>> factor("µL", "mL")
    0.001
    """
    if unit == target:
        return 1.0
    known = [_known(text) for text in (unit, target)]
    if not same_kind(unit, target):
        raise UnitUnusable(f"'{unit}' cannot be converted to '{target}': they measure different things")
    return float(f"{_registry().convert(1.0, known[0], known[1]):.15g}")


@cache
def factor_of_substance(unit: str, target: str, molar_mass: float) -> float:
    """Return the factor between a unit of mass and one of amount, or back.

    Parameters
    ----------
    unit, target
        One holds a mass where the other holds an amount of substance.
    molar_mass
        In g/mol.

    >>> factor_of_substance("mmol/L", "mg/L", 65.38)
    65.38
    """
    to_mass = by_amount(unit, target) > 0
    registry = _registry()
    weight = registry.Quantity(molar_mass, "g/mol")
    one = registry.Quantity(1.0, _known(unit))
    converted = (one * weight if to_mass else one / weight).to(_known(target))
    return float(f"{converted.magnitude:.15g}")


@cache
def by_amount(unit: str, target: str) -> int:
    """Tell whether only a molar mass leads from one unit to the other: 1 from amount to mass, -1 back, else 0.

    Raises
    ------
    UnitUnusable
        If one is not known.
    """
    kinds = (_COMMON.get(unit), _COMMON.get(target))
    if None not in kinds and kinds[0] == kinds[1]:
        return 0
    ratio = (_known(unit) / _known(target)).dimensionality
    weight = (_registry().mol / _registry().g).dimensionality
    return 1 if ratio == weight else -1 if ratio == 1 / weight else 0


def convertible(unit: str, target: str) -> bool:
    """Tell whether a unit leads to another one by a molar mass; unknown ones do not."""
    try:
        return unit != target and by_amount(unit, target) != 0
    except UnitUnusable:
        return False


def require(unit: str, *kinds: str) -> None:
    """Check that a unit is known and of one of several kinds, such as `VOLUME` or `CONCENTRATION`.

    Raises
    ------
    UnitUnusable
        If not.
    """
    if not any(same_kind(unit, kind) for kind in kinds):
        raise UnitUnusable(f"expected {_KINDS[kinds[0]]}, got '{unit}'")


def same_kind(unit: str, other: str) -> bool:
    """Tell whether two units measure the same thing.

    Raises
    ------
    UnitUnusable
        If one is not known.

    >>> same_kind("mg/kg", "µg/g"), same_kind("mg/kg", "mg/L")
    (True, False)
    """
    if unit in _COMMON and other in _COMMON:
        return _COMMON[unit] == _COMMON[other]
    return unit == other or _known(unit).dimensionality == _known(other).dimensionality


@cache
def _known(text: str) -> Any:
    if text.lower() in ("ppm", "ppb", "ppt"):
        raise UnitUnusable(f"'{text}' does not say per what: write mg/L, µg/L or ng/L")
    try:
        unit = _registry().parse_units(text)
    except Exception as error:  # pint raises its own errors, tokenizer errors and TypeError alike
        raise UnitUnusable(f"'{text}' is no known unit: write for example mg/L, µg/L, mL or µL") from error
    if not text or (unit.dimensionless and not _mass_per_mass(text)):
        raise UnitUnusable(f"'{text}' is no unit of a volume, a mass, a concentration or a content")
    return unit


def _mass_per_mass(text: str) -> bool:
    """Tell a content such as mg/kg from other ratios, which have no unit left either."""
    parts = text.split("/")
    return len(parts) == 2 and all(_known(part.strip()).dimensionality == _known(MASS).dimensionality for part in parts)


def of_measure(measure: Measure, target: str) -> float:
    """Return a stated quantity in another unit."""
    return measure.value * factor(measure.unit, target)


def of_column(column: Quantities, target: str, default: str | None) -> np.ndarray[Any, np.dtype[np.float64]]:
    """Return a column of quantities in one unit.

    Parameters
    ----------
    column
        Numbers with their units.
    target
        The unit wanted.
    default
        The unit of rows that state none.

    Raises
    ------
    UnitUnusable
        If a unit that is used cannot be converted.
    """
    present = np.isfinite(column.values)
    factors = np.ones(len(column.units.names) + 1)
    used = np.unique(column.units.codes[present])
    for code in used:
        unit = column.units.names[code] if code >= 0 else default
        if unit is None:
            raise UnitUnusable(f"a number without unit where {_KINDS.get(target, target)} is needed")
        factors[code] = factor(unit, target)
    # code -1 (no unit) indexes the last factor
    return column.values * factors[column.units.codes]
