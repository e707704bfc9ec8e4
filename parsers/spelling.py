"""How texts are compared, shown and corrected: blanks folded, long cells shortened, close words suggested.

Nothing here knows what a text is for.
"""

from __future__ import annotations

import difflib
import unicodedata
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Texts

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

#: Longest piece of an export that an error quotes, in characters.
SHOWN_CHARACTERS = 80


def fold(text: str) -> str:
    """Return the form in which texts are compared: no blanks at the ends, each run of blanks one blank.

    Non-breaking blanks and line breaks are blanks. Letters with accents compare equal however they are composed.

    >>> fold("  SED-12   A ")
    'SED-12 A'
    """
    folded = " ".join(text.split())
    return folded if folded.isascii() else unicodedata.normalize("NFC", folded)


def shown(text: str) -> str:
    """Quote a piece of an export, shortened where it is long."""
    return repr(text if len(text) <= SHOWN_CHARACTERS else text[: SHOWN_CHARACTERS - 1] + "…")


def listed(words: Iterable[str]) -> str:
    """Quote words in a row.

    >>> listed(["R1", "R2"])
    "'R1', 'R2'"
    """
    return ", ".join(repr(word) for word in words)


def suggestion(word: str, known: Iterable[str]) -> str:
    """Return `` Did you mean 'x'?`` (with the blank before it) where a known word is close, else nothing."""
    lowered = {candidate.lower(): candidate for candidate in known}
    close = difflib.get_close_matches(word.lower(), lowered, n=1, cutoff=0.6)
    return f" Did you mean {lowered[close[0]]!r}?" if close else ""


def renamed(texts: Texts, rename: Callable[[str], str | None]) -> Texts:
    """Return the column with each distinct text replaced once; equal results become one text, None is absent."""
    names = [rename(name) for name in texts.names]
    if names == list(texts.names):
        return texts
    distinct = Texts.of(names)
    # The code -1 of an absent text picks the element appended at the end, which is -1 again.
    return Texts(np.append(distinct.codes, np.int32(-1))[texts.codes], distinct.names)
