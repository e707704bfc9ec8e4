"""Solutions become series: those of one sample, analyte and channel that belong together, by attempts.

Only unspiked and spiked solutions form series; standards, blanks and check standards recur by nature and serve the
whole batch. Knows no signals and no limits.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Role
from rules.line import Segments

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Readings
    from rules.line import Integers
    from rules.method import Method
    from rules.solutions import Solutions
    from rules.vessels import Vessels

    Bools = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Series:
    """All series of an export, sorted by first appearance in the run.

    Attributes
    ----------
    members
        int64[k], solutions, those of one series together and in run order.
    segments
        Where each series lies in `members`.
    attempt
        int64[m], from 1.
    sample, analyte, channel
        int32[m], codes of the columns of the readings; channel -1 where there is none.
    spiked
        bool[k], members that are additions of the analyte.
    unspiked
        bool[k], members that are the sample as it is.
    further
        bool[k], spiked vessels without the analyte: their stock does not contain it.
    has_additions, has_native
        bool[m].
    repeated
        bool[m], series that were measured again although the settings refuse repeats.
    """

    members: Integers
    segments: Segments
    attempt: Integers
    sample: NDArray[np.int32]
    analyte: NDArray[np.int32]
    channel: NDArray[np.int32]
    spiked: Bools
    unspiked: Bools
    further: Bools
    has_additions: Bools
    has_native: Bools
    repeated: Bools

    def __len__(self) -> int:
        """Return the number of series."""
        return len(self.attempt)

    def members_of(self, series: int) -> Integers:
        """Return the solutions of one series."""
        start = int(self.segments.starts[series])
        return self.members[start : start + int(self.segments.sizes[series])]


def group(readings: Readings, solutions: Solutions, vessels: Vessels, method: Method) -> Series:
    """Group solutions by sample, analyte and channel, and number the attempts.

    A new attempt opens at an unspiked solution that comes after every addition of a complete attempt (one that has
    an unspiked solution and an addition) and is followed by an addition. Repeated levels before that are further
    preparations of the same attempt.
    """
    role = readings.role[solutions.rows]
    chosen = np.flatnonzero((role == Role.UNSPIKED) | (role == Role.SPIKED))
    rows = solutions.rows[chosen]
    keys = [column.codes[rows] for column in (readings.sample, readings.analyte, readings.channel)]
    sample, analyte, channel = keys
    order = np.lexsort((chosen, channel, analyte, sample))
    members = chosen[order]
    sorted_keys = [key[order] for key in keys]
    group_begins = _changes(sorted_keys)
    spiked = (role[members] == Role.SPIKED) & ~vessels.not_added[members]
    further = (role[members] == Role.SPIKED) & vessels.not_added[members]
    unspiked = role[members] == Role.UNSPIKED
    opens = _attempts_open(group_begins, spiked, unspiked, further)
    repeated_group = _group_any(group_begins, opens)
    if method.repeats != "new attempt":
        opens[:] = False
    begins = group_begins | opens
    starts = np.flatnonzero(begins)
    # series in the order in which their first solution was measured
    first_seen = np.argsort(members[starts], kind="stable")
    sizes = np.diff(np.append(starts, len(members)))[first_seen]
    shuffle = _concatenated(starts[first_seen], sizes)
    attempt = (np.cumsum(opens) - _at_group_begin(np.cumsum(opens), group_begins) + 1)[starts][first_seen]
    segments = Segments.of_sizes(sizes)
    spiked, unspiked, further = spiked[shuffle], unspiked[shuffle], further[shuffle]
    at = starts[first_seen]
    return Series(
        members=members[shuffle],
        segments=segments,
        attempt=attempt.astype(np.int64),
        sample=sorted_keys[0][at],
        analyte=sorted_keys[1][at],
        channel=sorted_keys[2][at],
        spiked=spiked,
        unspiked=unspiked,
        further=further,
        has_additions=segments.sum(spiked.astype(float)) > 0,
        has_native=segments.sum(unspiked.astype(float)) > 0,
        repeated=repeated_group[at] & (method.repeats == "refuse"),
    )


def _changes(keys: list[NDArray[Any]]) -> Bools:
    """Where a sorted array of keys begins a new group."""
    n = len(keys[0])
    begins = np.zeros(n, dtype=bool)
    begins[:1] = True
    for key in keys:
        begins[1:] |= key[1:] != key[:-1]
    return begins


def _at_group_begin(running: NDArray[Any], group_begins: Bools) -> NDArray[Any]:
    """Spread the value at the begin of each group over the group."""
    starts = np.flatnonzero(group_begins)
    return np.asarray(np.repeat(running[starts], np.diff(np.append(starts, len(running)))))


def _group_any(group_begins: Bools, values: Bools) -> Bools:
    """Whether any member of the group holds, for every member."""
    group = np.cumsum(group_begins) - 1
    return np.asarray(np.isin(group, group[values]), dtype=bool)


def _attempts_open(group_begins: Bools, spiked: Bools, unspiked: Bools, further: Bools) -> Bools:
    """Members at which a further attempt opens."""
    n = len(spiked)
    if not n:
        return np.zeros(0, dtype=bool)
    counts = np.cumsum(spiked)
    before: NDArray[np.int64] = counts - spiked
    starts = np.flatnonzero(group_begins)
    ends = np.append(starts[1:], n) - 1
    sizes = ends - starts + 1
    followed = np.repeat(counts[ends], sizes) > counts
    natives = np.cumsum(unspiked)
    native_before = natives - unspiked - _at_group_begin(natives - unspiked, group_begins) > 0
    # the previous unspiked or spiked member of the analyte; vessels without it say nothing
    latest = np.maximum.accumulate(np.where(further, 0, np.arange(n)))
    previous_spiked = np.zeros(n, dtype=bool)
    previous_spiked[1:] = spiked[latest[:-1]]
    started = before - _at_group_begin(before, group_begins) > 0
    opens: Bools = unspiked & previous_spiked & followed & native_before & started & ~group_begins
    return opens


def _concatenated(starts: NDArray[Any], sizes: NDArray[Any]) -> NDArray[Any]:
    """Concatenate the ranges ``starts[i] … starts[i] + sizes[i]``."""
    if not len(starts):
        return np.zeros(0, dtype=np.int64)
    offsets = np.repeat(starts - np.concatenate(([0], np.cumsum(sizes)[:-1])), sizes)
    return offsets + np.arange(int(sizes.sum()))
