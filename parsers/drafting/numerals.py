"""Which decimal and thousands mark the numbers of a table have, as far as they prove it.

`1,234` alone proves nothing: then the marks are chosen so that such a cell is an error and no number.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers.cells import Grammar

if TYPE_CHECKING:
    from collections.abc import Iterable

_NUMBERISH = re.compile(r"[+\-−]?[0-9]*(?:[.,'’ _\u00a0][0-9]+)*[.,]?(?:[eEdD][+\-−]?[0-9]+)?")
_ONE_MARK = re.compile(r"[+\-−]?(?P<whole>[0-9]*)(?P<mark>[.,])(?P<rest>[0-9]*)(?P<power>[eEdD].*)?")
_GROUPED = re.compile(
    r"[+\-−]?[0-9]{1,3}(?:(?P<thousands>[.,'’ _])[0-9]{3})(?:(?P=thousands)[0-9]{3})*(?P<rest>[.,][0-9]*)?"
)


@dataclass(frozen=True, slots=True)
class Marks:
    """The marks of numbers, and what is uncertain about them."""

    decimal: str = "."
    thousands: str = ""
    doubt: str = ""

    @property
    def grammar(self) -> Grammar:
        """How cells with these marks are read."""
        return Grammar(self.decimal, self.thousands)


def numberish(cell: str) -> bool:
    """Tell whether a cell is written like a number, whatever its marks mean."""
    return any(map(str.isdigit, cell)) and _NUMBERISH.fullmatch(cell.strip()) is not None


def find_marks(cells: Iterable[str]) -> Marks:
    """Find the marks that a table's numbers prove.

    Parameters
    ----------
    cells
        Cells of its columns of numbers, trimmed.
    """
    proof = {".": 0, ",": 0}
    open_to_both: dict[str, str] = {}
    thousands: dict[str, int] = {}
    for cell in cells:
        single = _ONE_MARK.fullmatch(cell)
        grouped = _GROUPED.fullmatch(cell)
        if single is not None:
            if grouped is not None and single["whole"].lstrip("0") == single["whole"] != "" and not single["power"]:
                open_to_both[single["mark"]] = cell
            else:
                proof[single["mark"]] += 1
        elif grouped is not None:
            mark, rest = grouped["thousands"], grouped["rest"]
            if rest and rest[0] == mark:
                continue
            thousands[mark] = thousands.get(mark, 0) + 1
            if rest:
                proof[rest[0]] += 1
    return _decided(proof, open_to_both, thousands)


def _decided(proof: dict[str, int], open_to_both: dict[str, str], thousands: dict[str, int]) -> Marks:
    seen = [mark for mark in (".", ",") if proof[mark]]
    if len(seen) == 2:
        decimal = max(seen, key=lambda mark: proof[mark])
        other = "," if decimal == "." else "."
        doubt = (
            f"{proof[other]} of the numbers are written with {other!r}, the others with {decimal!r}; those are errors"
        )
        return Marks(decimal, "", doubt)
    group = max(thousands, key=lambda mark: thousands[mark]) if len(thousands) == 1 else ""
    if seen:
        doubt = ""
        other = "," if seen[0] == "." else "."
        if other in open_to_both and group != other:
            doubt = f"{open_to_both[other]!r} may mean two numbers, so it is an error. State thousands if it parts them"
        return Marks(seen[0], group if group != seen[0] else "", doubt)
    if group in (".", ","):
        return Marks("," if group == "." else ".", group)
    if open_to_both:
        mark, cell = next(iter(open_to_both.items()))
        decimal = "," if mark == "." else "."
        doubt = (
            f"{cell!r} may mean two numbers, and no other number here decides it. So it is an error: write "
            f"decimal: {mark!r} if {mark!r} is the decimal mark, thousands: {mark!r} if it parts thousands"
        )
        return Marks(decimal, "", doubt)
    return Marks(".", group)
