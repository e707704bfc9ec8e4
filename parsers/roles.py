"""The role of each row: by label rule, else by the role column, else by its addition, else by level or nominal.

A row for which nothing says it is a fault of that row; a missing addition never counts as zero. Nothing here refuses an
export.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from parsers.cells import Cell, Kind
from parsers.readings import ROLE_WORDS, Role
from parsers.spelling import listed, shown

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from parsers.readings import Floats, Quantities, Texts
    from parsers.values import Values

#: A row for which nothing says the role.
UNKNOWN = -1


def settle(
    by_label: NDArray[np.int8],
    by_column: NDArray[np.int8],
    additions: Sequence[Floats],
    has_level: NDArray[np.bool_],
    has_nominal: NDArray[np.bool_],
) -> NDArray[np.int8]:
    """Return the role code of each row, `UNKNOWN` where nothing says it.

    Parameters
    ----------
    by_label, by_column
        int8[n], role codes; `UNKNOWN` where they say nothing.
    additions
        float64[n] each: what was added, NaN where the row does not say.
    has_level, has_nominal
        Whether a row has a level of addition, or a nominal concentration.
    """
    role = np.full(len(by_label), UNKNOWN, dtype=np.int8)
    role[has_nominal] = Role.STANDARD
    role[has_level] = Role.SPIKED
    for added in additions:
        role[added == 0] = Role.UNSPIKED
    for added in additions:
        role[np.isfinite(added) & (added != 0)] = Role.SPIKED
    role = np.where(by_column != UNKNOWN, by_column, role)
    return np.where(by_label != UNKNOWN, by_label, role)


def find_roles(
    values: Values, added: Quantities, spike_volume: Quantities, level: Texts, nominal: Quantities
) -> NDArray[np.int8]:
    """Return the role code of each row; what nothing says is noted in the values as unreadable.

    A row in doubt counts as spiked: its addition is unknown, and must never be taken for none.
    """
    by_label = np.append(values.understood.role, np.int8(UNKNOWN))[values.label.codes]
    said = values.texts("role")
    by_word = np.array([ROLE_WORDS.get(word, UNKNOWN) for word in (*said.names, "")], dtype=np.int8)
    by_column = by_word[said.codes]
    strange = (said.codes >= 0) & (by_column == UNKNOWN) & (by_label == UNKNOWN)
    additions = (added.values, spike_volume.values)
    role = settle(by_label, by_column, additions, level.codes >= 0, np.isfinite(nominal.values))
    unsaid = (role == UNKNOWN) & ~strange
    if strange.any():
        _note_strange(values, strange, said)
    if unsaid.any():
        _note_unsaid(values, unsaid)
    return np.where(strange | unsaid, np.int8(Role.SPIKED), role).astype(np.int8)


def is_sample(role: NDArray[np.int8]) -> NDArray[np.bool_]:
    """Tell which rows are solutions of a sample, spiked or not."""
    return np.isin(role, (Role.UNSPIKED, Role.SPIKED))


def _note_strange(values: Values, rows: NDArray[np.bool_], said: Texts) -> None:
    cells = {}
    for row in np.flatnonzero(rows).tolist():
        word = said[row] or ""
        expected = f"expected a role ({listed(ROLE_WORDS)}), got {shown(word)}"
        document = values.layout.document
        todo = f"Explain the word in {document.path}, line {document.line(('columns', 'role'))}: columns.role.map"
        cells[row] = Cell(Kind.UNREADABLE, np.nan, word, expected, todo)
    values.doubt("role", values.header_of("role"), cells)


def _note_unsaid(values: Values, rows: NDArray[np.bool_]) -> None:
    """Note rows without role, except those that have a fault already which explains it."""
    known = {row for odd in values.odd for row, cell in odd.cells.items() if cell.kind is not Kind.MISSING}
    mapped = next((name for name in ("added", "spike_volume") if name in values.plan.mapped), None)
    what = "expected an addition, got an empty cell, and nothing else says" if mapped else "nothing says"
    expected = f"{what} whether this is unspiked, spiked or a standard"
    todo = "Complete the export, or add a label rule to the layout"
    cells = {}
    for row in sorted(set(np.flatnonzero(rows).tolist()) - known):
        text = "" if mapped else values.label[row] or ""
        cells[row] = Cell(Kind.UNREADABLE, np.nan, text, expected, todo)
    values.doubt("role", values.header_of(mapped or "label"), cells)
