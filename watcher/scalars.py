"""Texts of the settings as values: durations, quantities, percentages, dates. Every scalar arrives as text.

Each function says in its error what was expected and what was found; nothing here knows a key.
"""

from __future__ import annotations

import calendar
import re
from datetime import datetime
from math import isinf, sqrt

from parsers.cells import Grammar
from rules import units
from rules.method import Measure

_NUMBER = r"[-+]?[0-9]+(?:\.[0-9]+)?(?:[eE][-+]?[0-9]+)?"
_MEASURE = re.compile(rf"^(?P<number>{_NUMBER})\s*(?P<unit>.*)$")
_SECONDS = {"ms": 0.001, "s": 1.0, "min": 60.0, "h": 3600.0, "d": 86400.0}
_UNCERTAINTY = re.compile(rf"^(?P<value>{_NUMBER})\s*%(?:\s*,\s*k\s*=\s*(?P<k>{_NUMBER}))?$")
_SHARE = re.compile(r"^(?P<wanted>\d{1,6}) per (?P<among>\d{1,6}) samples?$")
_DAY = "%Y-%m-%d"
SECONDS_PER_DAY = 86400


def number(text: str) -> float:
    """Read a number with a decimal point.

    >>> number("0.95")
    0.95
    """
    if not re.fullmatch(_NUMBER, text.strip()):
        raise ValueError(f"expected a number with a decimal point, got '{text}'")
    return _finite(text, text)


def yes_or_no(text: str) -> bool:
    """Read a choice.

    >>> yes_or_no("no")
    False
    """
    try:
        return {"yes": True, "true": True, "on": True, "no": False, "false": False, "off": False}[text.strip()]
    except KeyError:
        raise ValueError(f"expected yes or no, got '{text}'") from None


def seconds(text: str) -> float:
    """Read a duration.

    >>> seconds("2 h"), seconds("250 ms")
    (7200.0, 0.25)
    """
    found = _MEASURE.match(text.strip())
    unit = found["unit"].strip() if found else ""
    if found is None or unit not in _SECONDS or float(found["number"]) < 0:
        raise ValueError(f"expected a duration such as '5 s', '10 min' or '2 h', got '{text}'")
    return _finite(found["number"], text) * _SECONDS[unit]


def span(text: str) -> float:
    """Read how far exports may lie apart: ``export`` (each stands alone) or a duration.

    >>> span("export"), span("12 h")
    (0.0, 43200.0)
    """
    if text.strip() == "export":
        return 0.0
    try:
        return seconds(text)
    except ValueError:
        raise ValueError(f"expected export, or a duration such as '12 h', got '{text}'") from None


def duration(seconds_long: float) -> str:
    """Write a duration as people do.

    >>> duration(7200), duration(20), duration(90)
    ('2 h', '20 s', '1.5 min')
    """
    for unit, size in (("h", 3600.0), ("min", 60.0)):
        if seconds_long >= size:
            return f"{seconds_long / size:g} {unit}"
    return f"{seconds_long:g} s"


def measure(text: str) -> Measure:
    """Read a number with a unit.

    >>> measure("5 mg/L")
    Measure(value=5.0, unit='mg/L')
    """
    found = _MEASURE.match(text.strip())
    if found is None:
        raise ValueError(f"expected a number with a unit, such as '5 mL' or '5 mg/L', got '{text}'")
    return Measure(_finite(found["number"], text), found["unit"].strip())


def volume(text: str) -> Measure:
    """Read a volume above zero."""
    return _of_kind(text, units.VOLUME)


def concentration(text: str) -> Measure:
    """Read a concentration above zero, of mass or of amount."""
    return _of_kind(text, units.CONCENTRATION, units.AMOUNT_CONCENTRATION)


def volume_or_concentration(text: str) -> Measure:
    """Read what a level adds: a volume of stock, or a concentration."""
    stated = measure(text)
    for kind in (units.VOLUME, units.CONCENTRATION, units.AMOUNT_CONCENTRATION):
        try:
            units.require(stated.unit, kind)
        except units.UnitUnusable:
            continue
        return _positive(stated, text)
    raise ValueError(f"expected a volume such as '5 mL' or a concentration such as '2 mg/L', got '{text}'")


def concentration_unit(text: str) -> str:
    """Read a unit of concentrations, of mass or of amount."""
    units.require(text.strip(), units.CONCENTRATION, units.AMOUNT_CONCENTRATION)
    return text.strip()


def result_unit(text: str) -> str:
    """Read a unit of results: a concentration, or the content of a solid."""
    if not any(units.same_kind(text.strip(), kind) for kind in (units.MASS_FRACTION, units.AMOUNT_CONTENT)):
        units.require(text.strip(), units.CONCENTRATION, units.AMOUNT_CONCENTRATION)
    return text.strip()


