"""Published calibrations recomputed: standards and samples as one export, read back by the evaluation."""

from __future__ import annotations

from typing import TYPE_CHECKING

from watcher.verification.lines import of_line
from watcher.verification.straight_line import StraightLine
from watcher.verification.worked_export import case_of, standards, unspiked

if TYPE_CHECKING:
    from collections.abc import Iterable

    from rules.line import Floats
    from rules.result import Results
    from watcher.verification.inputs import Inputs
    from watcher.verification.lines import Numbers


def cadmium(inputs: Inputs) -> Numbers:
    """Five standards in triplicate, and a leachate measured twice."""
    x, y = inputs.columns("cadmium_calibration")
    fit = StraightLine.through(x, y)
    back = _read_back(inputs, x, y, "mg/L", [("sample", (0.0712, 0.0716))])
    return of_line(fit) | {
        "correlation of both": fit.correlation_of_parameters,
        "r": fit.r,
        "c, two solutions, mg/L": float(back.value[0]),
        "u(c), mg/L": float(back.standard_uncertainty[0]),
    }


def fluorescein(inputs: Inputs) -> Numbers:
    """Seven standards, and three signals read back from one and from four solutions each."""
    x, y = inputs.columns("fluorescein_calibration")
    fit = StraightLine.through(x, y)
    wanted = [(signal, count) for signal in (2.9, 13.5, 23.0) for count in (1, 4)]
    samples = [(f"{signal:g} m{count}", (signal,) * count) for signal, count in wanted]
    back = _read_back(inputs, x, y, "ng/L", samples)
    found = of_line(fit) | {
        "r": fit.r,
        "95 % half-width of slope": fit.t * fit.sd_slope,
        "95 % half-width of intercept": fit.t * fit.sd_intercept,
        "3 s(y/x)/b, pg/mL": 3 * fit.residual_sd / fit.slope,
    }
    for place, (signal, count) in enumerate(wanted):
        found[f"x at {signal:g}, m = {count}"] = float(back.value[place])
        found[f"s of x at {signal:g}, m = {count}"] = float(back.standard_uncertainty[place])
        found[f"U of x at {signal:g}, m = {count}"] = float(back.expanded_uncertainty[place])
    return found


def six_standards(inputs: Inputs) -> Numbers:
    """Six standards, a sample in three solutions; and the standards weighted by 1/s²."""
    x, y, s = inputs.columns("six_standards")
    back = _read_back(inputs, x, y, "mg/L", [("sample", (29.32, 29.16, 29.51))])
    weighted = StraightLine.through(x, y, s**-2.0)
    return of_line(StraightLine.through(x, y)) | {
        "C, three solutions": float(back.value[0]),
        "s(C)": float(back.standard_uncertainty[0]),
        "U(C)": float(back.expanded_uncertainty[0]),
        "slope, weights 1/s²": weighted.slope,
        "intercept, weights 1/s²": weighted.intercept,
    }


def practice(inputs: Inputs) -> Numbers:
    """Standards in mol/L and one sample."""
    x, y = inputs.columns("practice_calibration")
    back = _read_back(inputs, x, y, "mol/L", [("sample", (0.114,))])
    return of_line(StraightLine.through(x, y)) | {"C, mol/L": float(back.value[0])}


def wing_length(inputs: Inputs) -> Numbers:
    """Age read back from the length of a wing; age stands in for concentration."""
    x, y = inputs.columns("wing_length")
    fit = StraightLine.through(x, y)
    back = _read_back(inputs, x, y, "mg/L", [("sample", (4.5,))])
    return {
        "slope": fit.slope,
        "intercept": fit.intercept,
        "residual variance": fit.residual_sd**2,
        "sd of slope": fit.sd_slope,
        "low limit of x at 4.5": float(back.low[0]),
        "high limit of x at 4.5": float(back.high[0]),
    }


def _read_back(
    inputs: Inputs, x: Floats, y: Floats, unit: str, samples: Iterable[tuple[str, tuple[float, ...]]]
) -> Results:
    rows = standards(x, y) + [row for name, signals in samples for row in unspiked(name, signals)]
    return case_of(inputs, rows, unit, report="calibration").back.results
