"""What one source says of a field, row by row, and how texts of rows are cut out, joined and filled.

Nothing here knows which sources a field has.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Texts
from parsers.spelling import fold, folded, looked_up, renamed

if TYPE_CHECKING:
    import re

    from parsers.cells import Grammar
    from parsers.source import Source

#: Stands between a text and its unit.
PAIR = "\x1f"


@dataclass(frozen=True, slots=True)
class Told:
    """What one source says of a field.

    Attributes
    ----------
    texts
        One text a row, already cut out and mapped.
    header
        Where it stands, in words.
    source
        What the layout says of it.
    in_table
        Whether a missing value can be a fault: it has a place of its own.
    unit
        The unit of each row where it is stated apart, or None.
    grammar
        How its numbers are written; None where as in the export.
    column
        Index of its column, or None.
    heading_at
        Index of the line of a value that holds for all rows, or None.
    """

    texts: Texts
    header: str
    source: Source
    in_table: bool
    unit: Texts | None = None
    grammar: Grammar | None = None
    column: int | None = None
    heading_at: int | None = None


def filled(texts: Texts, other: Texts) -> Texts:
    """Return a column with its gaps filled from another one."""
    gaps = texts.codes < 0
    if not gaps.any():
        return texts
    together = Texts.of([*texts.names, *other.names])
    codes = np.where(gaps & (other.codes >= 0), other.codes + np.int32(len(texts.names)), texts.codes)
    return looked_up(together, Texts(codes.astype(np.int32), (*texts.names, *other.names)))


def cut(texts: Texts, source: Source, name: str) -> Texts:
    """Take out of each text what the source means, and put in the words that are meant."""
    pattern = source.pattern
    if pattern is None and not source.map:
        return texts
    names: list[str | None] = list(folded(texts.names))
    if pattern is not None:
        names = [_matched(pattern, text, name) for text in names]
    words = {fold(code): word for code, word in source.map.items()}
    mapped = renamed(texts, [(words.get(text, text) or None) if text is not None else None for text in names])
    if "" in words:  # an empty cell may be explained as well
        mapped = filled(mapped, Texts(np.where(texts.codes < 0, np.int32(0), np.int32(-1)), (words[""],)))
    return mapped


def _matched(pattern: re.Pattern[str], text: str | None, name: str) -> str | None:
    match = pattern.search(text or "")
    if match is None:
        return None
    said = match[name] if name in pattern.groupindex else match[1] if pattern.groups else match[0]
    return fold(said or "") or None


def paired(texts: Texts, units: Texts) -> Texts:
    """Write the unit of each row behind its text."""
    pairs = texts.codes.astype(np.int64) * (len(units.names) + 1) + units.codes
    distinct, first, codes = np.unique(pairs, return_index=True, return_inverse=True)
    names = [None if texts[row] is None else f"{texts[row]}{PAIR}{units[row] or ''}" for row in first.tolist()]
    joined = Texts.of(names)
    return Texts(joined.codes[codes.reshape(-1)], joined.names) if len(distinct) else texts


def joined(left: Texts, right: Texts) -> Texts:
    """Join two columns with a blank, each distinct pair once; a half alone is kept as it is."""
    pairs = left.codes.astype(np.int64) * (len(right.names) + 1) + right.codes
    distinct, codes = np.unique(pairs, return_inverse=True)
    first = np.empty(len(distinct), dtype=np.int64)
    first[codes[::-1]] = np.arange(len(codes) - 1, -1, -1)
    names = [" ".join(part for part in (left[row], right[row]) if part) or None for row in first.tolist()]
    joined = Texts.of(names)
    return Texts(joined.codes[codes], joined.names)
