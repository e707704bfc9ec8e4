"""Checks of what a series was measured with: its inputs, its readings, and the batch's check standards and blanks."""

from __future__ import annotations

from collections import defaultdict
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules import units
from rules.calibration import nominal_of
from rules.case import Reported
from rules.checks import Check, Outcome, judged, limits_of, percents, severest
from rules.figures import figure, several

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.case import Case
    from rules.line import Floats

UNDECIDED_BLANK = (
    "blanks were measured and the settings do not say what to do with them: state blank: subtract, preparation or none"
)
#: Without a limit of quantification, readings below so many times the blanks' signal scatter by nature (method, 8).
BLANK_MULTIPLE = 10


def inputs(case: Case) -> Check:
    """Volumes, concentrations, units and readings agree and are possible. A must."""
    outcome = np.full(len(case), Outcome.PASS, dtype=np.int8)
    outcome[list(case.faults)] = Outcome.FAIL

    def sentence(i: int) -> str:
        if i not in case.faults:
            return "all cells readable, volumes and concentrations possible"
        return several(case.faults[i], most=3)

    return Check("inputs", None, "", np.full(len(case), np.nan), outcome, None, sentence, case.series_lines)


def _worst(values: Floats, owner: NDArray[np.int64], count: int) -> tuple[Floats, NDArray[np.int64]]:
    """Largest value of each owner and its place; NaN and -1 where an owner has none."""
    largest = np.full(count, -np.inf)
    finite = np.flatnonzero(np.isfinite(values))
    np.maximum.at(largest, owner[finite], values[finite])
    place = np.full(count, -1, dtype=np.int64)
    hits = finite[values[finite] == largest[owner[finite]]]
    place[owner[hits[::-1]]] = hits[::-1]
    return np.where(np.isfinite(largest), largest, np.nan), place


def _at(values: Floats, place: NDArray[np.int64]) -> Floats:
    """Values at places; NaN where the place is -1."""
    return np.append(values, np.nan)[place]


def repeatability(case: Case) -> Check:
    """Largest relative standard deviation of the readings of one solution (common practice); never of blanks.

    A standard of nominal 0 is a blank by another name.

    Of the series' own solutions, of its check standards, and of the standards where the result is read back from
    them. Only above the limit of quantification; without one above ten times the blanks' signal.
    """
    solutions = case.solutions
    with np.errstate(invalid="ignore", divide="ignore"):
        rsd = 100 * solutions.signal_sd / np.abs(solutions.signal)
    nominal_zero = case.readings.nominal.values[solutions.rows] == 0
    rsd = np.where(_large_enough(case) & ~nominal_zero, rsd, np.nan)
    members = case.series.members
    own, own_place = _worst(rsd[members], case.series.segments.owner, len(case))
    own_solution = np.where(own_place >= 0, members[own_place], -1)
    role = case.readings.role[solutions.rows]
    shared, shared_solution = [], []
    for kind, where in (
        (Role.CHECK_STANDARD, np.ones(len(case), dtype=bool)),
        (Role.STANDARD, case.reported == Reported.CALIBRATION),
    ):
        chosen = np.flatnonzero(role == kind)
        key = _key_of(case, chosen)
        value, place = _worst(rsd[chosen], key, case.keys.count)
        solution = np.where(place >= 0, chosen[place] if len(chosen) else -1, -1)
        shared.append(np.where(where, value[case.key], np.nan))
        shared_solution.append(solution[case.key])
    candidates = np.vstack([own, *shared])
    best = np.argmax(np.where(np.isfinite(candidates), candidates, -np.inf), axis=0)
    value = candidates[best, np.arange(len(case))]
    solution = np.vstack([own_solution, *shared_solution])[best, np.arange(len(case))]
    shown = percents(case, "repeatability", value)

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return "no solution with repeated readings high enough to judge"
        scatter = f"the readings of {case.label(int(solution[i]))} scatter by {shown(i)}"
        return scatter if outcome is Outcome.PASS else f"{scatter}: measure that solution again"

    def lines(i: int) -> list[int]:
        return case.series_lines(i) if np.isnan(value[i]) else case.lines_of([int(solution[i])])

    return judged(case, "repeatability", None, "%", value, sentence, lines)


def _key_of(case: Case, chosen: NDArray[np.int64]) -> NDArray[np.int64]:
    rows = case.solutions.rows[chosen]
    return case.keys.code(case.readings.analyte.codes[rows], case.readings.channel.codes[rows])


