"""Texts of the settings as values: what was written is what is meant, and everything else is refused with its form."""

from __future__ import annotations

import math
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.method import Measure
from rules.units import UnitUnusable
from watcher import scalars

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.mark.parametrize(
    ("read", "text", "expected"),
    [
        (scalars.number, "1e5", 100000.0),
        (scalars.number, "010", 10.0),
        (scalars.number, "-0.5", -0.5),
        (scalars.number, " 95 ", 95.0),
        (scalars.yes_or_no, "no", False),
        (scalars.yes_or_no, "off", False),
        (scalars.yes_or_no, "on", True),
        (scalars.yes_or_no, "yes", True),
        (scalars.seconds, "5 s", 5.0),
        (scalars.seconds, "250ms", 0.25),
        (scalars.seconds, "10 min", 600.0),
        (scalars.seconds, "2 h", 7200.0),
        (scalars.seconds, "1.5 d", 129600.0),
        (scalars.measure, "5 mg/L", Measure(5.0, "mg/L")),
        (scalars.volume, "0.05 L", Measure(0.05, "L")),
        (scalars.volume, "20 µL", Measure(20.0, "µL")),
        (scalars.concentration, "1e3 ng/mL", Measure(1000.0, "ng/mL")),
        (scalars.volume_or_concentration, "5 mL", Measure(5.0, "mL")),
        (scalars.volume_or_concentration, "2 mg/L", Measure(2.0, "mg/L")),
        (scalars.concentration_unit, " µg/L ", "µg/L"),
        (scalars.tolerance, "0.02 mL", Measure(0.02, "mL")),
        (scalars.tolerance, "0.6 %", Measure(0.6, "%")),
        (scalars.tolerance, "0.1", Measure(0.1, "")),
        (scalars.percentage, "95 %", 0.95),
        (scalars.percentage, "0 %", 0.0),
        (scalars.relative_tolerance, "0.5 %", 0.005 / math.sqrt(3)),
        (scalars.relative_uncertainty, "0.4 %, k=2", 0.002),
        (scalars.relative_uncertainty, "0.6 % , k = 3", 0.002),
        (scalars.dilution, "10", 10.0),
        (scalars.dilution, "1 in 10", 10.0),
        (scalars.dilution, "1+9", 10.0),
    ],
)
def test_a_text_becomes_its_value(read: Callable[[str], Any], text: str, expected: Any) -> None:
    """A text in one of its forms becomes the value that it says."""
    assert read(text) == pytest.approx(expected) if isinstance(expected, float) else read(text) == expected


@pytest.mark.parametrize(
    ("read", "text", "sentence"),
    [
        (scalars.number, "1:30", "expected a number with a decimal point, got '1:30'"),
        (scalars.number, "0,95", "expected a number with a decimal point, got '0,95'"),
        (scalars.number, "1_000", "got '1_000'"),
        (scalars.number, "nan", "got 'nan'"),
        (scalars.number, "1e999", "expected a number that a computer can hold, got '1e999'"),
        (scalars.number, "１２", "got '１２'"),
        (scalars.seconds, "1e999 s", "expected a number that a computer can hold, got '1e999 s'"),
        (scalars.volume, "1e999 mL", "expected a number that a computer can hold, got '1e999 mL'"),
        (scalars.number, "", "got ''"),
        (scalars.yes_or_no, "y", "expected yes or no, got 'y'"),
        (scalars.yes_or_no, "1", "expected yes or no, got '1'"),
        (scalars.seconds, "5", "expected a duration such as '5 s', '10 min' or '2 h', got '5'"),
        (scalars.seconds, "1:30", "got '1:30'"),
        (scalars.seconds, "-5 s", "got '-5 s'"),
        (scalars.seconds, "5 weeks", "got '5 weeks'"),
        (scalars.measure, "five mL", "expected a number with a unit, such as '5 mL' or '5 mg/L', got 'five mL'"),
        (scalars.volume, "5", "unit of a volume, a mass, a concentration or a content"),
        (scalars.volume, "5 mg/L", "expected a volume such as mL or µL, got 'mg/L'"),
        (scalars.volume, "0 mL", "expected more than 0, got '0 mL'"),
        (scalars.volume, "-1 mL", "expected more than 0, got '-1 mL'"),
        (scalars.concentration, "5 mL", "expected a concentration such as mg/L or µg/L, got 'mL'"),
        (scalars.concentration, "5 ppm", "'ppm' does not say per what: write mg/L, µg/L or ng/L"),
        (scalars.concentration, "5 mgL", "'mgL'"),
        (scalars.volume_or_concentration, "5 g", "expected a volume such as '5 mL' or a concentration such as"),
        (scalars.concentration_unit, "percent", "'percent'"),
        (scalars.tolerance, "0 mL", "expected more than 0, got '0 mL'"),
        (scalars.tolerance, "1 mg/L", "expected a volume such as mL or µL, got 'mg/L'"),
        (scalars.percentage, "0.5", "expected a percentage such as '0.5 %', got '0.5'"),
        (scalars.percentage, "-1 %", "got '-1 %'"),
        (scalars.relative_uncertainty, "0.4 %", "with its coverage factor, such as '0.4 %, k=2', got '0.4 %'"),
        (scalars.relative_uncertainty, "0.4 %, k=0", "got '0.4 %, k=0'"),
        (scalars.dilution, "0", "expected a dilution such as '10', '1 in 10' or '1+9', got '0'"),
        (scalars.dilution, "1 to 10", "got '1 to 10'"),
        (scalars.day_begins, "01.03.2026", "expected a date such as 2026-03-01, got '01.03.2026'"),
        (scalars.day_begins, "2026-02-30", "got '2026-02-30'"),
    ],
)
def test_another_text_is_refused_with_its_form(read: Callable[[str], Any], text: str, sentence: str) -> None:
    """A text in another form is refused; the sentence says what was expected and what was found."""
    with pytest.raises((ValueError, UnitUnusable)) as refused:
        read(text)

    assert sentence in str(refused.value)


def test_a_day_lasts_from_its_first_to_its_last_moment() -> None:
    """A date as `from` begins with the day, a date as `until` ends just before the next one."""
    midnight = datetime(2026, 3, 1, tzinfo=UTC).timestamp()

    assert scalars.day_begins("2026-03-01") == midnight
    assert midnight + 86399 < scalars.day_ends("2026-03-01") < scalars.day_begins("2026-03-02")


@given(st.floats(min_value=-1e300, max_value=1e300))
def test_any_number_reads_back(value: float) -> None:
    """A number as it is written with a decimal point or exponent reads back unchanged."""
    assert scalars.number(repr(value)) == value


@given(st.text(max_size=12))
def test_no_text_becomes_a_number_that_is_none(text: str) -> None:
    """Whatever stands there is a finite number or refused, and never something else."""
    try:
        value = scalars.number(text)
    except ValueError:
        return

    assert math.isfinite(value)
    assert float(text) == value
