"""Rows of an export become solutions: one prepared vessel each, with the mean of its replicate readings.

Replicate readings of one solution are no independent preparations, so only their mean goes further. What belongs
to a faulty cell is marked, never left out. Knows no series, no line, no limit.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from rules.line import Segments

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.line import Floats, Integers


@dataclass(frozen=True, slots=True)
class Solutions:
    """The solutions of an export in run order.

    Attributes
    ----------
    rows
        int64[n], the row of the `Readings` that stands for each solution (its first).
    members
        int64[r], all rows, those of one solution together; `segments` says where each solution's rows lie.
    signal
        float64[n], mean y of the replicate readings; NaN where none can be used.
    signal_sd
        float64[n], standard deviation of the readings; NaN where there are fewer than two.
    readings
        float64[n], number of readings behind the mean.
    faults
        Solution to the sentences of what is wrong with its cells.
    """

    rows: Integers
    members: Integers
    segments: Segments
    signal: Floats
    signal_sd: Floats
    readings: Floats
    faults: dict[int, list[str]]

    def __len__(self) -> int:
        """Return the number of solutions."""
        return len(self.rows)

    def rows_of(self, solution: int) -> Integers:
        """Return the rows of one solution."""
        start = int(self.segments.starts[solution])
        return self.members[start : start + int(self.segments.sizes[solution])]


def run_order(readings: Readings) -> Integers:
    """Return the rows in the order in which they were measured: by time, else by position, else as in the file.

    Exports stand one after the other where rows were lent by others; positions count within each.
    """
    if len(readings) and np.isfinite(readings.measured_at).all():
        return np.argsort(readings.measured_at, kind="stable").astype(np.int64)
    if len(readings) and np.isfinite(readings.position).all():
        export = np.cumsum(np.diff(readings.origin.codes, prepend=readings.origin.codes[:1]) != 0)
        return np.lexsort((readings.position, export)).astype(np.int64)
    return np.arange(len(readings), dtype=np.int64)


def gather(readings: Readings) -> Solutions:
    """Gather the rows of an export into solutions.

    Rows with a replicate number belong together as long as label, analyte and channel stay the same; a number that
    comes again opens a further solution. Every other row is a solution of its own.

    Returns
    -------
    Solutions
        In run order.
    """
    order = run_order(readings)
    members, sizes = _replicates(readings, order)
    segments = Segments.of_sizes(sizes)
    rows = members[segments.starts]
    y = readings.signals[members]
    y = y / _references(readings)[members][:, None]
    present = np.isfinite(y)
    count = segments.sum(present.sum(axis=1).astype(float))
    with np.errstate(invalid="ignore", divide="ignore"):
        signal = segments.sum(np.where(present, y, 0).sum(axis=1)) / count
        deviations = np.where(present, y - segments.spread(signal)[:, None], 0)
        sd = np.sqrt(segments.sum((deviations**2).sum(axis=1)) / np.where(count > 1, count - 1, np.nan))
    sd, count = _stated_scatter(readings, rows, signal, sd, count)
    return Solutions(rows, members, segments, signal, sd, count, _faults(readings, members, segments))


def _references(readings: Readings) -> Floats:
    """Return what the signal of each row is divided by: its internal standard's signal, 1 where there is none."""
    reference = readings.reference_signal.values
    with np.errstate(invalid="ignore"):
        possible = (reference > 0) & np.isfinite(reference)
        return np.where(np.isnan(reference), 1.0, np.where(possible, reference, np.nan))


def _reference_faults(readings: Readings) -> Iterator[tuple[int, str]]:
    """Yield rows whose internal standard is missing or impossible, with the sentence that says so."""
    reference = readings.reference_signal.values
    if np.isnan(reference).all():
        return
    analyte = readings.analyte.codes
    referred = np.bincount(analyte, weights=np.isfinite(reference), minlength=len(readings.analyte.names)) > 0
    marked = {fault.row for fault in readings.faults if fault.field == "reference_signal"}
    possible = (reference > 0) & np.isfinite(reference)
    for row in np.flatnonzero(referred[analyte] & ~possible).tolist():
        if row not in marked:
            found = "nothing" if np.isnan(reference[row]) else f"{reference[row]:g}"
            yield (
                row,
                (
                    f"line {readings.line[row]}: expected the signal of the internal standard above 0, got {found}: "
                    f"the other readings of {readings.analyte[row]} have one; correct the export or measure it again"
                ),
            )


