"""Published standard additions recomputed, from the export to the concentration in the sample."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from watcher.verification.lines import of_line
from watcher.verification.straight_line import StraightLine
from watcher.verification.worked_export import additions, bench, case_of, stock

if TYPE_CHECKING:
    from rules.case import Case
    from rules.line import Floats
    from watcher.verification.inputs import Inputs
    from watcher.verification.lines import Numbers


def silver(inputs: Inputs) -> Numbers:
    """Additions stated as concentrations."""
    x, y = inputs.columns("silver_additions")
    case = case_of(inputs, additions(x, y, column="added"), "µg/mL")
    return of_line(StraightLine.through(x, y)) | {
        "C, µg/mL": _value(case),
        "s(C), µg/mL": _of_the_line(case),
        "U(C), µg/mL": float(case.additions.expanded_uncertainty[0]),
    }


def iron_flasks(inputs: Inputs) -> Numbers:
    """10 mL aliquots and a standard of 11.1 mg/L in flasks of 50 mL."""
    x, y = inputs.columns("iron_flasks")
    case = _iron(inputs)
    return of_line(StraightLine.through(x, y)) | {"C, mg/L": _value(case), "s(C), mg/L": _of_the_line(case)}


def strontium(inputs: Inputs) -> Numbers:
    """Additions to a digest of 0.750 mg of enamel in 10 mL, and the content of the enamel."""
    x, y = inputs.columns("strontium_additions")
    fit = StraightLine.through(x, y)
    digest = case_of(inputs, additions(x, y, column="added"), "ng/mL")
    rows = additions(x, y, column="added", mass_mg=0.750, digest_mL=10.0)
    solid = case_of(inputs, rows, "ng/mL", result_unit="µg/g")
    return {
        "slope": fit.slope,
        "intercept": fit.intercept,
        "r squared": fit.r**2,
        "C, ng/mL": _value(digest),
        "s(C), ng/mL": _of_the_line(digest),
        "content of enamel, µg/g": _value(solid),
    }


def ascorbic_acid(inputs: Inputs) -> Numbers:
    """Additions into one vessel of 50 mL; the book scales the signals itself, and gives them equal weights."""
    case = case_of(inputs, additions(*_ascorbic(inputs), column="added"), "mmol/L")
    return {"C, mmol/L": _value(case), "s(C), mmol/L": _of_the_line(case)}


def sodium_in_serum(inputs: Inputs) -> Numbers:
    """5.00 mL of 2.08 mol/L on top of 95.0 mL, a single addition."""
    rows = additions((0.0, 5.0), (4.27, 7.98), column="standard_mL")
    case = case_of(inputs, rows, "mol/L", bench=bench(95.0), stocks=stock(2.08, "mol/L"))
    return {"C, mol/L": _value(case)}


def variable_volume(inputs: Inputs) -> Numbers:
    """Standard of 600 µg/L on top of 5.00 mL: the manual's line of S V on c v, and the service's result."""
    x, y = _variable_volume(inputs)
    fit = StraightLine.through(x, y)
    volumes, signals = inputs.columns("variable_volume")
    rows = additions(volumes, signals, column="standard_mL")
    case = case_of(inputs, rows, "µg/L", bench=bench(5.0), stocks=stock(600.0, "µg/L"))
    return of_line(fit) | {"C V, ng": -fit.x_at(0.0), "C, µg/L": _value(case)}


def lead(inputs: Inputs) -> Numbers:
    """One sample of three ways: flasks, one vessel, and several additions of which only the line is printed."""
    standard = stock(1560.0, "µg/L")
    flasks = additions((0.0, 1e-3), (0.193, 0.419), column="standard_mL")
    vessel = additions((0.0, 5e-3), (0.712, 1.546), column="standard_mL")
    volumes = (0.0, 1e-3, 2e-3)
    several = additions(volumes, [0.266 + 312 * v for v in volumes], column="standard_mL")
    return {
        "C, in flasks, µg/L": _value(case_of(inputs, flasks, "µg/L", bench=bench(1.0, 5.0), stocks=standard)),
        "C, in one vessel, µg/L": _value(case_of(inputs, vessel, "µg/L", bench=bench(5.0), stocks=standard)),
        "C, from the line, µg/L": _value(case_of(inputs, several, "µg/L", bench=bench(1.0, 5.0), stocks=standard)),
    }


def aluminium(inputs: Inputs) -> Numbers:
    """3.12 g of gum in 100 mL, 25 mL aliquots, a standard of 300 mg/L."""
    x, y = inputs.columns("aluminium_in_gum")
    fit, case = StraightLine.through(x, y), _aluminium(inputs)
    return {
        "intercept": fit.intercept,
        "slope": fit.slope,
        "x-intercept, mL": -fit.x_at(0.0),
        "C in the vessel, mg/L": _value(case) / (100 / 3.12),
        "content, mg/kg": _value(case),
        "residual sd": fit.residual_sd,
        "t": fit.t,
        "s of content, mg/kg": _of_the_line(case),
        "U of content, mg/kg": float(case.additions.expanded_uncertainty[0]),
    }


def manganese(inputs: Inputs) -> Numbers:
    """1.00 mL of sample in 2.00 mL; the additions are stated for the vessel."""
    x, y = inputs.columns("manganese_additions")
    fit = StraightLine.through(x, y)
    case = case_of(inputs, additions(x, y, column="added"), "mg/L", bench=bench(1.0, 2.0), added_refers_to="vessel")
    return {"slope": fit.slope, "intercept": fit.intercept, "C, mg/L": _value(case)}


def fiellers_limits(inputs: Inputs) -> Numbers:
    """Return the limits of six sets of additions: four through the evaluation, two in the books' own scaling."""
    found: Numbers = {}
    silver_case = case_of(inputs, additions(*inputs.columns("silver_additions"), column="added"), "µg/mL")
    strontium_case = case_of(inputs, additions(*inputs.columns("strontium_additions"), column="added"), "ng/mL")
    for name, case in (
        ("silver", silver_case),
        ("iron flasks", _iron(inputs)),
        ("strontium", strontium_case),
        ("aluminium in gum", _aluminium(inputs)),
    ):
        found[f"{name}, low"] = float(case.additions.low[0])
        found[f"{name}, high"] = float(case.additions.high[0])
    for name, points, volume in (
        ("ascorbic acid", _ascorbic(inputs), 1.0),
        ("variable volume", _variable_volume(inputs), 5.0),
    ):
        limits = StraightLine.through(*points).back_to_zero()
        found[f"{name}, low"] = float(limits.low[0]) / volume
        found[f"{name}, high"] = float(limits.high[0]) / volume
    return found


