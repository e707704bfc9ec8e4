"""How texts are compared, shown and corrected: blanks folded, long cells shortened, close words suggested.

Nothing here knows what a text is for.
"""

from __future__ import annotations

import difflib
import re
import unicodedata
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Texts

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

_OTHER_BLANKS = re.compile(r"[\t\v\f\r\x1c-\x1f]")

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


def folded(texts: Sequence[str]) -> Sequence[str]:
    """Fold many trimmed texts; where all of them are plain, as in most exports, they are returned as they are."""
    together = "\n".join(texts)
    plain = together.isascii() and "  " not in together and not _OTHER_BLANKS.search(together)
    return texts if plain and together.count("\n") == max(len(texts) - 1, 0) else [fold(text) for text in texts]


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


def renamed(texts: Texts, names: Sequence[str | None]) -> Texts:
    """Return the column with its distinct texts replaced in order; equal ones become one text, None is absent."""
    if names is texts.names:
        return texts
    return looked_up(Texts.of(names), texts)


def looked_up(of_names: Texts, texts: Texts) -> Texts:
    """Return for each row what belongs to its text; `of_names` has one entry for each of the distinct texts."""
    # The code -1 of an absent text picks the element appended at the end, which is -1 again.
    return Texts(np.append(of_names.codes, np.int32(-1))[texts.codes], of_names.names)
