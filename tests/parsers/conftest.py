"""A bench layout whose keys each test may replace, and exports read from text."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from parsers.layout import parse_layout
from parsers.read import read

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.layout import Layout
    from parsers.readings import Readings

sys.path.insert(0, str(Path(__file__).parent))  # `fuzzing` is a program of its own, and a module of its test

BENCH = {
    "layout": "flame bench",
    "claims": "{file: 'FL-*.csv'}",
    "separator": "';'",
    "columns": "{label: Label, analyte: Element, signal: [R1, R2]}",
    "labels": """
  - {like: 'BLK*', role: blank}
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: '{sample} +{level}', role: spiked}
  - {pattern: '^(?P<sample>[A-Z]+-\\d+)$', role: unspiked}""",
}


@pytest.fixture(scope="session")
def layout_text() -> Callable[..., str]:
    """Return the YAML of the bench layout with some keys replaced, added, or (None) taken out."""

    def write(**parts: str | None) -> str:
        keys = BENCH | parts
        return "\n".join(f"{key}: {value}" for key, value in keys.items() if value is not None) + "\n"

    return write


@pytest.fixture(scope="session")
def make_layout(layout_text: Callable[..., str]) -> Callable[..., Layout]:
    """Return the bench layout with some keys replaced."""

    def make(**parts: str | None) -> Layout:
        return parse_layout(layout_text(**parts), "layouts/flame.yaml")

    return make


@pytest.fixture(scope="session")
def read_text(make_layout: Callable[..., Layout]) -> Callable[..., Readings]:
    """Read an export written as text with the bench layout."""

    def reading(text: str, **parts: str | None) -> Readings:
        return read(text.encode(), make_layout(**parts), "FL-0412.csv")

    return reading
