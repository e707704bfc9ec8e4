"""The JSON record of one export: everything that was computed and judged, in values that JSON has.

Every key is always there; what is absent is null, never NaN. The record depends only on the export, the settings and
the ledger's record of acceptance.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Role, line_ranges
from rules import pipetting, plan
from rules.case import Reported
from rules.checks import Check, Outcome
from rules.outcomes import result_text

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping

    from rules.case import Case
    from rules.outcomes import Outcomes
    from rules.result import Results

FORMAT = 1


@dataclass(frozen=True, slots=True)
class Export:
    """What the ledger knows of an export: the words of its acceptance."""

    name: str
    sha256: str
    size: int
    revision: int
    accepted_at: str
    layout: str
    settings: str
    program: str
    seal: Mapping[str, object] | None = None

    def plain(self) -> dict[str, Any]:
        """Return it as it stands in the record."""
        return {
            "name": self.name,
            "sha256": self.sha256,
            "bytes": self.size,
            "revision": self.revision,
            "accepted_at": self.accepted_at,
            "layout": self.layout,
            "settings": self.settings,
            "program": self.program,
        }


def number(value: Any) -> float | None:
    """Return a finite number, else None."""
    converted = float(value)
    return converted if math.isfinite(converted) else None


def whole(value: Any) -> int | None:
    """Return a whole number, else None."""
    converted = number(value)
    return None if converted is None else int(converted)


def local_time(seconds: float) -> str | None:
    """Return the local time that an export wrote, without a zone, because the export gave none."""
    if not math.isfinite(seconds):
        return None
    return (datetime(1970, 1, 1, tzinfo=UTC) + timedelta(seconds=seconds)).strftime("%Y-%m-%dT%H:%M:%S")


def record_parts(outcomes: Outcomes, export: Export, problems: tuple[str, ...]) -> Iterator[tuple[str, Any]]:
    """Yield the keys of the record with their values; lists come as iterables, made entry by entry."""
    case = outcomes.case
    yield "format", FORMAT
    yield "export", export.plain()
    yield "series", (series_entry(outcomes, i) for i in range(len(case)))
    yield "blanks", _blanks(case)
    yield "check_standards", _check_standards(outcomes)
    yield "spiked_blanks", _spiked_blanks(case)
    yield "calibrations", calibrations(case)
    yield "others", lent(outcomes)
    yield "set_aside", ({"line": a.line, "reason": a.reason, "text": a.text} for a in case.readings.set_aside)
    yield "problems", problems
    yield "seal", export.seal


def series_entry(outcomes: Outcomes, i: int) -> dict[str, Any]:
    """Return an entry of ``series``."""
    case = outcomes.case
    reported = outcomes.reported(i)
    by = Reported(int(case.reported[i]))
    return {
        "sample": case.sample(i),
        "analyte": case.analyte(i),
        "channel": case.channel(i),
        "attempt": int(case.series.attempt[i]),
        "verdict": outcomes.verdict_of(i).word,
        "confidence": case.method.confidence,
        "result": result(outcomes, i),
        "additions_result": _result(case, case.additions, i, result_by(case, i, Reported.ADDITIONS))
        if case.judged[i]
        else None,
        "calibration_result": _result(case, case.back.results, i, result_by(case, i, Reported.CALIBRATION))
        if case.back.calibration[i] >= 0
        else None,
        "fit": _fit(case, i),
        "solutions": _solutions(case, i),
        "recoveries": _recoveries(case, i),
        "matrix_effect": _matrix_effect(case, i),
        "budget": _budget(case, reported, i, by),
        "detection": _detection(case, i),
        "checks": [_check(check, case, i) for check in outcomes.checks],
        "next_step": {"sentence": plan.next_step(outcomes, i) or None, "plan": _plan(outcomes, i)},
    }


def _plan(outcomes: Outcomes, i: int) -> dict[str, Any] | None:
    found = plan.solutions(outcomes, i)
    return None if found is None else pipetting.plain(found, outcomes.case.method.vessel_unit)


def result(outcomes: Outcomes, i: int) -> dict[str, Any]:
    """Return the reported result of a series."""
    case = outcomes.case
    values = _result(case, outcomes.reported(i), i, result_by(case, i, Reported(int(case.reported[i]))))
    return values | {"text": outcomes.text(i)}


def result_by(case: Case, i: int, by: Reported) -> str:
    """Return what a result comes from: additions, calibration, or the instrument's own concentrations."""
    return "instrument" if by is Reported.CALIBRATION and case.back.instrument[i] else by.name.lower()


