"""Which odd cells spoil a series, and how every distinct label was understood.

Nothing here reads a cell.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from parsers import fields
from parsers.cells import Cell, Kind
from parsers.readings import Fault, LabelUse, Role, Texts
from parsers.roles import is_sample

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.values import Odd, Values

_FOLLOWS = "Its series is not evaluated."
_ROLES = [role.word for role in Role]


def find_faults(values: Values, present: NDArray[np.bool_], role: NDArray[np.int8]) -> tuple[Fault, ...]:
    """Return the faults of the readings that there are, in their order.

    Parameters
    ----------
    values
        The fields of the rows, with their odd cells.
    present
        bool[rows, entries]: which readings there are.
    role
        int8[rows], role codes.
    """
    number = (np.cumsum(present.ravel()) - 1).reshape(present.shape)
    samples = is_sample(role)
    faults = []
    for odd in values.odd:
        for row, cell in odd.cells.items():
            if not _fails(odd, cell, on_sample=bool(samples[row])):
                continue
            sentence = f"{cell.expected}. {_FOLLOWS} {cell.remedy}."
            line = values.table.line_of(row, odd.column)
            for entry in range(present.shape[1]) if odd.entry is None else (odd.entry,):
                if present[row, entry]:
                    at = int(number[row, entry])
                    faults.append(Fault(at, line, odd.header, cell.text, odd.field, sentence))
    return tuple(sorted(faults, key=lambda fault: fault.row))


def _fails(odd: Odd, cell: Cell, *, on_sample: bool) -> bool:
    """Tell whether a cell that gave no value spoils its series."""
    if odd.field in fields.BESIDE:
        return False  # a word where a statistic or a reported number belongs does not spoil the reading
    if cell.kind is not Kind.MISSING:
        return True
    if odd.optional or not odd.in_table:
        return False
    return odd.field == "signal" or (odd.field in fields.NEEDED_ON_SAMPLES and on_sample)


def label_uses(values: Values, role: NDArray[np.int8], sample: Texts) -> tuple[LabelUse, ...]:
    """Return how each distinct label was understood; where its rows have unlike roles, the role is ``by row``."""
    label = values.label
    rows = np.flatnonzero(label.codes >= 0)
    codes = label.codes[rows]
    counts = np.bincount(codes, minlength=len(label.names)).tolist()
    first = np.zeros(len(label.names), dtype=np.int64)
    first[codes[::-1]] = rows[::-1]  # written backwards, so that the first row of each label stays
    words = [_ROLES[code] for code in role[first].tolist()]
    for code in set(codes[role[rows] != role[first[codes]]].tolist()):
        words[code] = "by row"
    number = values.understood.rule.tolist()
    rules = [*(rule.written for rule in values.layout.labels), ""]  # the index -1 of no rule picks the last one
    written = [rules[at] for at in number]
    levels = values.understood.said.get("level", Texts.absent(len(number)))
    level = [*levels.names, ""]
    said = [level[code] for code in levels.codes.tolist()]
    name = [*sample.names, ""]
    samples = [name[code] for code in sample.codes[first].tolist()]
    if values.layout.labels and -1 in number:
        words = ["" if at < 0 else word for at, word in zip(number, words, strict=True)]
        samples = ["" if at < 0 else text for at, text in zip(number, samples, strict=True)]
    return tuple(map(LabelUse, label.names, written, words, samples, said, counts))
