"""Checks of what must agree when measured twice: duplicates, lines or isotopes, dilutions of one sample."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from rules.case import Reported
from rules.checks import Check, Outcome, judged, percents, series_limits
from rules.figures import figure

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from rules.case import Case
    from rules.line import Floats

#: From so many limits of quantification on duplicates are compared in percent (EPA SW-846 6010D).
FIRM_MULTIPLE = 5


def duplicate(case: Case) -> Check:
    """Relative percent difference of duplicates, RPD = 100 |D1 - D2| / mean. EPA SW-846 6010D and 7000B.

    Where one of them lies below five limits of quantification they must agree within one. Duplicates are two samples
    of which one names the other, or two spiked portions with the same addition.
    """
    pairs = _Pairs(case)
    for pair in (*_duplicate_samples(case), *_spiked_duplicates(case)):
        pairs.add(*pair)
    limits = series_limits(case, "duplicate")
    value = pairs.value
    shown = percents(case, "duplicate", value)

    def say(i: int, outcome: Outcome) -> str:
        if i not in pairs.names:
            return pairs.missing.get(i, "no duplicate of it in this export")
        names = pairs.names[i]
        if pairs.faint[i]:
            word = "within" if pairs.within[i] else "by more than"
            size = f"{figure(pairs.loq[i])} {case.method.vessel_unit}"
            return f"{names} are low and differ {word} one limit of quantification ({size})"
        found = f"{names} differ by {shown(i)} of their mean"
        return found if outcome is Outcome.PASS else f"{found}: the sample is uneven, or one preparation went wrong"

    check = judged(case, "duplicate", None, "%", value, say, pairs.lines)
    off = np.array([limit.off for limit in limits], dtype=bool)[case.limit_classes.of_series]
    by_loq = np.where(pairs.within, Outcome.PASS, Outcome.FAIL)
    outcome = np.where(pairs.faint & ~off, by_loq, check.outcome).astype(np.int8)
    return replace(check, outcome=outcome)


class _Pairs:
    """The worst pair of duplicates of each series."""

    def __init__(self, case: Case) -> None:
        count = len(case)
        self.case = case
        self.value: Floats = np.full(count, np.nan)
        self.faint: NDArray[np.bool_] = np.zeros(count, dtype=bool)
        self.within: NDArray[np.bool_] = np.zeros(count, dtype=bool)
        self.loq: Floats = np.full(count, np.nan)
        self.names: dict[int, str] = {}
        self.missing: dict[int, str] = {}
        self._lines: dict[int, list[int]] = {}

    def add(
        self, series: tuple[int, ...], values: tuple[float, float], names: str, lines: list[int], missing: str
    ) -> None:
        """Add two concentrations in the vessel; `missing` says why one is not known."""
        if missing or not np.isfinite(values).all():
            for i in series:
                self.missing.setdefault(i, missing or f"{names}: one of them has no result")
            return
        first, second = values
        mean = (first + second) / 2
        for i in series:
            loq = float(self.case.limits.loq[self.case.key[i]])
            faint = bool(np.isfinite(loq) and min(values) < FIRM_MULTIPLE * loq)
            apart = 100 * abs(first - second) / mean if mean > 0 else np.nan
            within = abs(first - second) <= loq
            if not faint and not np.isfinite(apart):
                self.missing.setdefault(i, f"{names}: nothing to compare at or below zero (state analytes.loq)")
                continue
            worse = i not in self.names or (faint and not within) or (not self.faint[i] and apart > self.value[i])
            if worse:
                self.value[i], self.faint[i], self.within[i], self.loq[i] = apart, faint, within, loq
                self.names[i], self._lines[i] = names, lines

    def lines(self, series: int) -> list[int]:
        return self._lines.get(series, [])


_Pair = tuple[tuple[int, ...], tuple[float, float], str, list[int], str]


def _duplicate_samples(case: Case) -> Iterator[_Pair]:
    """Yield every series whose sample duplicates another one, with that one."""
    column = case.readings.duplicate_of
    if not column.names:
        return
    by_name = {(case.sample(i), int(case.key[i]), int(case.series.attempt[i])): i for i in range(len(case))}
    rows = case.solutions.rows[case.series.members]
    unspiked = np.flatnonzero(case.series.unspiked & (column.codes[rows] >= 0))
    originals: dict[int, str] = {}
    for place in unspiked.tolist():
        name = column.names[int(column.codes[rows[place]])]
        originals.setdefault(int(case.series.segments.owner[place]), name)
    value = _in_vessel(case)
    for i, name in originals.items():
        if name == case.sample(i):
            continue  # a further preparation of the same sample is a member of its series
        key, attempt = int(case.key[i]), int(case.series.attempt[i])
        original = by_name.get((name, key, attempt), by_name.get((name, key, 1)))
        if original is None:
            yield (i,), (np.nan, np.nan), "", [], f"its original '{name}' is not in this export"
            continue
        lines = sorted({*case.series_lines(original), *case.series_lines(i)})
        names = f"{name} and {case.sample(i)}"
        yield (original, i), (float(value[original]), float(value[i])), names, lines, ""


def _in_vessel(case: Case) -> Floats:
    """Return each reported result as concentration in the vessel of the unspiked solution."""
    seg, members = case.series.segments, case.series.members
    scale = case.vessels.dilution[members] / case.vessels.predilution[members]
    with np.errstate(invalid="ignore", divide="ignore"):
        natives = seg.sum(case.series.unspiked.astype(float))
        mean = seg.sum(np.where(case.series.unspiked, scale, 0.0)) / natives
        return case.reported_value() * mean


def _spiked_duplicates(case: Case) -> Iterator[_Pair]:
    """Yield spiked portions that are marked as duplicates, with the other portion of the same addition."""
    column = case.readings.duplicate_of
    series = case.series
    rows = case.solutions.rows[series.members]
    marked = np.flatnonzero(series.spiked & (column.codes[rows] >= 0))
    if not len(marked):
        return
    native = case.fits.spread(case.fits.native)
    for place in marked.tolist():
        i = int(series.segments.owner[place])
        solution = int(series.members[place])
        added = case.vessels.addition[solution]
        portions = [
            int(other)
            for other, spiked in zip(series.members_of(i), _flags(case, i), strict=True)
            if spiked and other != solution and np.isclose(case.vessels.addition[other], added, rtol=1e-9)
        ]
        if not portions:
            missing = f"{case.label(solution)} has no other portion with the same addition"
            yield (i,), (np.nan, np.nan), "", [], missing
            continue
        other = portions[0]
        found = [_total(case, s, i, float(native[i])) for s in (other, solution)]
        names = f"{case.label(other)} and {case.label(solution)}"
        yield (i,), (found[0], found[1]), names, case.lines_of([other, solution]), ""


def _flags(case: Case, i: int) -> list[bool]:
    start = int(case.series.segments.starts[i])
    flags: list[bool] = case.series.spiked[start : start + int(case.series.segments.sizes[i])].tolist()
    return flags


def _total(case: Case, solution: int, i: int, native: float) -> float:
    """Return what a spiked vessel holds: read back from the calibration, else by the line of its own series."""
    at = int(case.back.calibration[i])
    if at >= 0:
        lines = case.calibrations.lines
        return float((case.seen.solutions.signal[solution] - lines.intercept[at]) / lines.slope[at])
    fit = int(case.fits.of_series[i])
    if fit < 0 or not np.isfinite(native):
        return np.nan
    place = np.flatnonzero(case.series.members[case.fits.places] == solution)
    scaled = case.fits.net[place[0]] - _blank_part(case, solution, i)
    return float(scaled / case.fits.lines.slope[fit])


def _blank_part(case: Case, solution: int, i: int) -> float:
    if case.method.blank == "subtract":
        return float(case.blanks.mean[case.key[i]])
    if case.method.blank == "preparation":
        return float(case.vessels.dilution[solution] * case.blanks.mean[case.key[i]])
    return 0.0


def channels_agree(case: Case) -> Check:
    """Difference of the results of two lines or isotopes over its standard uncertainty (common practice).

    Only what each channel has for itself counts, its line and its blank: stock and aliquot are the same for both.
    """
    value, other = _apart(case)
    shared = _channels(case)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if i not in shared:
                return "measured on one line or mass only"
            return "another line or mass has no result with an uncertainty"
        mate = int(other[i])
        unit = case.method.result_unit
        values = case.reported_value()
        found = (
            f"{case.channel(i)} gives {figure(values[i])} and {case.channel(mate)} {figure(values[mate])} {unit}, "
            f"{figure(value[i], 2)} standard uncertainties apart"
        )
        return found if outcome is Outcome.PASS else f"{found}: one of them is interfered with"

    def lines(i: int) -> list[int]:
        if other[i] < 0:
            return case.series_lines(i)
        return sorted({*case.series_lines(i), *case.series_lines(int(other[i]))})

    return judged(case, "channels_agree", None, "", value, sentence, lines)


def _channels(case: Case) -> dict[int, list[int]]:
    """Return the series of the same sample, analyte and attempt that were measured on other channels."""
    groups: dict[tuple[int, int, int], list[int]] = defaultdict(list)
    if len(case.readings.channel.names) < 2:
        return {}
    keys = zip(case.series.sample.tolist(), case.series.analyte.tolist(), case.series.attempt.tolist(), strict=True)
    for i, group in enumerate(keys):
        groups[group].append(i)
    return {i: [k for k in group if k != i] for group in groups.values() if len(group) > 1 for i in group}


def _apart(case: Case) -> tuple[Floats, NDArray[np.int64]]:
    """Return the largest difference of each series from another channel, and that channel's series."""
    value, other = np.full(len(case), np.nan), np.full(len(case), -1, dtype=np.int64)
    result = case.reported_value()
    by_additions = case.reported == Reported.ADDITIONS
    line, blank = (
        np.where(by_additions, first.standard_uncertainty, second.standard_uncertainty)
        for first, second in zip(case.additions.budget[:2], case.back.results.budget[:2], strict=True)
    )
    own = np.hypot(line, np.nan_to_num(blank))
    for i, mates in _channels(case).items():
        for k in mates:
            apart = abs(result[i] - result[k]) / np.hypot(own[i], own[k]) if own[i] + own[k] > 0 else np.nan
            if np.isfinite(apart) and not (i in case.faults or k in case.faults) and not apart <= value[i]:
                value[i], other[i] = apart, k
    return value, other


def dilution_test(case: Case) -> Check:
    """Whether the baseline shifts, y = δ + βfC, by unspiked solutions at two or more dilutions.

    Judged by how far the most diluted solution lies from the least diluted one, by the fitted line. Within 20 % after
    EPA SW-846 6010D (five-fold dilution; from memory: verify before quoting). Only where the most diluted solution is
    high enough to be judged.
    """
    found = case.dilutions
    high = np.append(case.large_enough, False)[found.most_diluted]
    value = np.where(high, found.difference, np.nan)
    shown = percents(case, "dilution_test", value)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if found.most_diluted[i] < 0:
                return "unspiked at one dilution only: nothing shows whether the baseline shifts"
            return "the diluted solution is too low to judge the baseline by"
        shift = figure(found.shift[i])
        said = f"diluted, the sample differs from its undiluted reading by {shown(i)} (baseline shift {shift})"
        if outcome is Outcome.PASS:
            return said
        return f"{said}: the matrix shifts the baseline, which additions do not correct"

    return judged(case, "dilution_test", None, "%", value, sentence)
