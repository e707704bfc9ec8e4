"""Columns of a wide table whose analytes have names: each has its signal, and perhaps its concentration, beside it.

Only headers of one form are read: a name, a blank, and the word or unit that tells the column's kind.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from parsers.drafting.patterns import literal
from parsers.drafting.vocabulary import field_of, measure
from parsers.drafting.wide import Wide

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from parsers.drafting.headers import Header

_NAMED = re.compile(r"(?P<name>[^\W\d_]{3,}) (?P<kind>\S+)")
#: One analyte is no group: its columns have names of their own.
FEWEST = 2


def find_named(
    headers: Sequence[Header],
    taken: set[int],
    is_numbers: Callable[[int], bool],
    column: Callable[[int], list[str]],
) -> Wide | None:
    """Find the columns of named analytes; None where the headers do not come in such groups.

    Parameters
    ----------
    headers
        All headers.
    taken
        Columns that have a field already.
    is_numbers, column
        Tell whether a column holds numbers, and return its cells.
    """
    signals: dict[str, dict[str, int]] = {}
    beside: dict[str, int] = {}
    for at, header in enumerate(headers):
        match = _NAMED.fullmatch(header.written)
        if match is None or at in taken or not is_numbers(at):
            continue
        if measure(match["kind"].strip("()[]")) == "concentration":
            beside[match["name"]] = at
        elif "signal" in field_of(match["kind"]):
            signals.setdefault(match["kind"], {})[match["name"]] = at
    if len(signals) != 1:
        return None
    ((kind, named),) = signals.items()
    if len(named) < FEWEST or (beside and beside.keys() != named.keys()):
        return None
    pattern = rf"^(?P<analyte>[^\W\d_]+) {literal(kind)}$"
    if sum(re.search(pattern, header.written) is not None for header in headers) != len(named):
        return None
    found = Wide(pattern, {}, list(named.values()), [], [headers[at].written for at in beside.values()])
    found.zero_is_none = bool(beside) and _zero_is_none(named, beside, column)
    return found


def _zero_is_none(named: Mapping[str, int], beside: Mapping[str, int], column: Callable[[int], list[str]]) -> bool:
    """Tell whether every signal of zero, and no other, lacks a concentration beside it: no peak was found there."""
    pairs = [
        (not signal.strip("0.,"), not concentration)
        for name, at in named.items()
        for signal, concentration in zip(column(at), column(beside[name]), strict=True)
        if signal
    ]
    return any(zero for zero, _ in pairs) and all(zero == empty for zero, empty in pairs)