def _large_enough(case: Case) -> NDArray[np.bool_]:
    """Solutions whose readings are high enough for a relative scatter to mean something."""
    loq = np.array([_loq(case, name) for name in case.readings.analyte.names])
    everything = np.arange(len(case.solutions))
    key = _key_of(case, everything)
    at = case.calibrations.of_key[key]
    signal = case.solutions.signal
    lines = case.calibrations.lines
    threshold = BLANK_MULTIPLE * np.abs(case.blanks.mean[key])
    if len(lines.slope):
        by_loq = lines.intercept[at] + lines.slope[at] * loq[case.readings.analyte.codes[case.solutions.rows]]
        threshold = np.where((at >= 0) & np.isfinite(by_loq), by_loq, threshold)
    with np.errstate(invalid="ignore"):
        return np.asarray(np.isnan(threshold) | (signal > threshold), dtype=bool)


def _loq(case: Case, analyte: str) -> float:
    stated = case.method.analyte(analyte).loq
    return np.nan if stated is None else units.of_measure(stated, case.method.vessel_unit)


def check_standard(case: Case) -> Check:
    """Every check standard of the analyte, read back, in % of nominal. EPA SW-846 6010D and 7000B."""
    checks = case.check_standards
    limits = limits_of(case.method, case.readings.analyte.names, "check_standard")
    analyte, away = checks.key // case.keys.channels, np.abs(checks.percent - 100)
    place = severest(limits, analyte, checks.percent, away, checks.key, case.keys.count)[case.key]
    value = _at(checks.percent, place)
    shown = percents(case, "check_standard", value)
    counts = np.bincount(checks.key, minlength=case.keys.count)[case.key]

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            return (
                "check standards were measured, and there is no calibration to read them back from"
                if counts[i]
                else "no check standard in this export"
            )
        label = case.label(int(checks.solutions[place[i]]))
        found = f"check standard {label} reads {shown(i)} of nominal"
        return found if outcome is Outcome.PASS else f"{found}: the calibration does not hold"

    def lines(i: int) -> list[int]:
        return [] if np.isnan(value[i]) else case.lines_of([int(checks.solutions[place[i]])])

    return judged(case, "check_standard", None, "%", value, sentence, lines)


def blank(case: Case) -> Check:
    """Every blank as concentration against the limit of quantification. EPA SW-846 6010D, 9.7."""
    blanks, lines = case.blanks, case.calibrations.lines
    signal = case.solutions.signal[blanks.solutions]
    at = case.calibrations.of_key[blanks.key] if len(blanks.key) else np.zeros(0, dtype=np.int64)
    loq = np.array([_loq(case, name) for name in case.readings.analyte.names])
    concentration = np.full(len(signal), np.nan)
    if len(lines.slope):
        with np.errstate(invalid="ignore", divide="ignore"):
            concentration = np.where(at >= 0, (signal - lines.intercept[at]) / lines.slope[at], np.nan)
    analyte = blanks.key // case.keys.channels
    relative = concentration / loq[analyte]
    limits = limits_of(case.method, case.readings.analyte.names, "blank")
    place = severest(limits, analyte, relative, relative, blanks.key, case.keys.count)[case.key]
    value = _at(relative, place)
    counts = blanks.count[case.key]

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if not counts[i]:
                return "no blank in this export"
            missing = (
                "calibration" if np.isfinite(loq[case.series.analyte[i]]) else "limit of quantification (analytes.loq)"
            )
            return f"no {missing} to judge blanks by"
        label = case.label(int(blanks.solutions[place[i]]))
        reads = f"blank {label} reads {figure(concentration[place[i]])} {case.method.vessel_unit}"
        return reads if outcome is Outcome.PASS else f"{reads}: the batch is contaminated or carries over"

    def rests_on(i: int) -> list[int]:
        return [] if np.isnan(value[i]) else case.lines_of([int(blanks.solutions[place[i]])])

    return judged(case, "blank", None, "LOQ", value, sentence, rests_on)


def collect_faults(case: Case) -> dict[int, list[str]]:
    """Collect what is wrong with the inputs of every series.

    Its own cells and volumes, those of the blanks, standards and check standards of its analyte and channel (a lost
    point may be the one that shows a fault), blanks that the settings ask for and the export lacks, and predilutions
    that differ within the series.
    """
    faults: dict[int, list[str]] = defaultdict(list)
    owner = dict(zip(case.series.members.tolist(), case.series.segments.owner.tolist(), strict=True))
    shared: dict[int, list[str]] = defaultdict(list, {k: list(v) for k, v in _spoilt(case).items()})
    for key, sentence in _unusable(case):
        shared[key].append(sentence)
    keys = _key_of(case, np.arange(len(case.solutions)))
    for source in (case.solutions.faults, case.vessels.faults):
        for solution, sentences in source.items():
            if solution in owner:
                faults[owner[solution]].extend(sentences)
            else:
                known = shared[int(keys[solution])]
                known.extend(sentence for sentence in sentences if sentence not in known)
    if shared:
        for series, key in enumerate(case.key.tolist()):
            faults[series].extend(shared.get(key, ()))
    for series, sentence in _series_faults(case):
        faults[series].append(sentence)
    return {series: sentences for series, sentences in faults.items() if sentences}


