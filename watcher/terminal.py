"""What the terminal shows: short tables and sentences that fit 80 columns, plain where nobody looks.

Colour is never the only sign: every verdict stands there as a word. Nothing here decides what is shown.
"""

from __future__ import annotations

import re
import sys
from typing import TYPE_CHECKING

from rich.console import Console
from rich.table import Table
from rich.text import Text

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

#: Widest line; a wider terminal gains nothing, since sentences are read in columns.
COLUMNS = 80
#: What follows a result in brackets: ``(95 %, k = 2.57, t with 5 dof)``, ``(not detected, 95 %)``.
_DETAILS = re.compile(r" \((?:not detected, )?\d[\d.]* %[^()]*\)$")
_STYLES = {
    "pass": "green",
    "done": "green",
    "warn": "yellow",
    "fail": "bold red",
    "refused": "bold red",
    "incomplete": "yellow",
    "waiting": "yellow",
    "unclaimed": "yellow",
    "not spiked": "dim",
}


def console(*, error: bool = False) -> Console:
    """Return a console for standard output or standard error, no wider than 80 columns."""
    stream = sys.stderr if error else sys.stdout
    made = Console(file=stream, highlight=False, soft_wrap=False, emoji=False, markup=False)
    if made.width > COLUMNS or not made.is_terminal:
        made.width = COLUMNS
    return made


def heading(out: Console, text: str) -> None:
    """Print a heading with a blank line above."""
    out.print()
    out.print(Text(text, style="bold"))


def word(verdict: str) -> Text:
    """Return a verdict or state, coloured."""
    return Text(verdict, style=_STYLES.get(verdict, ""))


def table(
    out: Console, header: Sequence[str], rows: Iterable[Sequence[str | Text]], *, numbers: Sequence[int] = ()
) -> None:
    """Print a table; the columns in `numbers` are set flush right, long texts are folded."""
    made = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="bold underline")
    for index, title in enumerate(header):
        made.add_column(title, justify="right" if index in numbers else "left", overflow="fold")
    for row in rows:
        # texts come from exports: nothing in them is markup
        made.add_row(*(cell if isinstance(cell, Text) else Text(_visible(cell)) for cell in row))
    out.print(made)


def short(result: str) -> str:
    """Return a result without its last bracket, which says confidence, k and degrees of freedom.

    >>> short("17.3 ± 1.9 µg/L (95 %, k = 2.57, t with 5 dof)")
    '17.3 ± 1.9 µg/L'
    """
    return _DETAILS.sub("", result)


def lines(out: Console, sentences: Iterable[str], *, indent: str = "") -> None:
    """Print sentences, wrapped, one below the other."""
    for sentence in sentences:
        for line in _visible(sentence).splitlines() or [""]:
            out.print(Text(f"{indent}{line}"))


def _visible(text: str) -> str:
    """Make control characters of foreign texts visible instead of letting them act on the terminal."""
    return "".join(c if c == "\n" or c.isprintable() else f"\\x{ord(c):02x}" for c in text)
