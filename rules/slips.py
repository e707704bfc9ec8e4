"""Volume slips: one vessel that does not fit the line of the others, recognised by what its signal is equal to.

If leaving out one vessel repairs the line, and its signal is that of no addition, of a double one or of a neighbour's,
the sentence names the vessel; so does a common factor in most analytes of the sample. The point stays in the line: what
happened is for a person to say. The line without the vessel is an ordinary least squares line.
"""

from __future__ import annotations

from collections import Counter, defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from rules.checks import Outcome
from rules.figures import figure

if TYPE_CHECKING:
    from rules.case import Case
    from rules.outcomes import Outcomes

#: Fewest solutions of a line from which one can be left out.
FEWEST_SOLUTIONS = 4
#: A line is repaired where no other solution lies farther off it, relative to its fitted signal.
REPAIRED = 0.03
#: A vessel does not fit where it lies off the others' line by so much, and by so many times their largest deviation.
OFF, TIMES = 0.1, 4.0
#: How near to a simple slip the addition must be, relative to it.
NEAR = 0.15
#: Series of a sample that must show the same vessel before a mere factor counts, and which share of its failing ones.
FEWEST_SERIES, MOSTLY = 3, 2 / 3
#: Checks that a slip can fail.
TOUCHED = frozenset(
    ("recovery", "curvature", "lack_of_fit", "residual", "correlation", "slope_certainty", "linear_evidence", "levels")
)


@dataclass(frozen=True, slots=True)
class Slip:
    """A vessel that does not fit.

    Attributes
    ----------
    label
        The vessel.
    words
        What its signal is like; empty where it is like nothing simple.
    factor
        Its signal divided by what the others' line says.
    """

    label: str
    words: str
    factor: float

    @property
    def sentence(self) -> str:
        """Say what was seen."""
        told = self.words or f"reads {figure(self.factor, 2)} times what the line of the other vessels says"
        return f"vessel '{self.label}' {told}"


def find_slips(outcomes: Outcomes) -> dict[int, Slip]:
    """Return for each failing series the vessel that explains it, as far as one does."""
    case = outcomes.case
    seen: dict[tuple[int, int], dict[int, Slip]] = defaultdict(dict)
    failing: Counter[tuple[int, int]] = Counter()
    for i in range(len(case)):
        failed = {check.name for check in outcomes.deciding(i, Outcome.FAIL)}
        if not failed or not failed <= TOUCHED or case.fits.of_series[i] < 0:
            continue
        sample = (int(case.series.sample[i]), int(case.series.attempt[i]))
        failing[sample] += 1
        slip = _of_series(case, i)
        if slip is not None:
            seen[sample][i] = slip
    found: dict[int, Slip] = {}
    for sample, slips in seen.items():
        found |= _common(slips, failing[sample])
    return found


def _common(slips: dict[int, Slip], failing: int) -> dict[int, Slip]:
    """Return one slip for the series of a sample that show the same vessel; else each simple slip by itself."""
    (label, count) = Counter(slip.label for slip in slips.values()).most_common(1)[0]
    of_vessel = {i: slip for i, slip in slips.items() if slip.label == label}
    if count >= FEWEST_SERIES and count >= MOSTLY * failing:
        words, times = Counter(slip.words for slip in of_vessel.values()).most_common(1)[0]
        factor = float(np.median([slip.factor for slip in of_vessel.values()]))
        alike = {i for i, slip in of_vessel.items() if abs(slip.factor / factor - 1) <= NEAR}
        if words and times >= MOSTLY * count:
            return dict.fromkeys(of_vessel, Slip(label, words, factor))
        if len(alike) >= MOSTLY * count:
            return dict.fromkeys(alike, Slip(label, "", factor))
    return {i: slip for i, slip in slips.items() if slip.words}


def _of_series(case: Case, i: int) -> Slip | None:
    """Return the one vessel without which the line of a series is in order; None where there is none, or several."""
    members = case.series.members_of(i)
    f = case.vessels.dilution[members]
    a, y = case.vessels.addition[members], case.solutions.signal[members] / f
    if len(members) < FEWEST_SOLUTIONS or not (np.isfinite(a) & np.isfinite(y)).all():
        return None
    found = [(at, line) for at in range(len(members)) if (line := _repairing(a, y, at)) is not None]
    if len(found) != 1:
        return None
    at, (slope, intercept) = found[0]
    factor = float(y[at] / (intercept + slope * a[at]))
    implied = float((y[at] - intercept) / slope)
    if a[at] == a.max() and NEAR * a[at] < implied < a[at]:
        return None  # a response that bends over reads like this as well
    words = _words(case, members, a, at, implied)
    return Slip(case.label(int(members[at])), words, factor)


def _repairing(a: np.ndarray, y: np.ndarray, at: int) -> tuple[float, float] | None:
    """Return slope and intercept of the line of all vessels but one, if they fit it and the one does not."""
    others = np.arange(len(a)) != at
    if len(np.unique(a[others])) < 2:
        return None
    slope, intercept = np.polyfit(a[others], y[others], 1)
    fitted = intercept + slope * a
    if slope <= 0 or (fitted <= 0).any():
        return None
    off = np.abs(y / fitted - 1)
    rest = float(off[others].max())
    fits = rest <= REPAIRED and off[at] >= max(OFF, TIMES * rest)
    return (float(slope), float(intercept)) if fits else None


def _words(case: Case, members: np.ndarray, a: np.ndarray, at: int, implied: float) -> str:
    """Say what the addition that a vessel's signal implies is like."""
    stated = float(a[at])
    others = sorted({(float(a[k]), case.label(int(members[k]))) for k in range(len(a)) if a[k] not in (stated, 0.0)})
    if stated > 0 and abs(implied) <= NEAR * stated:
        return "reads as if nothing had been added to it"
    if stated > 0 and abs(implied - 2 * stated) <= NEAR * stated:
        return "reads as if its addition had been made twice"
    like = next((label for addition, label in others if abs(implied - addition) <= NEAR * addition), "")
    return f"reads as if it had the addition of '{like}'" if like else ""