def _spoilt(case: Case) -> dict[int, list[str]]:
    """Calibrations refused because of their cells; too few standards are no fault, there is just no calibration."""
    standards = np.flatnonzero(case.readings.role[case.solutions.rows] == Role.STANDARD)
    bad = {
        int(key)
        for solution, key in zip(standards.tolist(), _key_of(case, standards), strict=True)
        if solution in case.solutions.faults or not np.isfinite(case.solutions.signal[solution])
    }
    nominals = {key for key, said in case.calibrations.refused.items() if any("nominal" in text for text in said)}
    return {key: case.calibrations.refused[key] for key in bad | nominals if key in case.calibrations.refused}


def _unusable(case: Case) -> list[tuple[int, str]]:
    """Blanks and check standards that say nothing although no cell is marked: they must not vanish from the batch."""
    rows, signal = case.solutions.rows, case.solutions.signal
    role = case.readings.role[rows]
    verifies = role == Role.CHECK_STANDARD
    chosen = np.flatnonzero(verifies)
    nominal = np.full(len(rows), np.nan)
    nominal[chosen], problem = nominal_of(case.readings, rows[chosen], case.method)
    silent = (verifies | (role == Role.BLANK)) & ~np.isfinite(signal)
    with np.errstate(invalid="ignore"):
        unknown = verifies & ~(nominal > 0)
    found = []
    for solution, key in zip(
        np.flatnonzero(silent | unknown).tolist(), _key_of(case, np.flatnonzero(silent | unknown)).tolist(), strict=True
    ):
        if solution not in case.solutions.faults:
            what = "no signal" if silent[solution] else problem or "no nominal concentration above zero"
            found.append((key, f"{_place(case, solution)}: {what}: correct the export or measure it again"))
    return found


def _place(case: Case, solution: int) -> str:
    return f"line {case.readings.line[case.solutions.rows[solution]]}, {case.label(solution)}"


def _series_faults(case: Case) -> list[tuple[int, str]]:
    seg, members = case.series.segments, case.series.members
    found: list[tuple[int, str]] = []
    factor = case.vessels.predilution[members]
    with np.errstate(invalid="ignore"):
        differing = seg.min(factor) != seg.max(factor)
    found += [
        (i, "the predilution differs within the series: one line needs one predilution")
        for i in np.flatnonzero(differing).tolist()
    ]
    blanks = case.blanks.count[case.key]
    use = case.method.blank
    if use is None:
        found += [
            (
                i,
                UNDECIDED_BLANK,
            )
            for i in np.flatnonzero(blanks > 0).tolist()
        ]
    elif use != "none":
        found += [
            (
                i,
                (
                    f"the settings say blank: {use}, and the export holds no blank for {case.analyte(i)}: measure one, "
                    f"or state blank: none"
                ),
            )
            for i in np.flatnonzero((case.judged | (use == "preparation")) & (blanks == 0)).tolist()
        ]
    found += [
        (i, "the sample was measured again, and the settings say repeats: refuse")
        for i in np.flatnonzero(case.series.repeated).tolist()
    ]
    silent = ~np.isfinite(case.solutions.signal[members])
    found += [
        (int(seg.owner[at]), f"{_place(case, int(members[at]))}: no signal: correct the export or measure it again")
        for at in np.flatnonzero(silent).tolist()
        if int(members[at]) not in case.solutions.faults
    ]
    lacks_blank = (blanks == 0) & (use not in (None, "none"))
    missing = case.judged & np.isnan(case.fits.spread(case.fits.lines.slope)) & ~lacks_blank
    missing &= ~(seg.sum(silent.astype(float)) > 0)
    found += [
        (i, "no line can be drawn: the additions do not differ, or a blank has no signal")
        for i in np.flatnonzero(missing).tolist()
        if not _explained(case, i)
    ]
    return found


def _explained(case: Case, series: int) -> bool:
    members = case.series.members_of(series).tolist()
    return any(solution in case.solutions.faults or solution in case.vessels.faults for solution in members)
