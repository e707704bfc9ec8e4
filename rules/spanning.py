"""What other exports lend to one: the last valid calibration, a closing check standard, the runs that a series lacks.

Only what is missing is taken, and only from exports within the times that the laboratory states; what lends does not
change. Taken rows stand among the readings, marked by the export they come from, so that everything after this works
as if the instrument had written one file.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Quantities, Readings, Role, Texts
from rules.checks import Outcome, judge_values
from rules.exceptions import limits_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from numpy.typing import NDArray

    from rules.case import Case
    from rules.line import Integers

#: An analyte and its channel by name; channel None where there is none.
Key = tuple[str, str | None]


@dataclass(frozen=True, slots=True)
class Other:
    """Another export that may lend something.

    Attributes
    ----------
    name, sha256, revision
        Which one.
    accepted_at
        Seconds since 1970-01-01 in local time; where it stands in time if it holds no times itself.
    readings
        What it says.
    """

    name: str
    sha256: str
    revision: int
    accepted_at: float
    readings: Readings

    @property
    def begins(self) -> float:
        """When its first solution was measured."""
        return _times(self.readings, self.accepted_at)[0]

    @property
    def ends(self) -> float:
        """When its last solution was measured."""
        return _times(self.readings, self.accepted_at)[1]


@dataclass(frozen=True, slots=True)
class Loan:
    """What one export lends: rows of its readings, and in words what for."""

    other: Other
    rows: Integers
    purpose: str


@dataclass(slots=True)
class _Loans:
    loans: list[Loan] = field(default_factory=list)
    refused: dict[Key, str] = field(default_factory=dict)

    def take(self, other: Other, rows: NDArray[Any], purpose: str) -> None:
        if len(rows):
            self.loans.append(Loan(other, rows.astype(np.int64), purpose))


def lacks(case: Case) -> bool:
    """Whether an export lacks something that the laboratory lets others lend."""
    method = case.method
    by_pair = bool(method.pair_seconds) and bool(_without_native(case) or _unclosed(case))
    return by_pair or (bool(method.calibration_seconds) and bool(_uncalibrated(case)))


def lend(
    case: Case, accepted_at: float, others: Iterable[Other], compute: Callable[[Other], Case]
) -> tuple[tuple[Loan, ...], dict[Key, str]]:
    """Find what an export lacks in others.

    Parameters
    ----------
    case
        The export, computed by itself.
    accepted_at
        When it was taken in; counts where it holds no times.
    others
        Exports of the same layout.
    compute
        Computes another export by itself.

    Returns
    -------
    tuple
        The loans, and for analytes whose last calibration may not be used the sentence that says why.
    """
    method = case.method
    begins, ends = _times(case.readings, accepted_at)
    listed = sorted(others, key=lambda other: (other.begins, other.ends, other.sha256, other.name))
    found = _Loans()
    if method.calibration_seconds:
        earlier = [o for o in listed if o.ends <= begins and begins - o.ends <= method.calibration_seconds]
        for key in _uncalibrated(case):
            _calibration(found, case, key, earlier[::-1], compute)
    if method.pair_seconds:
        near = [o for o in listed if begins - o.ends <= method.pair_seconds and o.begins - ends <= method.pair_seconds]
        before = [o for o in near if o.ends <= begins]
        after = [o for o in near if o not in before]
        for sample, key in _without_native(case):
            _native(found, sample, key, [*before[::-1], *after])
        later = [o for o in near if o.begins >= ends]
        for key in _unclosed(case):
            _closing(found, key, later)
    return tuple(found.loans), found.refused


def joined(readings: Readings, loans: tuple[Loan, ...], accepted_at: float) -> Readings:
    """Return the readings with the rows that others lend, in the order of the exports."""
    begins = _times(readings, accepted_at)[0]
    rows: dict[tuple[str, str], list[Integers]] = {}
    lenders: dict[tuple[str, str], Other] = {}
    for loan in loans:
        which = (loan.other.name, loan.other.sha256)
        rows.setdefault(which, []).append(loan.rows)
        lenders[which] = loan.other
    taken = [(lenders[which], _taken(lenders[which], np.unique(np.concatenate(some)))) for which, some in rows.items()]
    taken.sort(key=lambda pair: (pair[0].begins, pair[0].name))
    before = [part for other, part in taken if other.begins < begins]
    after = [part for other, part in taken if other.begins >= begins]
    return _concatenated([*before, readings, *after], own=len(before))


def _times(readings: Readings, accepted_at: float) -> tuple[float, float]:
    """First and last time of an export's own rows; its acceptance where they hold none."""
    times = readings.measured_at[np.isfinite(readings.measured_at) & (readings.origin.codes < 0)]
    return (float(times.min()), float(times.max())) if len(times) else (accepted_at, accepted_at)