def _iron(inputs: Inputs) -> Case:
    rows = additions(*inputs.columns("iron_flasks"), column="standard_mL")
    return case_of(inputs, rows, "mg/L", bench=bench(10.0, 50.0), stocks=stock(11.1, "mg/L"))


def _aluminium(inputs: Inputs) -> Case:
    rows = additions(*inputs.columns("aluminium_in_gum"), column="standard_mL")
    return case_of(inputs, rows, "mg/L", bench=bench(25.0, 100.0, 100 / 3.12), stocks=stock(300.0, "mg/L"))


def _ascorbic(inputs: Inputs) -> tuple[Floats, Floats]:
    """279 mmol/L into 50 mL: addition and signal, scaled to the undiluted sample."""
    volumes, signals = inputs.columns("ascorbic_acid_in_place")
    return 279 * volumes / 50, signals * (50 + volumes) / 50


def _variable_volume(inputs: Inputs) -> tuple[Floats, Floats]:
    """600 µg/L on top of 5.00 mL: c v in ng, and S V."""
    volumes, signals = inputs.columns("variable_volume")
    return np.asarray(600 * volumes), np.asarray(signals * (5 + volumes))


def _value(case: Case) -> float:
    return float(case.additions.value[0])


def _of_the_line(case: Case) -> float:
    """Standard uncertainty by the line alone, which is all that books know."""
    return float(case.additions.budget[0].standard_uncertainty[0])
