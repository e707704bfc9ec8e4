"""Several readings of one row, each read by a map of its own, put together in the order of the export.

Nothing here reads a row.
"""

from __future__ import annotations

from dataclasses import fields as fields_of
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import ColumnUse, LabelUse, Quantities, Readings, Texts

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray


def joined(parts: Sequence[Readings]) -> Readings:
    """Return all readings in the order of their lines; what belongs to the export as a whole is kept once."""
    if len(parts) == 1:
        return parts[0]
    order = np.argsort(np.concatenate([part.line for part in parts]), kind="stable")
    width = max(part.signals.shape[1] for part in parts)
    columns: dict[str, Any] = {}
    for one in fields_of(Readings):
        found = [getattr(part, one.name) for part in parts]
        if one.name == "signals":
            found = [np.pad(part, ((0, 0), (0, width - part.shape[1])), constant_values=np.nan) for part in found]
        if isinstance(found[0], (np.ndarray, Texts, Quantities)):
            columns[one.name] = _together(found, order)
    place = np.empty(len(order), dtype=np.int64)
    place[order] = np.arange(len(order))
    faults, before = [], 0
    for part in parts:
        faults += [replace(fault, row=int(place[fault.row + before])) for fault in part.faults]
        before += len(part)
    read = set(columns["line"].tolist())
    aside = dict.fromkeys(one for part in parts for one in part.set_aside if one.line not in read)
    return Readings(
        **columns,
        faults=tuple(sorted(faults, key=lambda fault: fault.row)),
        set_aside=tuple(sorted(aside, key=lambda one: one.line)),
        problems=tuple(dict.fromkeys(problem for part in parts for problem in part.problems)),
        labels=_labels(parts),
        columns=_columns(parts),
        heading=parts[0].heading,
        lines=parts[0].lines,
    )


def _together(found: list[Any], order: NDArray[np.int64]) -> Any:
    if isinstance(found[0], Quantities):
        values = np.concatenate([one.values for one in found])[order]
        return Quantities(values, _together([one.units for one in found], order))
    if isinstance(found[0], Texts):
        texts = [one[row] for one in found for row in range(len(one.codes))]
        return Texts.of([texts[at] for at in order.tolist()])
    return np.concatenate(found)[order]


def _labels(parts: Sequence[Readings]) -> tuple[LabelUse, ...]:
    uses: dict[tuple[str, ...], LabelUse] = {}
    for use in (use for part in parts for use in part.labels):
        key = (use.label, use.rule, use.role, use.sample, use.level)
        uses[key] = replace(use, rows=use.rows + uses[key].rows) if key in uses else use
    return tuple(uses.values())


def _columns(parts: Sequence[Readings]) -> tuple[ColumnUse, ...]:
    together = zip(*(part.columns for part in parts), strict=True)
    return tuple(
        ColumnUse(uses[0].header, tuple(dict.fromkeys(name for use in uses for name in use.fields)))
        for uses in together
    )
