"""Checks of what a series was measured with: its inputs, its readings, and the batch's check standards and blanks."""

from __future__ import annotations

from collections import defaultdict
from typing import TYPE_CHECKING

import numpy as np

from parsers.readings import Role
from rules.calibration import nominal_of
from rules.case import Reported
from rules.checks import Check, Outcome, batch_limits, judge_values, judged, percents, series_limits, severest
from rules.figures import figure, several
from rules.substances import molar_masses_used

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from rules.case import Case
    from rules.line import Floats

UNDECIDED_BLANK = (
    "blanks were measured and the settings do not say what to do with them: state blank: subtract, preparation or none"
)


def inputs(case: Case) -> Check:
    """Volumes, concentrations, units and readings agree and are possible. A must."""
    outcome = np.full(len(case), Outcome.PASS, dtype=np.int8)
    outcome[list(case.faults)] = Outcome.FAIL

    masses = molar_masses_used(case.readings, case.method)

    def sentence(i: int) -> str:
        if i not in case.faults:
            said = masses.get(int(case.series.analyte[i]))
            return "all cells readable, volumes and concentrations possible" + (f"; {said}" if said else "")
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
    rsd = np.where(case.large_enough & ~nominal_zero, rsd, np.nan)
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


def check_standard(case: Case) -> Check:
    """Every check standard of the analyte, read back, in % of nominal. EPA SW-846 6010D and 7000B."""
    checks = case.check_standards
    limits = batch_limits(case, "check_standard")
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
    signal = case.seen.solutions.signal[blanks.solutions]
    at = case.calibrations.of_key[blanks.key] if len(blanks.key) else np.zeros(0, dtype=np.int64)
    loq = case.limits.loq
    concentration = np.full(len(signal), np.nan)
    if len(lines.slope):
        with np.errstate(invalid="ignore", divide="ignore"):
            concentration = np.where(at >= 0, (signal - lines.intercept[at]) / lines.slope[at], np.nan)
    analyte = blanks.key // case.keys.channels
    relative = concentration / loq[blanks.key]
    limits = batch_limits(case, "blank")
    place = severest(limits, analyte, relative, relative, blanks.key, case.keys.count)[case.key]
    value = _at(relative, place)
    counts = blanks.count[case.key]

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if not counts[i]:
                return "no blank in this export"
            missing = "calibration" if np.isfinite(loq[case.key[i]]) else "limit of quantification (analytes.loq)"
            return f"no {missing} to judge blanks by"
        label = case.label(int(blanks.solutions[place[i]]))
        reads = f"blank {label} reads {figure(concentration[place[i]])} {case.method.vessel_unit}"
        return reads if outcome is Outcome.PASS else f"{reads}: the batch is contaminated or carries over"

    def rests_on(i: int) -> list[int]:
        return [] if np.isnan(value[i]) else case.lines_of([int(blanks.solutions[place[i]])])

    return judged(case, "blank", None, "LOQ", value, sentence, rests_on)


def spiked_blank(case: Case) -> Check:
    """Every spiked blank, in % of what was added. EPA SW-846 6010D, laboratory control sample.

    One that was made from another stock than a series' additions says nothing of that series.
    """
    spiked = case.spiked_blanks
    limits = batch_limits(case, "spiked_blank")
    analyte, away = spiked.key // case.keys.channels, np.abs(spiked.percent - 100)
    stocks = len(case.method.stocks) + 1
    by_stock = spiked.key * stocks + spiked.stock + 1
    place = severest(limits, analyte, spiked.percent, away, spiked.key, case.keys.count)[case.key]
    if len(spiked.key):
        of_stock = severest(limits, analyte, spiked.percent, away, by_stock, case.keys.count * stocks)
        own = _stock_of_series(case)
        same, any_stock = of_stock[case.key * stocks + own + 1], of_stock[case.key * stocks]
        place = np.where(own < 0, place, np.where(same >= 0, same, any_stock))
    value = _at(spiked.percent, place)
    shown = percents(case, "spiked_blank", value)
    counts = np.bincount(spiked.key, minlength=case.keys.count)[case.key]

    def sentence(i: int, outcome: Outcome) -> str:
        if outcome is Outcome.NOT_EVALUATED:
            if not counts[i]:
                return "no spiked blank in this export"
            if case.back.calibration[i] < 0:
                return "spiked blanks were measured, and there is no calibration to read them back from"
            return "the spiked blanks were made from other stocks"
        found = f"spiked blank {case.label(int(spiked.solutions[place[i]]))} recovers {shown(i)}"
        return found if outcome is Outcome.PASS else f"{found}: stock or spiking suspect"

    def lines(i: int) -> list[int]:
        return [] if np.isnan(value[i]) else case.lines_of([int(spiked.solutions[place[i]])])

    return judged(case, "spiked_blank", None, "%", value, sentence, lines)


def _stock_of_series(case: Case) -> NDArray[np.int64]:
    """Return the stock of each series' additions, -1 where it used none or several."""
    seg, stock = case.series.segments, case.vessels.stock[case.series.members].astype(float)
    used = case.series.spiked
    low, high = seg.min(np.where(used, stock, np.inf)), seg.max(np.where(used, stock, -np.inf))
    return np.where(np.isfinite(low) & (low == high), low, -1).astype(np.int64)


