"""A text to the number that a field means: quantities with their unit, predilutions, scaled and inverse values.

Nothing here knows rows or columns.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING

from parsers.cells import Cell, Grammar, Kind
from parsers.spelling import shown

if TYPE_CHECKING:
    from parsers.source import Source


def in_unit(cell: Cell, glued: str, stated: str | None) -> Cell:
    """Refuse a number whose glued unit is not the one that is stated."""
    if cell.kind is not Kind.NUMBER or not glued or not stated or glued == stated:
        return cell
    expected = f"expected a number in {stated}, got {shown(cell.text)}"
    return Cell(Kind.UNREADABLE, math.nan, cell.text, expected, "Correct the export, or write unit: in cell")


def rescaled(cell: Cell, source: Source) -> Cell:
    """Turn what the export writes into what is meant."""
    value = cell.value * (1 if source.scale is None else source.scale)
    if source.as_ == "inverse":
        value = 1 / value
    return replace(cell, value=value) if value != cell.value else cell


def quantity(text: str, grammar: Grammar) -> tuple[Cell, str]:
    """Understand a number with a glued unit."""
    plain = grammar.cell(text)
    if plain.kind is not Kind.UNREADABLE:
        return plain, ""
    found = grammar.quantity(text)
    if found is None:
        return Cell(Kind.UNREADABLE, math.nan, text, plain.expected, plain.remedy), ""
    return Cell(Kind.NUMBER, found[0], text), found[1]


def predilution(text: str, grammar: Grammar) -> Cell:
    """Understand a predilution in any of its forms."""
    factor = grammar.predilution(text)
    if factor is not None:
        return Cell(Kind.NUMBER, factor, text)
    plain = grammar.cell(text)
    if plain.kind is Kind.MISSING:
        return plain
    expected = f"expected a predilution such as 10, 1 in 10 or 1+9, got {shown(text)}"
    return Cell(Kind.UNREADABLE, math.nan, text, expected, "Correct the export")
