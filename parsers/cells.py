"""One cell: a number under a declared grammar, or missing, below, above, unreadable.

A number is written with ASCII digits, the declared decimal mark, the declared thousands mark in its proper places, and
an exponent after e, E, d or D. Everything else (``nan``, ``inf``, ``1_000``, ``1.2.3``) is unreadable unless the layout
explains it: a cell is never guessed at and never becomes zero. Distinct texts are converted once. Nothing here knows
which field a cell belongs to.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field
from enum import IntEnum
from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from parsers.spelling import fold, shown

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.readings import Floats, Texts

PatternOrWords: TypeAlias = "re.Pattern[str] | tuple[str, ...]"

_MARK_NAMES = {".": "point", ",": "comma"}
_PREDILUTION = re.compile(r"(?P<one>.+?)(?P<how> in |\s*\+\s*|\s*:\s*)(?P<other>.+)")


class Kind(IntEnum):
    """What a cell turned out to be."""

    NUMBER = 0
    MISSING = 1
    BELOW = 2
    ABOVE = 3
    UNREADABLE = 4


@dataclass(frozen=True, slots=True)
class Cell:
    """A cell understood.

    Attributes
    ----------
    kind
        What it is.
    value
        The number, NaN where it is none.
    text
        The cell as written, trimmed.
    expected, remedy
        For a cell that is no number: what was expected and found, and what to do.
    """

    kind: Kind
    value: float
    text: str
    expected: str = ""
    remedy: str = ""


@dataclass(frozen=True, slots=True)
class Numbers:
    """A column of numbers.

    Attributes
    ----------
    values
        float64[n], NaN where the cell is no number.
    odd
        The cells that are no numbers, by row.
    """

    values: Floats
    odd: dict[int, Cell]


@dataclass(frozen=True, slots=True)
class Grammar:
    """How the cells of a layout are read.

    Attributes
    ----------
    decimal, thousands
        The marks; no thousands mark is ``''``.
    missing
        Words that say that there is no value.
    below, above
        A pattern searched in the cell, or words that fill it.
    flags
        A pattern whose matches are taken out before the number is read.
    glued
        Words that may stand behind a number.
    zero
        What a bare zero means: a number, ``below`` or ``missing``.
    others
        Other grammars for the cells that a pattern finds, tried in order.
    number, plain
        The form of a number, made of the marks; and the usual one, in which nothing is left to explain.
    """

    decimal: str = "."
    thousands: str = ""
    missing: frozenset[str] = frozenset({""})
    below: PatternOrWords = ()
    above: PatternOrWords = ()
    flags: re.Pattern[str] | None = None
    glued: frozenset[str] = frozenset()
    zero: str = "number"
    others: tuple[tuple[re.Pattern[str], Grammar], ...] = ()
    number: re.Pattern[str] = field(init=False)
    plain: re.Pattern[str] = field(init=False)

    def __post_init__(self) -> None:
        """Make the forms of a number."""
        mark, thousands = re.escape(self.decimal), re.escape(self.thousands)
        whole = rf"(?:[0-9]{{1,3}}(?:{thousands}[0-9]{{3}})+|[0-9]+)" if thousands else "[0-9]+"
        form = rf"[+\-−]?(?:{whole}(?:{mark}[0-9]*)?|{mark}[0-9]+)(?:[eEdD][+\-−]?[0-9]+)?"
        object.__setattr__(self, "number", re.compile(form))
        usual = rf"[+-]?(?:[0-9]+(?:{mark}[0-9]*)?|{mark}[0-9]+)(?:[eE][+-]?[0-9]+)?"
        object.__setattr__(self, "plain", re.compile(usual))

    @classmethod
    def of(
        cls,
        decimal: str,
        thousands: str,
        missing: tuple[str, ...],
        below: PatternOrWords,
        above: PatternOrWords,
        flags: re.Pattern[str] | None,
    ) -> Grammar:
        """Make a grammar of what a layout says; words are compared with folded blanks. An empty cell is missing."""
        words = frozenset({"", *map(fold, missing)})
        return cls(decimal, thousands, words, _folded(below), _folded(above), flags)

    def cell(self, text: str) -> Cell:
        """Understand one cell."""
        folded = fold(text)
        known = self._explained(folded)
        if known is None and self.flags is not None:
            folded = fold(self.flags.sub("", folded))
            known = self._explained(folded)
        if known is not None:
            return known
        value = self._written(folded)
        if value is None:
            return Cell(Kind.UNREADABLE, math.nan, text.strip(), *self._complaint(folded))
        if value == 0 and self.zero != "number":
            kind = Kind.BELOW if self.zero == "below" else Kind.MISSING
            expected = f"expected a number, got {shown(folded)}, which means {self.zero} in this export"
            return Cell(kind, math.nan, text.strip(), expected, "Measure again inside the range")
        if math.isinf(value):
            expected = f"expected a number that a computer can hold, got {shown(folded)}"
            return Cell(Kind.UNREADABLE, math.nan, text.strip(), expected, "Correct the export")
        return Cell(Kind.NUMBER, value, folded)

    def _written(self, text: str) -> float | None:
        """Return the number of a cell: under other marks where a pattern says so, and without the words glued to it."""
        grammar = next((other for pattern, other in self.others if pattern.search(text)), self)
        value = grammar.value(text)
        if value is None and self.glued:
            match = grammar.number.match(text)
            if match is not None and text[match.end() :].strip() in self.glued:
                value = grammar.value(match.group())
        return value

    def value(self, text: str) -> float | None:
        """Return the number that the whole text writes, infinity where it is too large, None where it is none."""
        if self.number.fullmatch(text) is None:
            return None
        plain = text.replace(self.thousands, "") if self.thousands else text
        plain = plain.replace(self.decimal, ".").replace("−", "-").replace("d", "e").replace("D", "e")
        return float(plain)

    def column(self, texts: Texts) -> Numbers:
        """Understand a column, each distinct text once."""
        return converted(texts, self.cell, self._usual())

    def _usual(self) -> Callable[[str], float | None] | None:
        """Return a quick way to the number of a cell that needs no explanation; it returns None for any other cell."""
        if self.flags is not None or not isinstance(self.below, tuple) or not isinstance(self.above, tuple):
            return None  # a pattern may explain any cell
        if self.zero != "number" or self.others:
            return None
        words = {*self.missing, *self.below, *self.above}
        usual, mark = self.plain.fullmatch, self.decimal

        def number(text: str) -> float | None:
            if text in words or usual(text) is None:
                return None
            value = float(text if mark == "." else text.replace(mark, "."))
            return value if math.isfinite(value) else None

        return number

    def quantity(self, text: str) -> tuple[float, str] | None:
        """Return number and glued unit of a text such as ``2.5 mg/L``; None where it does not begin with a number.

        The unit is empty where there is none. It never begins with a digit or a mark, which would be a number misread.
        """
        folded = fold(text)
        match = self.number.match(folded)
        if match is None:
            return None
        value, unit = self.value(match.group()), folded[match.end() :].strip()
        if value is None or math.isinf(value) or (unit and unit[0] in "0123456789.,'’_+-−<>:;"):
            return None
        return value, unit

    def predilution(self, text: str) -> float | None:
        """Return the factor that a predilution says, None where it says none; ``1:10`` means 1 in 10.

        >>> [Grammar().predilution(text) for text in ("10", "1 in 10", "1:10", "1+9", "1 to 10")]
        [10.0, 10.0, 10.0, 10.0, None]
        """
        folded = fold(text)
        match = _PREDILUTION.fullmatch(folded)
        factor = self.value(folded)
        if factor is None and match is not None:
            one, other = self.value(match["one"]), self.value(match["other"].strip())
            if one is None or other is None or one <= 0 or other < 0:
                return None
            factor = (one + other) / one if match["how"].strip() == "+" else other / one
        return factor if factor is not None and 0 < factor < math.inf else None

    def _explained(self, text: str) -> Cell | None:
        if text in self.missing:
            return Cell(
                Kind.MISSING,
                math.nan,
                text,
                "expected a number, got an empty cell"
                if not text
                else f"expected a number, got {shown(text)}, which means missing",
                "Complete the export",
            )
        for kind, words, where in ((Kind.BELOW, self.below, "below"), (Kind.ABOVE, self.above, "above")):
            match = None if isinstance(words, tuple) else words.search(text)
            if match or (isinstance(words, tuple) and text in words):
                limit = match["limit"] if match and "limit" in match.re.groupindex else None
                beyond = f"{where} {limit}" if limit else f"{where} the instrument's range"
                expected = f"expected a number, got {shown(text)}, which means {beyond}"
                return Cell(kind, math.nan, text, expected, "Measure again inside the range")
        return None

    def _complaint(self, text: str) -> tuple[str, str]:
        """Say why a text is no number and what to do."""
        mark, other = self.decimal, "," if self.decimal == "." else "."
        name = f"expected a number with decimal {_MARK_NAMES[mark]}, got {shown(text)}"
        swapped = text.translate(str.maketrans(".,", ",."))
        if other in text and self.number.fullmatch(swapped):
            either = ", which may mean two numbers" if re.fullmatch(r"[^.,]*[.,][0-9]{3}", text) else ""
            return name + either, "Correct the export or set decimal or thousands in the layout"
        if "<" in text or ">" in text:
            return name, "Explain such cells in the layout: cells.below or cells.above"
        return name, "Correct the export, or explain such cells in the layout: cells.missing or cells.flags"


def converted(
    texts: Texts,
    convert: Callable[[str], Cell],
    quick: Callable[[str], float | None] | None = None,
    *,
    missing: bool = True,
) -> Numbers:
    """Convert a column of texts, each distinct text once; a row without text is an empty cell.

    Parameters
    ----------
    texts
        The column.
    convert
        Understands one text.
    quick
        Returns the number of a text that it understands at once, else None.
    missing
        Whether empty cells are listed among the odd ones; where nobody asks for them, listing 10⁵ takes its time.
    """
    cells: dict[int, Cell] = {}
    values = [quick(name) if quick is not None else None for name in (*texts.names, "")]
    for code, (name, value) in enumerate(zip((*texts.names, ""), values, strict=True)):
        if value is None:
            cells[code] = convert(name)
            values[code] = cells[code].value
    # The code -1 of a row without text picks the last value, that of an empty cell.
    found = np.array(values, dtype=np.float64)[texts.codes]
    unasked = () if missing else (Kind.MISSING,)
    is_odd = [code in cells and cells[code].kind not in (Kind.NUMBER, *unasked) for code in range(len(values))]
    odd = np.flatnonzero(np.array(is_odd, dtype=bool)[texts.codes])
    codes = texts.codes[odd].tolist()
    last = len(texts.names)
    return Numbers(
        found, {row: cells[code if code >= 0 else last] for row, code in zip(odd.tolist(), codes, strict=True)}
    )


def _folded(words: PatternOrWords) -> PatternOrWords:
    return tuple(fold(word) for word in words) if isinstance(words, tuple) else words