def _key(case: Case, series: int) -> Key:
    return case.analyte(series), case.channel(series)


def _uncalibrated(case: Case) -> list[Key]:
    """Analytes and channels of series for which the export holds no standard and no concentration of the instrument."""
    rows = np.flatnonzero(case.readings.role == Role.STANDARD)
    standards = {_key_of_row(case.readings, int(row)) for row in rows}
    keys = dict.fromkeys(_key(case, i) for i in np.flatnonzero(case.back.calibration < 0).tolist())
    return [key for key in keys if key not in standards]


def _without_native(case: Case) -> list[tuple[str, Key]]:
    orphans = np.flatnonzero(case.series.has_additions & ~case.series.has_native).tolist()
    return list(dict.fromkeys((case.sample(i), _key(case, i)) for i in orphans))


def _unclosed(case: Case) -> list[Key]:
    unclosed = np.flatnonzero(case.brackets.wanted & ~case.brackets.closed).tolist()
    return list(dict.fromkeys(_key(case, i) for i in unclosed))


def _key_of_row(readings: Readings, row: int) -> Key:
    return readings.analyte[row] or "", readings.channel[row]


def _rows(readings: Readings, key: Key, *roles: Role) -> NDArray[np.int64]:
    """Rows of an analyte and channel with certain roles."""
    analyte, channel = key
    of_analyte = readings.analyte.codes == _code(readings.analyte, analyte)
    of_channel = readings.channel.codes == (-1 if channel is None else _code(readings.channel, channel))
    return np.flatnonzero(of_analyte & of_channel & np.isin(readings.role, [int(role) for role in roles]))


def _code(texts: Texts, name: str) -> int:
    return texts.names.index(name) if name in texts.names else -2


def _calibration(found: _Loans, case: Case, key: Key, earlier: list[Other], compute: Callable[[Other], Case]) -> None:
    """Take the last valid calibration of the same instrument, if a check standard since then holds."""
    instrument = _instruments(case.readings)
    for other in earlier:
        if _instruments(other.readings) != instrument or not len(_rows(other.readings, key, Role.STANDARD)):
            continue
        lender = compute(other)
        code = _number(lender, key)
        at = int(lender.calibrations.of_key[code])
        if at < 0 or lender.calibrations.instrument[at]:
            continue
        standards = lender.calibrations.solutions[lender.calibrations.segments.owner == at]
        since = [place for place in np.flatnonzero(lender.check_standards.key == code).tolist()
                 if lender.check_standards.solutions[place] > standards.max()]  # fmt: skip
        holds = [_holds(lender, place) for place in since]
        rows = lender.solutions.rows[standards]
        if since and holds[-1]:
            last = lender.solutions.rows_of(int(lender.check_standards.solutions[since[-1]]))
            rows = np.concatenate([_all_rows(lender, standards), last])
        elif since:
            found.refused[key] = f"the check standard after the calibration of {other.name} does not hold"
            return
        elif not _backed(case, key, lender, at):
            found.refused[key] = f"no check standard that holds was measured since the calibration of {other.name}"
            return
        else:
            rows = _all_rows(lender, standards)
        found.take(other, rows, f"calibration of {_named(key)}")
        return


def _all_rows(case: Case, solutions: Iterable[int]) -> NDArray[np.int64]:
    return np.concatenate([case.solutions.rows_of(int(solution)) for solution in solutions])


def _number(case: Case, key: Key) -> int:
    analyte, channel = key
    readings = case.readings
    code = np.array([_code(readings.analyte, analyte)], dtype=np.int32)
    of_channel = np.array([-1 if channel is None else _code(readings.channel, channel)], dtype=np.int32)
    return int(case.keys.code(code, of_channel)[0])