def tolerance(text: str) -> Measure:
    """Read a half-width: ``0.02 mL``, ``0.5 %``, or a bare number for a factor."""
    stated = measure(text)
    if stated.unit not in ("", "%"):
        units.require(stated.unit, units.VOLUME)
    return _positive(stated, text)


def percent_tolerance(text: str) -> Measure:
    """Read a half-width in percent."""
    return _positive(Measure(100 * percentage(text), "%"), text)


def relative_tolerance(text: str) -> float:
    """Read a half-width in percent as a relative standard uncertainty, a/√3 (JCGM 100:2008, 4.3.7).

    >>> round(relative_tolerance("1 %"), 6)
    0.005774
    """
    return percentage(text) / sqrt(3)


def relative_uncertainty(text: str) -> float:
    """Read a certificate's uncertainty as a relative standard uncertainty: divided by its k.

    >>> relative_uncertainty("0.4 %, k=2")
    0.002
    """
    found = _UNCERTAINTY.match(text.strip())
    if found is None or found["k"] is None or float(found["k"]) <= 0:
        raise ValueError(f"expected an uncertainty with its coverage factor, such as '0.4 %, k=2', got '{text}'")
    return float(found["value"]) / 100 / float(found["k"])


def percentage(text: str) -> float:
    """Read a percentage as a fraction.

    >>> percentage("2.5 %")
    0.025
    """
    stated = measure(text)
    if stated.unit != "%" or stated.value < 0:
        raise ValueError(f"expected a percentage such as '0.5 %', got '{text}'")
    return stated.value / 100


def dilution(text: str) -> float:
    """Read a predilution as the factor from aliquot to sample.

    >>> dilution("1 in 10"), dilution("1+9")
    (10.0, 10.0)
    """
    factor = Grammar().predilution(text)
    if factor is None or factor <= 0:
        raise ValueError(f"expected a dilution such as '10', '1 in 10' or '1+9', got '{text}'")
    return factor


def day_begins(text: str) -> float:
    """Read a date as the first second of that day, in seconds since 1970-01-01 of local time."""
    try:
        day = datetime.strptime(text.strip(), _DAY)  # noqa: DTZ007 - dates of bottles are local and have no zone
    except ValueError:
        raise ValueError(f"expected a date such as 2026-03-01, got '{text}'") from None
    return float(calendar.timegm(day.timetuple()))


def day_ends(text: str) -> float:
    """Read a date as the last moment of that day."""
    return day_begins(text) + SECONDS_PER_DAY - 1e-3


def molar_mass(text: str) -> float:
    """Read a molar mass in g/mol.

    >>> molar_mass("65.38 g/mol")
    65.38
    """
    stated = measure(text)
    if stated.unit != "g/mol":
        raise ValueError(f"expected a molar mass such as '65.38 g/mol', got '{text}'")
    return _positive(stated, text).value


def coverage(text: str) -> float | None:
    """Read how U is expanded: ``t`` (Student's, always), or a fixed factor such as ``k = 2``.

    >>> coverage("t"), coverage("k = 2")
    (None, 2.0)
    """
    if text.strip() == "t":
        return None
    found = re.fullmatch(rf"k\s*=\s*({_NUMBER})", text.strip())
    if found is None or not 1 <= float(found[1]) <= 5:
        raise ValueError(f"expected t, or a fixed factor such as 'k = 2', got '{text}'")
    return float(found[1])


def share(text: str) -> tuple[int, int]:
    """Read how many of so many samples.

    >>> share("1 per 20 samples")
    (1, 20)
    """
    found = _SHARE.match(" ".join(text.split()))
    if found is None or not 1 <= int(found["wanted"]) <= int(found["among"]):
        raise ValueError(f"expected a share such as '1 per 20 samples', got '{text}'")
    return int(found["wanted"]), int(found["among"])


def whole_number(text: str) -> int:
    """Read a whole number above zero.

    >>> whole_number("3")
    3
    """
    if not re.fullmatch(r"\d{1,6}", text.strip()) or int(text) < 1:
        raise ValueError(f"expected a whole number above 0, got '{text}'")
    return int(text)


def pattern(text: str) -> re.Pattern[str]:
    """Read a pattern that is searched for."""
    try:
        return re.compile(text)
    except re.error as error:
        raise ValueError(f"expected a pattern (Python re), got '{text}': {error}") from error


def _finite(digits: str, text: str) -> float:
    value = float(digits)
    if isinf(value):
        raise ValueError(f"expected a number that a computer can hold, got '{text}'")
    return value


def _of_kind(text: str, *kinds: str) -> Measure:
    stated = measure(text)
    units.require(stated.unit, *kinds)
    return _positive(stated, text)


def _positive(stated: Measure, text: str) -> Measure:
    if stated.value <= 0:
        raise ValueError(f"expected more than 0, got '{text}'")
    return stated
