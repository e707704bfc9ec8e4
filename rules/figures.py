"""Numbers as people read them: a few significant digits, U to its second, plain decimals. The record keeps all."""

from __future__ import annotations

from math import floor, isfinite, log10


def figure(value: float, digits: int = 3) -> str:
    """Write a number with a few significant digits and no exponent where that stays short.

    >>> figure(0.99412), figure(61.04), figure(1234567.0), figure(0.0000123)
    ('0.994', '61.0', '1234567', '0.0000123')
    """
    if not isfinite(value):
        return "no number"
    if value == 0:
        return "0"
    places = digits - 1 - floor(log10(abs(value)))
    if places > 9:
        return f"{value:.{digits - 1}e}"
    return f"{value:.{max(places, 0)}f}"


def percent(value: float, *bounds: float) -> str:
    """Write a percentage: whole from 10 up, one decimal below, and more where rounding would carry it over a bound.

    >>> percent(61.4), percent(3.25), percent(74.6, 75, 125)
    ('61 %', '3.2 %', '74.6 %')
    """
    for places in range(0 if abs(value) >= 9.95 else 1, 6):
        shown = round(value, places) + 0.0  # no minus before a zero
        if all((shown < bound) == (value < bound) and (shown > bound) == (value > bound) for bound in bounds):
            return f"{shown:.{places}f} %"
    return f"{value:g} %"


def probability(p: float) -> str:
    """Write a probability, tiny ones as a bound.

    >>> probability(0.68237), probability(0.000000521)
    ('p = 0.68', 'p < 0.0001')
    """
    return f"p = {figure(p, 2)}" if p >= 0.0001 else "p < 0.0001"


def places_of(uncertainty: float) -> int:
    """Return the decimals that show an uncertainty to its second significant digit.

    >>> places_of(1.92246), places_of(0.0994), places_of(0.0996), places_of(250.0)
    (1, 3, 2, -1)
    """
    exponent = floor(log10(uncertainty))
    # rounding may carry into the next power of ten: 0.0996 reads 0.10, not 0.100
    if round(uncertainty, 1 - exponent) >= 10 ** (exponent + 1):
        exponent += 1
    return 1 - exponent


def rounded(value: float, places: int) -> str:
    """Write a number with so many decimals; negative ones round to tens and hundreds.

    >>> rounded(17.2605, 1), rounded(1234.0, -1), rounded(-0.001, 1)
    ('17.3', '1230', '0.0')
    """
    text = f"{round(value, places):.{max(places, 0)}f}"
    return text.removeprefix("-") if float(text) == 0 else text


def plus_minus(value: float, expanded: float) -> str:
    """Write value ± U, both to the second significant digit of U.

    >>> plus_minus(17.2605, 1.92246)
    '17.3 ± 1.9'
    """
    places = places_of(expanded)
    return f"{rounded(value, places)} ± {rounded(expanded, places)}"


def span(value: float, low: float, high: float) -> str:
    """Write a value with an interval whose halves differ.

    >>> span(3.0, 1.96, 6.43)
    '3.0 (2.0 to 6.4)'
    """
    places = places_of(max((high - low) / 2, abs(value) * 1e-12, 1e-300))
    return f"{rounded(value, places)} ({rounded(low, places)} to {rounded(high, places)})"


def several(items: list[str], most: int = 5) -> str:
    """List a few and say how many more there are.

    >>> several(["a", "b", "c"], most=2)
    'a, b and 1 more'
    """
    if len(items) <= most:
        return ", ".join(items)
    return f"{', '.join(items[:most])} and {len(items) - most} more"
