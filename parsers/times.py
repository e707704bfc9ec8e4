"""Times of measurement: texts in their declared forms to seconds since 1970-01-01 of the local time that was written.

Nothing here knows rows or columns.
"""

from __future__ import annotations

import math
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from parsers.cells import Cell, Grammar, Kind
from parsers.spelling import fold, folded, shown

if TYPE_CHECKING:
    from collections.abc import Sequence

#: From so many distinct times on they are read all at once.
MANY_TIMES = 500
#: … if they lie in here.
PLAUSIBLE = (pd.Timestamp(1900, 1, 1), pd.Timestamp(2200, 1, 1))


def times_at_once(names: Sequence[str], forms: Sequence[str]) -> dict[str, float]:
    """Read many times of the one declared form quickly; what is not among the answer is read one by one."""
    # zones, and fractions of a second (of which pandas reads more digits), are read one by one
    if len(forms) != 1 or len(names) < MANY_TIMES or any(code in forms[0].lower() for code in ("%z", "%f")):
        return {}
    found = pd.to_datetime(pd.Series(folded(names), dtype="object"), format=forms[0], errors="coerce", exact=True)
    seconds = (found.to_numpy(dtype="datetime64[us]").astype(np.int64) / 1e6).tolist()
    # pandas knows a year 0, which nobody measured in: what lies far off is read one by one as well
    fine = (found.notna() & found.between(*PLAUSIBLE)).tolist()
    return {name: at for name, at, good in zip(names, seconds, fine, strict=True) if good}


def read_time(text: str, forms: Sequence[str], grammar: Grammar) -> Cell:
    """Understand one time by the first of the forms that fits."""
    folded = fold(text)
    for form in forms:
        try:
            moment = datetime.strptime(folded, form)  # noqa: DTZ007 (exports write local time)
        except ValueError:
            continue
        # The wall clock is counted as if it were UTC, so that no zone of this computer slips in.
        return Cell(Kind.NUMBER, moment.replace(tzinfo=UTC).timestamp(), text)
    if folded in grammar.missing:
        return Cell(Kind.MISSING, math.nan, text)
    written = " or ".join(repr(form) for form in forms)
    expected = f"expected a time in the form {written}, got {shown(text)}"
    return Cell(Kind.UNREADABLE, math.nan, text, expected, "Correct the export, or the format in the layout")
