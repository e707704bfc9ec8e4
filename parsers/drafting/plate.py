"""Plates of an example: a line of column numbers, and below it lines that begin with row letters.

Nothing here knows what is in a well.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from parsers.drafting.blocks import find_blocks
from parsers.drafting.structure import SEPARATORS, Structure, split

if TYPE_CHECKING:
    from parsers.drafting.example import Example

#: Columns of a plate as a layout names them, as far as drafts need them.
WELL, VALUE = "well", "value"


def find_plate(example: Example) -> Structure | None:
    """Find one plate, or several under lines that tell them apart; None where there is none."""
    for word, character in SEPARATORS.items():
        if word == "blanks":
            continue
        records = {at: split(line, character) for at, line in enumerate(example.lines) if line.strip()}
        heads = [at for at, cells in records.items() if _numbers_columns(cells)]
        grids = {head: _grid(records, head) for head in heads}
        if not heads or not all(grids.values()):
            continue
        blocks = find_blocks(example.lines, heads)
        if len(heads) > 1 and blocks is None:
            return None
        behind = max(at for grid in grids.values() for at in grid)
        wells = [
            (at, [records[at][0] + number, cell])
            for head, grid in grids.items()
            for at in grid
            for number, cell in zip(records[head][1:], records[at][1:], strict=False)
            if cell
        ]
        return Structure(
            example=example,
            separator=word,
            header_at=heads[0],
            headers=[WELL, VALUE],
            rows=wells,
            table="grid",
            blocks=blocks,
            tail=next((at for at in records if at > behind), None),
        )
    return None


def _numbers_columns(cells: list[str]) -> bool:
    """Tell whether a line counts the columns of a plate."""
    return len(cells) > 2 and not cells[0] and cells[1:] == [str(number) for number in range(1, len(cells))]


def _grid(records: dict[int, list[str]], head: int) -> list[int]:
    """Return the lines below a head that begin with A, B, C and so on."""
    found: list[int] = []
    for at in (at for at in records if at > head):
        letter = chr(ord("A") + len(found))
        if records[at][0] != letter or len(records[at]) > len(records[head]):
            break
        found.append(at)
    return found
