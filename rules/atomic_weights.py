"""Standard atomic weights and the molar masses that follow from them, for units of amount and for weighed salts.

Abridged to five digits after the IUPAC table of 2021: T. Prohaska et al., Pure Appl. Chem. 94 (2022) 573. Written
mostly from memory and checked against the masses of salts that a public method prints; verify before quoting. The
weights of some elements vary in nature: IUPAC gives an interval and, beside it, the conventional value used here.
Elements without a standard atomic weight (technetium, radium …) are not in the table. Knows no units.

>>> round(molar_mass("Pb(NO3)2"), 2)
331.21
"""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Weight:
    """The weight of one element.

    Attributes
    ----------
    value
        Abridged standard atomic weight, in g/mol; for an interval element the conventional one.
    interval
        Lowest and highest weight found in normal materials, in g/mol; None where the standard is a single value.
    """

    value: float
    interval: tuple[float, float] | None = None


#: Symbol to weight in g/mol where the standard is a single value: IUPAC 2021, abridged.
_SINGLE = {
    "He": 4.0026, "Be": 9.0122, "F": 18.998, "Ne": 20.180, "Na": 22.990, "Al": 26.982, "P": 30.974, "K": 39.098,
    "Ca": 40.078, "Sc": 44.956, "Ti": 47.867, "V": 50.942, "Cr": 51.996, "Mn": 54.938, "Fe": 55.845,
    "Co": 58.933, "Ni": 58.693, "Cu": 63.546, "Zn": 65.38, "Ga": 69.723, "Ge": 72.630, "As": 74.922,
    "Se": 78.971, "Kr": 83.798, "Rb": 85.468, "Sr": 87.62, "Y": 88.906, "Zr": 91.224, "Nb": 92.906, "Mo": 95.95,
    "Ru": 101.07, "Rh": 102.91, "Pd": 106.42, "Ag": 107.87, "Cd": 112.41, "In": 114.82, "Sn": 118.71,
    "Sb": 121.76, "Te": 127.60, "I": 126.90, "Xe": 131.29, "Cs": 132.91, "Ba": 137.33, "La": 138.91,
    "Ce": 140.12, "Pr": 140.91, "Nd": 144.24, "Sm": 150.36, "Eu": 151.96, "Gd": 157.25, "Tb": 158.93,
    "Dy": 162.50, "Ho": 164.93, "Er": 167.26, "Tm": 168.93, "Yb": 173.05, "Lu": 174.97, "Hf": 178.49,
    "Ta": 180.95, "W": 183.84, "Re": 186.21, "Os": 190.23, "Ir": 192.22, "Pt": 195.08, "Au": 196.97,
    "Hg": 200.59, "Bi": 208.98, "Th": 232.04, "Pa": 231.04, "U": 238.03,
}  # fmt: skip
#: Elements whose weight varies in nature.
_VARYING = {
    "H": Weight(1.008, (1.00784, 1.00811)),
    "Li": Weight(6.94, (6.938, 6.997)),
    "B": Weight(10.81, (10.806, 10.821)),
    "C": Weight(12.011, (12.0096, 12.0116)),
    "N": Weight(14.007, (14.00643, 14.00728)),
    "O": Weight(15.999, (15.99903, 15.99977)),
    "Mg": Weight(24.305, (24.304, 24.307)),
    "Si": Weight(28.085, (28.084, 28.086)),
    "S": Weight(32.06, (32.059, 32.076)),
    "Cl": Weight(35.45, (35.446, 35.457)),
    "Ar": Weight(39.95, (39.792, 39.963)),
    "Br": Weight(79.904, (79.901, 79.907)),
    "Tl": Weight(204.38, (204.382, 204.385)),
    "Pb": Weight(207.2, (206.14, 207.94)),
}

#: Symbol to weight of every element that has a standard atomic weight.
WEIGHTS: dict[str, Weight] = {
    **{symbol: Weight(value) for symbol, value in _SINGLE.items()},
    **_VARYING,
}

_PIECE = re.compile(r"(?P<symbol>[A-Z][a-z]?)|(?P<open>\()|(?P<close>\))|(?P<dot>[·.])|(?P<count>[1-9][0-9]*)")


class FormulaUnusable(ValueError):
    """A chemical formula cannot be read.

    Parameters
    ----------
    formula
        As written.
    place
        Position of what is wrong, from 1.
    expected, found
        What should stand there, and what does.
    """

    def __init__(self, formula: str, place: int, expected: str, found: str) -> None:
        super().__init__(formula, place, expected, found)
        self.formula, self.place, self.expected, self.found = formula, place, expected, found

    def __str__(self) -> str:
        """Say where and what, what follows, and what to do."""
        return (
            f"formula '{self.formula}', character {self.place}: expected {self.expected}, got {self.found}. No molar "
            f"mass follows from it. Write it as in Pb(NO3)2 or CuSO4·5H2O."
        )


def composition(formula: str) -> dict[str, int]:
    """Count the atoms of a formula.

    Parameters
    ----------
    formula
        Symbols, counts, round brackets; what follows a dot is added, as in ``CuSO4·5H2O``. No charges.

    Raises
    ------
    FormulaUnusable
        If it cannot be read, or holds an element without a standard atomic weight.

    >>> composition("NH4VO3")
    {'N': 1, 'H': 4, 'V': 1, 'O': 3}
    """
    return dict(_Reading(formula).whole())


def molar_mass(formula: str) -> float:
    """Return the molar mass of an element or a compound in g/mol.

    Raises
    ------
    FormulaUnusable
        As `composition`.

    >>> molar_mass("Zn")
    65.38
    """
    return sum(count * WEIGHTS[symbol].value for symbol, count in composition(formula).items())


class _Reading:
    """A formula on its way from left to right."""

    def __init__(self, formula: str) -> None:
        self.formula, self.place = formula, 0

    def whole(self) -> Counter[str]:
        atoms = self._part()
        while self._take("dot"):
            times = self._count()
            for symbol, number in self._part().items():
                atoms[symbol] += times * number
        if self.place < len(self.formula):
            raise self._unusable("a symbol, a count, a bracket or a dot")
        return atoms

    def _part(self) -> Counter[str]:
        """Read symbols and brackets up to a closing bracket, a dot or the end."""
        atoms: Counter[str] = Counter()
        while (group := self._group()) is not None:
            times = self._count()
            for symbol, number in group.items():
                atoms[symbol] += times * number
        if not atoms:
            raise self._unusable("the symbol of an element")
        return atoms

    def _group(self) -> Counter[str] | None:
        at = self.place
        if symbol := self._take("symbol"):
            if symbol not in WEIGHTS:
                self.place = at
                raise self._unusable("an element with a standard atomic weight", f"'{symbol}'")
            return Counter({symbol: 1})
        if self._take("open"):
            inside = self._part()
            if not self._take("close"):
                raise self._unusable("a closing bracket")
            return inside
        return None

    def _count(self) -> int:
        return int(self._take("count") or 1)

    def _take(self, kind: str) -> str:
        """Return the next piece if it is of a kind, else nothing."""
        found = _PIECE.match(self.formula, self.place)
        if found is None or found.lastgroup != kind:
            return ""
        self.place = found.end()
        return found[0]

    def _unusable(self, expected: str, found: str = "") -> FormulaUnusable:
        rest = self.formula[self.place : self.place + 1]
        return FormulaUnusable(self.formula, self.place + 1, expected, found or (f"'{rest}'" if rest else "the end"))
