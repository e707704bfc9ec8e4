"""Whether the content of an export goes on from the one before it, under the same name.

An export that grows keeps its old rows. Where rows are gone or altered, somebody should look before anything is
released; where nothing of the old content is left, the name was used again for something else. Runs in the worker.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers.errors import ExportRefused
from parsers.read import read
from parsers.text import decode

if TYPE_CHECKING:
    from parsers.layout import Layout

#: Old rows that are quoted one by one.
QUOTED = 5


@dataclass(frozen=True, slots=True)
class Growth:
    """What became of the old rows.

    Attributes
    ----------
    unrelated
        Not one old row is left.
    missing
        Old rows that are not there any more, as they stood, by line.
    """

    unrelated: bool
    missing: tuple[tuple[int, str], ...]

    def problem(self, name: str, revision: int) -> str | None:
        """Say which old rows are altered or gone; None where none is, or the content is another one altogether."""
        if self.unrelated or not self.missing:
            return None
        quoted = "; ".join(f"line {line} '{text[:80]}'" for line, text in self.missing[:QUOTED])
        more = f" and {len(self.missing) - QUOTED} more" if len(self.missing) > QUOTED else ""
        return (
            f"{name}: expected the rows of revision {revision} to be in it unchanged, "
            f"{len(self.missing)} of them are altered or gone ({quoted}{more}). "
            "What is there now was evaluated; the results of the earlier revision are kept. "
            "Find out who changed the export before anything of it is released."
        )


def compare(old: bytes, new: bytes, layout: Layout, name: str) -> Growth:
    """Compare the rows that gave readings with what is there now; their order does not matter."""
    try:
        rows = sorted({int(line) for line in read(old, layout, name).line})
        before = _lines(old, layout, name)
        left = Counter(_lines(new, layout, name))
    except ExportRefused:  # under today's layout there is nothing to compare with
        return Growth(unrelated=False, missing=())
    missing = []
    for row in rows:
        text = before[row - 1]
        if left[text]:
            left[text] -= 1
        else:
            missing.append((row, text))
    return Growth(unrelated=bool(rows) and len(missing) == len(rows), missing=tuple(missing))


def _lines(data: bytes, layout: Layout, name: str) -> list[str]:
    lines = decode(data, layout.encodings, name)
    return [str(line).rstrip() for line in lines.head(len(lines))]