def _replicates(readings: Readings, order: Integers) -> tuple[Integers, NDArray[Any]]:
    replicate = readings.replicate[order]
    numbered = np.isfinite(replicate)
    if not numbered.any():
        return order, np.ones(len(order), dtype=np.int64)
    keys = [column.codes[order] for column in (readings.label, readings.analyte, readings.channel)]
    # stable: within one label, analyte and channel the rows stay in run order
    label, analyte, channel = keys
    by_key = np.lexsort((np.arange(len(order)), channel, analyte, label))
    same = np.ones(len(order) - 1, dtype=bool)
    for key in keys:
        same &= key[by_key][1:] == key[by_key][:-1]
    begins = _begins(np.concatenate(([False], same)), replicate[by_key])
    solution = np.cumsum(begins) - 1
    first = np.full(int(solution[-1]) + 1, len(order), dtype=np.int64)
    np.minimum.at(first, solution, by_key)
    # solutions in the order of their first row, rows of one solution together
    place = np.argsort(np.argsort(first, kind="stable"), kind="stable")[solution]
    final = np.lexsort((by_key, place))
    return order[by_key[final]], np.bincount(place)


def _begins(same: NDArray[np.bool_], replicate: Floats) -> NDArray[np.bool_]:
    """Where a solution begins: another label, no number, or a number that the solution holds already."""
    begins = np.ones(len(same), dtype=bool)
    held: set[float] = set()
    for place, (continues, number) in enumerate(zip(same.tolist(), replicate.tolist(), strict=True)):
        if continues and number == number and number not in held:  # noqa: PLR0124 - NaN: a row without number
            begins[place] = False
        else:
            held = set()
        held.add(number)
    return begins


#: What all replicate rows of a solution must agree on.
_SHARED = (
    "role", "level", "stock", "added", "nominal", "spike_volume", "aliquot", "made_up_to", "predilution",
    "duplicate_of",
)  # fmt: skip


def _disagreements(readings: Readings, members: Integers, segments: Segments) -> Iterator[tuple[int, str]]:
    """Yield solutions whose replicate rows contradict each other, with the sentence that says so."""
    if len(segments.sizes) == len(members):
        return
    first = segments.spread(members[segments.starts])
    for name in _SHARED:
        column = getattr(readings, name)
        values = getattr(column, "values", getattr(column, "codes", column))
        differs = (values[members] != values[first]) & ~(_absent(values[members]) & _absent(values[first]))
        for place in np.flatnonzero(np.bincount(segments.owner[differs], minlength=len(segments.sizes))).tolist():
            line = readings.line[members[segments.starts[place]]]
            yield place, f"line {line}: its replicate rows disagree on {name}: correct the export"


def _absent(values: NDArray[Any]) -> NDArray[np.bool_]:
    return np.isnan(values) if values.dtype.kind == "f" else np.zeros(len(values), dtype=bool)


def _stated_scatter(
    readings: Readings, rows: Integers, signal: Floats, sd: Floats, count: Floats
) -> tuple[Floats, Floats]:
    """Take standard deviation and number of readings from the export where only a mean is given."""
    stated_sd = readings.signal_sd[rows] / _references(readings)[rows]
    stated_rsd = readings.signal_rsd[rows] / 100 * np.abs(signal)
    single = count <= 1
    sd = np.where(single & np.isfinite(stated_sd), stated_sd, sd)
    sd = np.where(single & ~np.isfinite(sd) & np.isfinite(stated_rsd), stated_rsd, sd)
    number = readings.readings[rows]
    return sd, np.where(single & np.isfinite(number), number, count)


def _faults(readings: Readings, members: Integers, segments: Segments) -> dict[int, list[str]]:
    faults: dict[int, list[str]] = defaultdict(list)
    for place, sentence in _disagreements(readings, members, segments):
        faults[place].append(sentence)
    unreferred = list(_reference_faults(readings))
    if not readings.faults and not unreferred:
        return dict(faults)
    solution_of = np.empty(len(readings), dtype=np.int64)
    solution_of[members] = segments.owner
    for row, sentence in unreferred:
        faults[int(solution_of[row])].append(sentence)
    for fault in readings.faults:
        faults[int(solution_of[fault.row])].append(str(fault))
    return dict(faults)
