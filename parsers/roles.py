"""The role of each row: by label rule, else by the role column, else by its addition, else by level or nominal.

A row for which nothing says it stays without role; a missing addition never counts as zero. Nothing here raises.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from parsers.readings import Floats

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
    for added in reversed(additions):
        role[added == 0] = Role.UNSPIKED
    for added in additions:
        role[np.isfinite(added) & (added != 0)] = Role.SPIKED
    role = np.where(by_column != UNKNOWN, by_column, role)
    return np.where(by_label != UNKNOWN, by_label, role)