def stock(case: Case) -> Check:
    """Every stock that a series used within its dates when its additions were measured. A must."""
    seg, members = case.series.segments, case.series.members
    used = case.series.spiked & (case.vessels.stock[members] >= 0)
    dated = np.array([s.valid_from is not None or s.valid_until is not None for s in case.method.stocks] + [False])
    judged_by = used & dated[case.vessels.stock[members]]
    late = case.series.spiked & case.vessels.out_of_date[members]
    lates = seg.sum(late.astype(float)) > 0
    outcome = np.where(seg.sum(judged_by.astype(float)) > 0, Outcome.PASS, Outcome.NOT_EVALUATED)
    outcome = np.where(lates, Outcome.FAIL, outcome).astype(np.int8)

    def sentence(i: int) -> str:
        if outcome[i] == Outcome.NOT_EVALUATED:
            return "no stock with dates was used"
        start = int(seg.starts[i])
        own = slice(start, start + int(seg.sizes[i]))
        if outcome[i] == Outcome.PASS:
            return f"{_names(case, members[own][used[own]])} within its dates"
        solutions = members[own][late[own]]
        labels = several([case.label(int(s)) for s in solutions])
        return f"{_names(case, solutions)} was out of its dates when these were measured: {labels}"

    def lines(i: int) -> list[int]:
        start = int(seg.starts[i])
        own = slice(start, start + int(seg.sizes[i]))
        return case.lines_of(members[own][used[own]].tolist())

    return Check("stock", None, "", np.full(len(case), np.nan), outcome, None, sentence, lines)


def _names(case: Case, solutions: NDArray[np.int64]) -> str:
    """Name the stocks of some solutions with their lots."""
    used = [case.method.stocks[s] for s in sorted({int(s) for s in case.vessels.stock[solutions] if s >= 0})]
    return several([f"stock {s.name}" + (f" (lot {s.lot})" if s.lot else "") for s in used])


def bracket(case: Case) -> Check:
    """Check standards before, between and after a series hold. EPA SW-846 6010D.

    Judged by the limits of `check_standard`; its value is the one judged hardest. An open bracket is not evaluated here
    and leaves the series incomplete.
    """
    found, checks = case.brackets, case.check_standards
    limits = batch_limits(case, "check_standard")
    percent_of = checks.percent[found.order]
    analyte = checks.key[found.order] // case.keys.channels
    hardness = judge_values(limits, analyte, percent_of).astype(np.int64)
    rank = np.where(np.isfinite(percent_of), hardness * 1e6 + np.abs(percent_of - 100), -1.0)
    worst = np.full(len(case), -1, dtype=np.int64)
    outcome = np.full(len(case), Outcome.NOT_EVALUATED, dtype=np.int8)
    for i in np.flatnonzero(found.wanted).tolist():
        part = slice(int(found.first[i]), int(found.last[i]))
        if found.last[i] > found.first[i]:
            best = int(np.argmax(rank[part])) + part.start
            if rank[best] >= 0:
                worst[i] = best
                outcome[i] = hardness[best]
    off = np.array([limit.off for limit in series_limits(case, "bracket")], dtype=bool)[case.limit_classes.of_series]
    open_ = ~(found.opened & found.closed)
    outcome[off | (open_ & (outcome != Outcome.FAIL))] = Outcome.NOT_EVALUATED
    value = _at(percent_of, worst)
    shown = percents(case, "check_standard", value)

    def sentence(i: int) -> str:
        if off[i]:
            return "bracket: switched off in the settings"
        if not found.wanted[i]:
            return "no check standard in this export"
        if outcome[i] == Outcome.NOT_EVALUATED:
            if open_[i]:
                return case.open_brackets[i]
            return "there is no calibration to read the check standards back from"
        label = case.label(int(checks.solutions[found.order[worst[i]]]))
        if outcome[i] == Outcome.PASS:
            return f"the check standards before and after hold, the farthest is {label} with {shown(i)}"
        return f"check standard {label} of its bracket reads {shown(i)} of nominal"

    def lines(i: int) -> list[int]:
        part = found.order[int(found.first[i]) : int(found.last[i])]
        return case.lines_of(checks.solutions[part].tolist()) if found.wanted[i] else []

    value = np.where(outcome == Outcome.NOT_EVALUATED, np.nan, value)
    return Check("bracket", None, "%", value, outcome, series_limits(case, "bracket"), sentence, lines)


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
    clean = role == Role.SPIKED_BLANK
    chosen = np.flatnonzero(verifies)
    nominal = np.full(len(rows), np.nan)
    nominal[chosen], reasons = nominal_of(case.readings, rows[chosen], case.method)
    problems = {int(chosen[place]): reason for place, reason in reasons.items()}
    silent = (verifies | clean | (role == Role.BLANK)) & ~np.isfinite(signal)
    with np.errstate(invalid="ignore"):
        unknown = verifies & ~(nominal > 0)
    found = []
    for solution, key in zip(
        np.flatnonzero(silent | unknown).tolist(), _key_of(case, np.flatnonzero(silent | unknown)).tolist(), strict=True
    ):
        if solution not in case.solutions.faults:
            what = "no signal" if silent[solution] else problems.get(solution) or "no nominal concentration above zero"
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