def _result(case: Case, results: Results, i: int, by: str) -> dict[str, Any]:
    faulty = i in case.faults
    columns = ("value", "standard_uncertainty", "expanded_uncertainty", "coverage_factor", "low", "high")
    numbers = {name: None if faulty else number(getattr(results, name)[i]) for name in columns}
    return {
        "value": numbers["value"],
        "unit": case.method.result_unit,
        "standard_uncertainty": numbers["standard_uncertainty"],
        "expanded_uncertainty": numbers["expanded_uncertainty"],
        "coverage_factor": numbers["coverage_factor"],
        "low": numbers["low"],
        "high": numbers["high"],
        "effective_dof": None if faulty else number(results.effective_dof[i]),
        "by": by,
        "text": result_text(results, i, case, case.method.confidence),
    }


def _fit(case: Case, i: int) -> dict[str, Any] | None:
    at = int(case.fits.of_series[i])
    if at < 0:
        return None
    lines = case.fits.lines
    predilution = float(case.vessels.predilution[case.series.members_of(i)].max())
    return {
        "slope": number(lines.slope[at]),
        "intercept": number(lines.intercept[at]),
        "correlation": number(lines.correlation[at]),
        "residual_sd": number(lines.residual_sd[at]),
        "n": int(lines.n[at]),
        "dof": int(lines.dof[at]),
        "variance": case.method.variance,
        "g": number(case.interval.g[at]),
        "u_line": number(case.u_line[i] / predilution),
        "intercept_variance": number(lines.var_intercept[at]),
        "slope_variance": number(lines.var_slope[at]),
        "covariance": number(lines.covariance[at]),
    }


def _solutions(case: Case, i: int) -> list[dict[str, Any]]:
    readings = case.readings
    listed = []
    residuals = _residuals(case, i)
    for solution in case.series.members_of(i).tolist():
        row = int(case.solutions.rows[solution])
        values = readings.signals[case.solutions.rows_of(solution)]
        listed.append(
            {
                "label": case.label(solution),
                "role": Role(int(readings.role[row])).word,
                "added": number(case.vessels.added[solution]),
                "dilution": number(case.vessels.fraction[solution]),
                "predilution": number(case.vessels.predilution[solution]),
                "signal": number(case.solutions.signal[solution]),
                "residual_percent": residuals.get(solution),
                "readings": values[np.isfinite(values)].tolist(),
                "position": number(readings.position[row]),
                "measured_at": local_time(float(readings.measured_at[row])),
                "run_order": solution + 1,
                "export_lines": _lines(case, solution),
            }
        )
    return listed


def _residuals(case: Case, i: int) -> dict[int, float | None]:
    """Return the residual of each solution that a fit rests on, in percent."""
    fits, at = case.fits, int(case.fits.of_series[i])
    if at < 0:
        return {}
    start = int(fits.segments.starts[at])
    points = slice(start, start + int(fits.segments.sizes[at]))
    solutions = case.series.members[fits.places[points]].tolist()
    return {s: number(r) for s, r in zip(solutions, case.relative_residuals[points].tolist(), strict=True)}


def _recoveries(case: Case, i: int) -> list[dict[str, Any]]:
    start = int(case.series.segments.starts[i])
    members = case.series.members_of(i).tolist()
    return [
        {
            "label": case.label(solution),
            "added": number(case.vessels.added[solution]),
            "recovery": number(case.recoveries.each[start + offset]),
            "standard_uncertainty": number(case.recoveries.each_u[start + offset]),
            "expanded_uncertainty": number(case.recoveries.each_expanded[start + offset]),
            "export_lines": _lines(case, solution),
        }
        for offset, solution in enumerate(members)
        if case.series.spiked[start + offset] and number(case.recoveries.each[start + offset]) is not None
    ]


def _matrix_effect(case: Case, i: int) -> dict[str, Any]:
    recoveries = case.recoveries
    span = recoveries.slope_interval
    return {
        "value": number(recoveries.matrix_effect[i]),
        "unit": "%",
        "standard_uncertainty": number(recoveries.slope_u[i]),
        "low": number(100 * span.low[i] - 100),
        "high": number(100 * span.high[i] - 100),
    }


def _budget(case: Case, results: Results, i: int, by: Reported) -> list[dict[str, Any]]:
    """List the components that matter, those that nobody stated with null."""
    if i in case.faults or number(results.value[i]) is None:
        return []
    total = number(results.standard_uncertainty[i])
    entries = []
    for share in results.budget:
        u, dof = share.standard_uncertainty[i], share.dof[i]
        if u == 0 or (
            share.component == "blank" and (case.method.blank in (None, "none") or by is Reported.CALIBRATION)
        ):
            continue
        part = number(u)
        entries.append(
            {
                "component": share.component,
                "standard_uncertainty": part,
                "unit": case.method.result_unit,
                "dof": number(dof),
                "share": None if part is None or not total else 100 * part**2 / total**2,
            }
        )
    return entries


def _detection(case: Case, i: int) -> dict[str, Any]:
    """List the limits of a read-back in the vessel: what tells from a blank, what is detected, what is quantified."""
    limits, key = case.limits, int(case.key[i])
    return {
        "decision_limit": number(limits.decision[key]),
        "limit_of_detection": number(limits.lod[key]),
        "limit_of_quantification": number(limits.loq[key]),
        "unit": case.method.vessel_unit,
        "blanks": int(limits.blanks[key]),
    }


