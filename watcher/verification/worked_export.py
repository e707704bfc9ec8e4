"""A worked example as an export: written as text, read through a layout, evaluated, as in service."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from parsers.layout import parse_layout
from parsers.read import read
from rules.evaluate import evaluate
from rules.method import Bench, Measure, Method, Stock

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from rules.case import Case
    from watcher.verification.inputs import Inputs

LAYOUT = "layout.yaml"
_COLUMNS = ("solution", "role", "signal", "nominal", "added", "standard_mL", "mass_mg", "digest_mL")


def additions(
    amounts: Iterable[float], signals: Iterable[float], *, column: str, **more: float
) -> list[dict[str, Any]]:
    """Rows of one sample: nothing added where the amount is 0, else the amount in a column of the layout."""
    return [
        {"solution": "sample", "role": "spiked", "signal": signal, column: amount, **more}
        if amount
        else {"solution": "sample", "role": "unspiked", "signal": signal, **more}
        for amount, signal in zip(amounts, signals, strict=True)
    ]


def standards(nominals: Iterable[float], signals: Iterable[float]) -> list[dict[str, Any]]:
    """Rows of a calibration."""
    return [
        {"solution": "standard", "role": "standard", "signal": signal, "nominal": nominal}
        for nominal, signal in zip(nominals, signals, strict=True)
    ]


def unspiked(sample: str, signals: Iterable[float]) -> list[dict[str, Any]]:
    """Rows of a sample without additions, one a solution."""
    return [{"solution": sample, "role": "unspiked", "signal": signal} for signal in signals]


def blanks(signals: Iterable[float]) -> list[dict[str, Any]]:
    """Rows of blanks."""
    return [{"solution": "blank", "role": "blank", "signal": signal} for signal in signals]


def stock(concentration: float, unit: str) -> tuple[Stock, ...]:
    """One standard solution."""
    return (Stock("standard", {"analyte": Measure(concentration, unit)}),)


def bench(aliquot_ml: float, made_up_to_ml: float | None = None, predilution: float = 1.0) -> Bench:
    """Volumes that hold for all solutions."""
    vessel = None if made_up_to_ml is None else Measure(made_up_to_ml, "mL")
    return Bench(aliquot=Measure(aliquot_ml, "mL"), made_up_to=vessel, predilution=predilution)


def case_of(inputs: Inputs, rows: Iterable[Mapping[str, Any]], unit: str, **decisions: Any) -> Case:
    """Write rows as an export, read and evaluate it.

    Parameters
    ----------
    inputs
        Where the layout lies.
    rows
        One mapping a solution; its keys are columns of the layout.
    unit
        Of concentrations in the export, and of results unless `result_unit` says otherwise.
    decisions
        Of the `Method`; a spiked sample reports its additions.
    """
    text = "\n".join([",".join(_COLUMNS), *(",".join(_cell(row.get(name, "")) for name in _COLUMNS) for row in rows)])
    layout = parse_layout(inputs.text(LAYOUT), LAYOUT)
    readings = read(f"{text}\n".encode(), layout, "published.csv")
    settings = {"report": "additions", "blank": "none", "export_unit": unit, "result_unit": unit} | decisions
    return evaluate(readings, Method(**settings), 0.0).case


def _cell(value: object) -> str:
    # numpy's numbers are written like Python's, in full
    return repr(float(value)) if isinstance(value, float) else str(value)
