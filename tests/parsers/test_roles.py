"""The role of a row follows a fixed order of evidence, and a missing addition is never zero."""

from __future__ import annotations

import itertools
import math

import numpy as np

from parsers.readings import Role
from parsers.roles import UNKNOWN, settle

NOTHING = math.nan


def expected_role(by_label: int, by_column: int, added: float, *, level: bool, nominal: bool) -> int:
    """Say the role in the words of the rule, for one row."""
    if by_label != UNKNOWN:
        return by_label
    if by_column != UNKNOWN:
        return by_column
    if not math.isnan(added):
        return Role.UNSPIKED if added == 0 else Role.SPIKED
    if level:
        return Role.SPIKED
    return Role.STANDARD if nominal else UNKNOWN


def test_every_combination_of_evidence() -> None:
    """Label, column, addition, level, nominal decide in this order, in every combination."""
    rows = list(itertools.product((UNKNOWN, Role.BLANK), (UNKNOWN, Role.CHECK_STANDARD), (NOTHING, 0.0, 2.0, -1.0),
                                  (False, True), (False, True)))  # fmt: skip
    by_label, by_column, added, level, nominal = (np.array(column) for column in zip(*rows, strict=True))

    found = settle(by_label.astype(np.int8), by_column.astype(np.int8), (added,), level, nominal)

    wanted = [expected_role(int(a), int(b), c, level=bool(d), nominal=bool(e)) for a, b, c, d, e in rows]
    assert found.tolist() == wanted


def test_any_of_several_additions_makes_a_row_spiked() -> None:
    """A row with a spike volume is spiked, even where its concentration column says zero."""
    none = np.array([UNKNOWN], dtype=np.int8)
    nothing = np.array([False])

    assert settle(none, none, (np.array([0.0]), np.array([5.0])), nothing, nothing).tolist() == [Role.SPIKED]
    assert settle(none, none, (np.array([5.0]), np.array([0.0])), nothing, nothing).tolist() == [Role.SPIKED]