def _holds(case: Case, place: int) -> bool:
    checks = case.check_standards
    names = case.readings.analyte.names
    limits = limits_of(case.method, names, "check_standard")
    analyte = np.array([checks.key[place] // case.keys.channels])
    outcome = judge_values(limits, analyte, checks.percent[place : place + 1])
    return bool(outcome[0] in (Outcome.PASS, Outcome.WARN))


def _backed(case: Case, key: Key, lender: Case, at: int) -> bool:
    """Whether a check standard of the export itself, before its samples, holds on another export's calibration."""
    code = _number(case, key)
    checks = case.check_standards
    first = min((int(case.series.members_of(i).min()) for i in range(len(case)) if int(case.key[i]) == code), default=0)
    places = [p for p in np.flatnonzero(checks.key == code).tolist() if checks.solutions[p] < first]
    if not places:
        return False
    solution = int(checks.solutions[places[-1]])
    lines = lender.calibrations.lines
    measured = (case.solutions.signal[solution] - lines.intercept[at]) / lines.slope[at]
    percent = 100 * measured / checks.nominal[places[-1]]
    limits = limits_of(case.method, (key[0],), "check_standard")
    outcome = judge_values(limits, np.zeros(1, dtype=np.int64), np.array([percent]))
    return bool(outcome[0] in (Outcome.PASS, Outcome.WARN))


def _instruments(readings: Readings) -> frozenset[str]:
    return frozenset(readings.instrument.names)


def _native(found: _Loans, sample: str, key: Key, others: list[Other]) -> None:
    """Take all runs of a sample from the nearest export that holds it unspiked."""
    for other in others:
        rows = _rows(other.readings, key, Role.UNSPIKED, Role.SPIKED)
        rows = rows[other.readings.sample.codes[rows] == _code(other.readings.sample, sample)]
        if (other.readings.role[rows] == Role.UNSPIKED).any():
            found.take(other, rows, f"{sample} {_named(key)}")
            return


def _closing(found: _Loans, key: Key, later: list[Other]) -> None:
    """Take the next check standard, unless the instrument was calibrated again before it."""
    for other in later:
        rows = _rows(other.readings, key, Role.CHECK_STANDARD, Role.STANDARD)
        if not len(rows):
            continue
        times = other.readings.measured_at[rows]
        first = rows[int(np.argmin(times))] if np.isfinite(times).all() else rows[0]
        if other.readings.role[first] == Role.CHECK_STANDARD:
            label = other.readings.label.codes
            checks = rows[other.readings.role[rows] == Role.CHECK_STANDARD]
            replicates = checks[label[checks] == label[first]]
            numbered = np.isfinite(other.readings.replicate[first])
            found.take(other, replicates if numbered else np.array([first]), f"check standard of {_named(key)}")
        return


def _named(key: Key) -> str:
    return key[0] if key[1] is None else f"{key[0]} {key[1]}"


def _taken(other: Other, rows: NDArray[np.int64]) -> Readings:
    """Return chosen rows of another export, marked as its own."""
    readings = other.readings
    place = {int(row): k for k, row in enumerate(rows)}
    faults = tuple(
        replace(fault, row=place[fault.row], column=f"{fault.column} of {other.name}")
        for fault in readings.faults
        if fault.row in place
    )
    columns: dict[str, Any] = {}
    for name in Readings.__slots__:
        column = getattr(readings, name)
        if isinstance(column, (Texts, Quantities)):
            columns[name] = column.take(rows)
        elif isinstance(column, np.ndarray):
            columns[name] = column[rows]
        else:
            columns[name] = column
    origin = Texts.constant(other.name, len(rows))
    return Readings(**columns | {"faults": faults, "origin": origin})


def _concatenated(parts: list[Readings], own: int) -> Readings:
    """Return readings one after the other; what is said of the whole export is that of the own one."""
    base = parts[own]
    columns: dict[str, Any] = {}
    for name in Readings.__slots__:
        pieces = [getattr(part, name) for part in parts]
        first = pieces[own]
        if isinstance(first, Texts):
            columns[name] = _texts(pieces)
        elif isinstance(first, Quantities):
            columns[name] = Quantities(np.concatenate([p.values for p in pieces]), _texts([p.units for p in pieces]))
        elif name == "signals":
            width = max(piece.shape[1] for piece in pieces)
            padded = [np.pad(p, ((0, 0), (0, width - p.shape[1])), constant_values=np.nan) for p in pieces]
            columns[name] = np.concatenate(padded)
        elif isinstance(first, np.ndarray):
            columns[name] = np.concatenate(pieces)
        else:
            columns[name] = first
    starts = np.concatenate(([0], np.cumsum([len(part) for part in parts])))
    faults = tuple(
        replace(fault, row=fault.row + int(start))
        for part, start in zip(parts, starts, strict=False)
        for fault in part.faults
    )
    return Readings(**columns | {"faults": faults, "lines": base.lines})


def _texts(pieces: list[Texts]) -> Texts:
    names: dict[str, int] = {}
    codes = []
    for piece in pieces:
        of_piece = np.array([names.setdefault(name, len(names)) for name in piece.names] + [-1], dtype=np.int32)
        codes.append(of_piece[piece.codes])
    return Texts(np.concatenate(codes), tuple(names))
