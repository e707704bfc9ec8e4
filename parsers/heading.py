"""Values that stand outside the table and hold for its rows: batch, analyst, predilution, the name of a file.

Nothing here reads the table.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers.spelling import fold, shown

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from parsers.layout import Captured, Layout
    from parsers.text import Lines


@dataclass(frozen=True, slots=True)
class Heading:
    """A value outside the table, with the index of its line; None where it stands in the file's name."""

    value: str
    at: int | None


def read_heading(
    lines: Lines, wanted: Mapping[str, Captured], among: Iterable[tuple[int, str]], where: str, at: int | None
) -> dict[str, Heading]:
    """Find values, each in the first line that matches.

    Parameters
    ----------
    lines
        The export, for errors.
    wanted
        Patterns by name.
    among
        The lines to look at, by index and text.
    where, at
        Where they lie, in words, and the index of the line to name in errors.

    Raises
    ------
    ExportRefused
        If one is not found or empty: rows without it would be rows of no batch.
    """
    found = {}
    candidates = list(among) if wanted else []
    for name, captured in wanted.items():
        hits = ((at, match) for at, line in candidates if (match := captured.pattern.search(line)))
        line_at, match = next(hits, (0, None))
        value = fold(match.group(1) or "") if match else ""
        if value:
            found[name] = Heading(value, line_at)
        elif not captured.optional:
            sentence = f"expected the heading {name} ({captured.pattern.pattern!r}) {where}, got none"
            todo = "Correct heading in the layout, write optional: yes there, or export again"
            raise lines.refusal(at, sentence, todo)
    return found


def read_name(lines: Lines, layout: Layout) -> dict[str, Heading]:
    """Take the values that the name of the export's file says.

    Raises
    ------
    ExportRefused
        If the name does not match.
    """
    if layout.file_name is None:
        return {}
    name = re.split(r"[/\\]", lines.name)[-1]
    match = layout.file_name.search(name)
    if match is None:
        sentence = f"expected a file name that matches {layout.file_name.pattern!r}, got {shown(name)}"
        raise lines.refusal(None, sentence, "Correct file_name in the layout, or name the export as agreed")
    said = {word: fold(value) for word, value in match.groupdict().items() if value and value.strip()}
    return {word: Heading(value, None) for word, value in said.items()}
