"""An export cut into the blocks of a layout, each with the values that hold in it.

Nothing here reads a table.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers import fates
from parsers.heading import Heading, read_heading

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from parsers.layout import Blocks, Captured
    from parsers.readings import SetAside
    from parsers.text import Lines


@dataclass(frozen=True, slots=True)
class Block:
    """A part of an export that holds one table.

    Attributes
    ----------
    first, end
        Index of its first line, and of the line behind its last.
    heading
        Values of the blocks around it.
    wanted
        Values that stand in itself, to be looked for outside its rows.
    """

    first: int
    end: int
    heading: dict[str, Heading]
    wanted: Mapping[str, Captured]


@dataclass(frozen=True, slots=True)
class Cut:
    """The blocks of an export in their order, and the lines that lie in none."""

    blocks: list[Block]
    set_aside: list[SetAside]
    outside: list[tuple[int, str]]


def cut(lines: Lines, spec: Blocks | None) -> Cut:
    """Cut an export into its innermost blocks; without `spec`, all of it is one.

    Raises
    ------
    ExportRefused
        If no block begins anywhere, or a value of a block is not there.
    """
    if spec is None:
        return Cut([Block(0, len(lines), {}, {})], [], [])
    blocks: list[Block] = []
    aside: list[SetAside] = []
    outside = _within(lines, spec, (0, len(lines)), {}, blocks, aside)
    aside += fates.noted(outside, fates.OUTSIDE)
    return Cut(blocks, aside, outside)


def _within(
    lines: Lines,
    spec: Blocks,
    region: tuple[int, int],
    heading: dict[str, Heading],
    blocks: list[Block],
    aside: list[SetAside],
) -> list[tuple[int, str]]:
    """Cut a region; return its lines that lie in no block."""
    parts = list(_parts(lines, spec, *region))
    if not parts:
        sentence = f"expected a line that begins a block ({spec.begin.pattern!r}), got none"
        at = region[0] if region[0] else None
        raise lines.refusal(at, sentence, "Correct blocks.begin in the layout, or export again")
    text = lines.lines
    outside: list[tuple[int, str]] = []
    place = region[0]
    for first, end in parts:
        outside += [(at, text[at]) for at in range(place, first)]
        place = end
        if spec.blocks is None:
            blocks.append(Block(first, end, heading, spec.heading))
            continue
        own: list[Block] = []
        between = _within(lines, spec.blocks, (first, end), {}, own, aside)
        here = heading | read_heading(lines, spec.heading, between, "in its block", first)
        blocks += [Block(inner.first, inner.end, here | inner.heading, inner.wanted) for inner in own]
        aside += fates.noted(between, fates.HEADING)
    return outside + [(at, text[at]) for at in range(place, region[1])]


def _parts(lines: Lines, spec: Blocks, begin: int, end: int) -> Iterator[tuple[int, int]]:
    """Yield first line and end of each block in a region."""
    first = None
    for at in range(begin, end):
        line = lines.lines[at]
        if spec.begin.search(line):
            if first is not None:
                yield first, at
            first = at
        elif first is not None and spec.end is not None and spec.end.search(line):
            yield first, at
            first = None
    if first is not None:
        yield first, end
