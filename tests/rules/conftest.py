"""Readings written by hand, as an export would give them, for tests of the calculation alone."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from parsers.readings import ROLE_WORDS, Fault, Quantities, Readings, Texts
from rules.method import Bench, Method, Stock

TEXTS = ("label", "sample", "analyte", "channel", "level", "stock", "batch", "analyst", "instrument", "comment")
NUMBERS = ("signal_sd", "signal_rsd", "readings", "replicate", "position", "measured_at", "predilution")
QUANTITIES = ("added", "nominal", "spike_volume", "aliquot", "made_up_to")


def readings_of(rows: list[dict[str, Any]], unit: str = "mg/L", volume: str = "mL") -> Readings:
    """Make readings from one dict a row; `signal` is a number or a list, `role` a word, `fault` a sentence."""
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
        values = np.array([row.get(name, np.nan) for row in rows], dtype=float)
        units = [None if np.isnan(v) else (unit if name in ("added", "nominal") else volume) for v in values]
        columns[name] = Quantities(values, Texts.of(units))
    lines = np.arange(2, len(rows) + 2, dtype=np.int64)
    faults = tuple(
        Fault(i, int(lines[i]), "Reading", "", "signal", row["fault"]) for i, row in enumerate(rows) if "fault" in row
    )
    return Readings(
        line=lines,
        role=np.array([ROLE_WORDS[row["role"]] for row in rows], dtype=np.int8),
        signals=np.array([values + [np.nan] * (width - len(values)) for values in signals], dtype=float),
        faults=faults,
        set_aside=(),
        problems=(),
        labels=(),
        columns=(),
        heading={},
        lines=len(rows) + 1,
        **columns,
    )


def additions_rows(signals: list[float], added: list[float] | None = None, **more: Any) -> list[dict[str, Any]]:
    """Rows of one sample: the first unspiked, the rest spiked with the concentrations or volumes given."""
    key = more.pop("key", "added")
    rows = []
    for signal, amount in zip(signals, added or [], strict=True):
        row = {"sample": "RIV-17", "role": "spiked" if amount else "unspiked", "signal": signal, **more}
        rows.append(row | ({key: amount} if amount else {}))
    return rows


def method_of(**more: Any) -> Method:
    """A method that reports additions in mg/L, with nothing else decided."""
    return Method(**({"report": "additions", "export_unit": "mg/L", "result_unit": "mg/L"} | more))


@pytest.fixture
def make_readings():
    """Readings from dicts."""
    return readings_of


@pytest.fixture
def make_additions():
    """Rows of one sample with its additions."""
    return additions_rows


@pytest.fixture
def make_method():
    """A method."""
    return method_of


@pytest.fixture
def make_bench():
    """A bench."""
    return Bench


@pytest.fixture
def make_stock():
    """A stock."""
    return Stock
