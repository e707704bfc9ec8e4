"""Values that stand above the table and hold for all its rows: batch, analyst, predilution.

Nothing here reads the table.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers.spelling import fold

if TYPE_CHECKING:
    from parsers.layout import Layout
    from parsers.table import Frame


@dataclass(frozen=True, slots=True)
class Heading:
    """A value above the table, with the index of its line."""

    value: str
    at: int


def read_heading(frame: Frame, layout: Layout) -> dict[str, Heading]:
    """Find the headings of a layout, each in the first line that matches.

    Raises
    ------
    ExportRefused
        If one is not found or empty: rows without it would be rows of no batch.
    """
    found = {}
    for name, pattern in layout.heading.items():
        above = frame.lines.head(frame.header_at)
        at, match = next(((at, match) for at, line in enumerate(above) if (match := pattern.search(line))), (0, None))
        value = fold(match.group(1) or "") if match else ""
        if not value:
            sentence = f"expected the heading {name} ({pattern.pattern!r}) above the table, got none"
            raise frame.lines.refusal(None, sentence, "Correct heading in the layout, or export again")
        found[name] = Heading(value, at)
    return found
