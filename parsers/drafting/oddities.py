"""Cells of the signal that are no numbers: which words mean missing, below, above, and which marks are flags.

Only what is written the same everywhere is explained; any other cell stays an error.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from parsers.drafting.drawing import scalar
from parsers.drafting.numerals import numberish
from parsers.spelling import fold, listed

if TYPE_CHECKING:
    from collections.abc import Iterable

    from parsers.cells import Grammar

_MISSING = frozenset(
    {"n.a.", "na", "n/a", "-", "--", "---", "nan", "not measured", "n.m.", "nm", "none", "missing", "."}
)
_BELOW = frozenset({"bql", "bdl", "blq", "nd", "n.d.", "lod", "<lod", "<loq", "not detected", "< lod", "< loq"})
_ABOVE = frozenset({"ovr", "over", "overrange", "over range", "sat", "saturated", "ovf", "overflow", "out of range"})
_HASHES = re.compile(r"#{3,}|\*{3,}|\+{3,}")
#: A flat number that instruments write where a signal is off their scale.
_NINES = re.compile(r"9{3,}[.,]9+|9{4,}")
_FLAG = re.compile(r"[*!†‡]")


@dataclass(slots=True)
class Oddities:
    """Cells that are no numbers, by what they mean."""

    missing: list[str] = field(default_factory=list)
    below: list[str] = field(default_factory=list)
    above: list[str] = field(default_factory=list)
    flags: set[str] = field(default_factory=set)
    unknown: list[str] = field(default_factory=list)
    zero: bool = False
    glued: list[str] = field(default_factory=list)

    def line(self) -> str:
        """Return the value of ``cells`` in a layout, or nothing."""
        parts = []
        if self.missing:
            parts.append(f"missing: [{', '.join(map(_quoted, ['', *self.missing]))}]")
        if self.below:
            parts.append(f"below: {_pattern(self.below, '<')}")
        if self.glued:
            parts.append(f"glued: [{', '.join(map(_quoted, self.glued))}]")
        if self.zero:
            parts.append("zero: below")
        if self.above:
            parts.append(f"above: {_pattern(self.above, '>')}")
        if self.flags:
            parts.append(f"flags: '[{''.join(sorted(self.flags))}]'")
        return f"{{{', '.join(parts)}}}" if parts else ""

    def doubt(self) -> str:
        """Return what is said of cells that nothing explains."""
        nines = [cell for cell in self.above if _NINES.fullmatch(cell)]
        if nines:
            return f"{listed(nines)} is taken for a signal beyond the instrument's range, not for a number"
        if not self.unknown:
            return ""
        return (
            f"{listed(self.unknown[:8])} stand where numbers are expected, and stay errors of their series. Explain "
            f"them under cells (missing, below, above, flags) if they mean something"
        )


def find_oddities(cells: Iterable[str], grammar: Grammar) -> Oddities:
    """Sort the distinct cells of columns of numbers that are none."""
    found = Oddities()
    for cell in dict.fromkeys(map(fold, cells)):
        if _NINES.fullmatch(cell):
            found.above.append(cell)
            continue
        if not cell or grammar.value(cell) is not None or numberish(cell):  # marks in doubt are told elsewhere
            continue
        word = cell.casefold()
        bare = fold(_FLAG.sub("", cell))
        if word in _MISSING:
            found.missing.append(cell)
        elif word in _BELOW or (cell.startswith("<") and _limit(cell)):
            found.below.append(cell)
        elif word in _ABOVE or (cell.startswith(">") and _limit(cell)) or _HASHES.fullmatch(cell):
            found.above.append(cell)
        elif bare and bare != cell and grammar.value(bare) is not None:
            found.flags |= set(_FLAG.findall(cell))
        else:
            found.unknown.append(cell)
    return found


def _limit(cell: str) -> bool:
    return re.fullmatch(r"[<>]\s*[0-9.,]+", cell) is not None


def _pattern(cells: list[str], sign: str) -> str:
    """Write a list of words, or a pattern where limits differ from row to row."""
    words = [cell for cell in cells if not _limit(cell)]
    if len(words) == len(cells):
        return f"[{', '.join(map(_quoted, words))}]"
    limit = rf"{sign}\s*(?P<limit>[0-9.,]+)"
    together = "|".join([limit, *(re.escape(word).replace(r"\ ", " ") for word in words)])
    return scalar(f"^(?:{together})$" if words else f"^{limit}$")


def _quoted(word: str) -> str:
    return "''" if not word else "'" + word.replace("'", "''") + "'"
