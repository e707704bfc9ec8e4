"""Readings written by hand, as an export would give them, for tests of the calculation alone."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from parsers.readings import ROLE_WORDS, Fault, Quantities, Readings, Texts
from rules.evaluate import evaluate
from rules.method import Bench, Method, Stock

if TYPE_CHECKING:
    from rules.checks import Check
    from rules.outcomes import Outcomes

TEXTS = (
    "label",
    "sample",
    "analyte",
    "channel",
    "level",
    "stock",
    "batch",
    "analyst",
    "instrument",
    "duplicate_of",
    "origin",
    "comment",
)
NUMBERS = ("signal_sd", "signal_rsd", "readings", "replicate", "position", "measured_at", "predilution")
QUANTITIES = (
    "added", "nominal", "spike_volume", "aliquot", "made_up_to", "mass", "digest_volume",
    "concentration", "reported_result", "reference_signal",
)  # fmt: skip
CONCENTRATIONS = ("added", "nominal", "concentration", "reported_result")
REFERENCE = Path(__file__).parents[1] / "reference"


def readings_of(rows: list[dict[str, Any]], unit: str = "mg/L", volume: str = "mL") -> Readings:
    """Make readings from one dict a row; `signal` is a number or a list, `role` a word, `fault` a sentence.

    A quantity may be given as (number, unit text).
    """
    signals = [list(np.atleast_1d(row["signal"])) for row in rows]
    width = max((len(values) for values in signals), default=1)
    columns: dict[str, Any] = {
        name: Texts.of([row.get(name) for row in rows]) for name in TEXTS if name not in ("label", "sample", "analyte")
    }
    columns["analyte"] = Texts.of([row.get("analyte", "Zn") for row in rows])
    labels = [row.get("label") or f"{row.get('sample', row['role'])} {i}" for i, row in enumerate(rows)]
    columns["label"] = Texts.of(labels)
    columns["sample"] = Texts.of([row.get("sample") or label for row, label in zip(rows, labels, strict=True)])
    for name in NUMBERS:
        columns[name] = np.array([row.get(name, np.nan) for row in rows], dtype=float)
    for name in QUANTITIES:
        default = None if name == "reference_signal" else unit if name in CONCENTRATIONS else volume
        stated = [row.get(name, np.nan) for row in rows]
        pairs = [one if isinstance(one, tuple) else (one, default) for one in stated]
        values = np.array([value for value, _ in pairs], dtype=float)
        units = [None if np.isnan(value) else text for value, text in pairs]
        columns[name] = Quantities(values, Texts.of(units))
    lines = np.arange(2, len(rows) + 2, dtype=np.int64)
    faults = tuple(
        Fault(i, int(lines[i]), "Reading", "", "signal", row["fault"]) for i, row in enumerate(rows) if "fault" in row
    )
    return Readings(
        line=lines,
        role=np.array([ROLE_WORDS[row["role"]] for row in rows], dtype=np.int8),
        signals=np.array([values + [np.nan] * (width - len(values)) for values in signals], dtype=float).reshape(
            len(rows), width
        ),
        faults=faults,
        set_aside=(),
        problems=(),
        labels=(),
        columns=(),
        heading={},
        lines=len(rows) + 1,
        **columns,
    )


def additions_rows(
    signals: list[Any], added: list[float] | None = None, key: str = "added", **more: Any
) -> list[dict[str, Any]]:
    """Rows of one sample: unspiked where nothing is added, else spiked with the concentration or volume given."""
    rows = []
    for signal, amount in zip(signals, added or [], strict=True):
        row = {"sample": "RIV-17", "role": "spiked" if amount else "unspiked", "signal": signal, **more}
        rows.append(row | ({key: amount} if amount else {}))
    return rows


def standard_rows(
    nominals: list[float], signals: list[Any], role: str = "standard", **more: Any
) -> list[dict[str, Any]]:
    """Rows of standards or check standards."""
    return [
        {"role": role, "label": f"{role} {n:g}", "nominal": n, "signal": s, **more}
        for n, s in zip(nominals, signals, strict=True)
    ]


def blank_rows(signals: list[Any], **more: Any) -> list[dict[str, Any]]:
    """Rows of blanks."""
    return [{"role": "blank", "label": f"BLK {i}", "signal": s, **more} for i, s in enumerate(signals, 1)]


def method_of(**more: Any) -> Method:
    """A method that reports additions in mg/L, with nothing else decided."""
    return Method(**({"report": "additions", "export_unit": "mg/L", "result_unit": "mg/L"} | more))


def outcomes_of(rows: list[dict[str, Any]], unit: str = "mg/L", accepted_at: float = 0.0, **method: Any) -> Outcomes:
    """Evaluate rows by a method of the decisions given."""
    return evaluate(readings_of(rows, unit=unit), method_of(**method), accepted_at)


def check_of(outcomes: Outcomes, name: str) -> Check:
    """The check of a name."""
    return next(check for check in outcomes.checks if check.name == name)


def columns_of(name: str) -> dict[str, np.ndarray[Any, Any]]:
    """Columns of a file of published input: numbers where every cell is one, else texts."""
    with (REFERENCE / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    columns: dict[str, np.ndarray[Any, Any]] = {}
    for key in rows[0]:
        texts = [row[key] for row in rows]
        try:
            columns[key] = np.array(texts, dtype=float)
        except ValueError:
            columns[key] = np.array(texts)
    return columns


# Functions have no state of a test, so one of each serves the session, and property tests may take them.


@pytest.fixture(scope="session")
def make_readings():
    """Readings from dicts."""
    return readings_of


@pytest.fixture(scope="session")
def make_additions():
    """Rows of one sample with its additions."""
    return additions_rows


@pytest.fixture(scope="session")
def make_standards():
    """Rows of standards."""
    return standard_rows


@pytest.fixture(scope="session")
def make_blanks():
    """Rows of blanks."""
    return blank_rows


@pytest.fixture(scope="session")
def make_method():
    """A method."""
    return method_of


@pytest.fixture(scope="session")
def make_bench():
    """A bench."""
    return Bench


@pytest.fixture(scope="session")
def make_stock():
    """A stock."""
    return Stock


@pytest.fixture(scope="session")
def outcomes():
    """Rows and decisions to outcomes."""
    return outcomes_of


@pytest.fixture(scope="session")
def check():
    """Outcomes and a name to a check."""
    return check_of


@pytest.fixture(scope="session")
def reference():
    """Columns of a published example."""
    return columns_of