def _check(check: Check, case: Case, i: int) -> dict[str, Any]:
    return {
        "check": check.name,
        "value": number(check.value[i]),
        "limit": check.limit_text(case, i),
        "unit": check.unit,
        "outcome": Outcome(int(check.outcome[i])).word,
        "sentence": check.sentence(i),
        "export_lines": line_ranges(check.lines(i)),
    }


def _place(case: Case, solution: int, key: int) -> dict[str, Any]:
    analyte, channel = case.keys.split(key)
    return {
        "label": case.label(solution),
        "analyte": case.readings.analyte.names[analyte],
        "channel": None if channel < 0 else case.readings.channel.names[channel],
        "signal": number(case.solutions.signal[solution]),
        "position": number(case.readings.position[int(case.solutions.rows[solution])]),
        "measured_at": local_time(float(case.readings.measured_at[int(case.solutions.rows[solution])])),
        "run_order": solution + 1,
        "export_lines": _lines(case, solution),
    }


def lent(outcomes: Outcomes) -> list[dict[str, Any]]:
    """List what other exports lend: which, by hash, and what for."""
    lenders: dict[tuple[str, str, int], list[str]] = {}
    for loan in outcomes.loans:
        other = loan.other
        lenders.setdefault((other.name, other.sha256, other.revision), []).append(loan.purpose)
    return [
        {"name": name, "sha256": sha256, "revision": revision, "lends": sorted(purposes)}
        for (name, sha256, revision), purposes in sorted(lenders.items())
    ]


def _lines(case: Case, solution: int) -> str:
    """Write the lines of a solution; those of another export with its name."""
    rows = case.solutions.rows_of(solution)
    ranges = line_ranges([int(line) for line in case.readings.line[rows]])
    origin = case.readings.origin[int(rows[0])]
    return f"{origin}: {ranges}" if origin else ranges


def _pairs(solutions: Iterable[int], keys: Iterable[int]) -> Iterable[tuple[int, int]]:
    return zip(solutions, keys, strict=True)


def _blanks(case: Case) -> list[dict[str, Any]]:
    pairs = _pairs(case.blanks.solutions.tolist(), case.blanks.key.tolist())
    return [_place(case, solution, key) for solution, key in pairs]


def _check_standards(outcomes: Outcomes) -> list[dict[str, Any]]:
    case = outcomes.case
    checks = case.check_standards
    return [
        _place(case, solution, key)
        | {
            "nominal": number(checks.nominal[place]),
            "measured": number(checks.measured[place]),
            "unit": case.method.vessel_unit,
            "percent_of_nominal": number(checks.percent[place]),
        }
        for place, (solution, key) in enumerate(_pairs(checks.solutions.tolist(), checks.key.tolist()))
    ]


def _spiked_blanks(case: Case) -> list[dict[str, Any]]:
    spiked = case.spiked_blanks
    return [
        _place(case, solution, key)
        | {
            "stock": case.method.stocks[spiked.stock[place]].name if spiked.stock[place] >= 0 else None,
            "added": number(spiked.added[place]),
            "measured": number(spiked.measured[place]),
            "unit": case.method.vessel_unit,
            "recovery": number(spiked.percent[place]),
        }
        for place, (solution, key) in enumerate(_pairs(spiked.solutions.tolist(), spiked.key.tolist()))
    ]


def calibrations(case: Case) -> list[dict[str, Any]]:
    """Return the calibrations of an export with their standards."""
    found = case.calibrations
    lines, segments = found.lines, found.segments
    listed = []
    for at, key in enumerate(found.key[~found.instrument].tolist()):
        analyte, channel = case.keys.split(key)
        start, size = int(segments.starts[at]), int(segments.sizes[at])
        standards = found.solutions[start : start + size].tolist()
        listed.append(
            {
                "analyte": case.readings.analyte.names[analyte],
                "channel": None if channel < 0 else case.readings.channel.names[channel],
                "slope": number(lines.slope[at]),
                "intercept": number(lines.intercept[at]),
                "slope_standard_uncertainty": number(math.sqrt(lines.var_slope[at])),
                "intercept_standard_uncertainty": number(math.sqrt(lines.var_intercept[at])),
                "correlation": number(lines.correlation[at]),
                "residual_sd": number(lines.residual_sd[at]),
                "n": int(lines.n[at]),
                "dof": int(lines.dof[at]),
                "unit": case.method.vessel_unit,
                "standards": [
                    {"label": case.label(s), "nominal": number(found.nominal[start + offset])}
                    | {
                        "signal": number(case.solutions.signal[s]),
                        "export_lines": _lines(case, s),
                    }
                    for offset, s in enumerate(standards)
                ],
            }
        )
    return listed
