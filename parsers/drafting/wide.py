"""Columns of a wide table: which headers name an element, and the pattern that takes them apart.

Nothing here reads a row.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers.drafting.headers import Header
from parsers.drafting.vocabulary import ELEMENTS, measure, plain

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence


_SYMBOL = r"(?P<analyte>[A-Z][a-z]?)"
#: How an element and its line or mass are written, the longer forms first.
_FORMS = (
    re.compile(rf"(?P<channel>\d{{1,3}})\s?{_SYMBOL}(?P<rest>(?![a-z]).*)"),
    re.compile(rf"{_SYMBOL}[ _-]?(?P<channel>\d{{1,3}}(?:\.\d+)?)(?P<rest>(?![\d.]).*)"),
    re.compile(rf"{_SYMBOL}(?P<rest>(?![A-Za-z]).*)"),
)
_WRITTEN = (
    r"(?P<channel>\d{1,3})\s?(?P<analyte>[A-Z][a-z]?)",
    r"(?P<analyte>[A-Z][a-z]?)[ _-]?(?P<channel>\d{1,3}(?:\.\d+)?)",
    r"(?P<analyte>[A-Z][a-z]?)",
)
#: The mode of an instrument in which an element was measured.
_MODE = re.compile(r"\[\s*\w+\s*\]")
#: A numbered reading.
_REPLICATE = re.compile(r"(?P<stem>R|Rep|rep|Replicate|Reading|reading|Run)[ .]?\s*\d{1,2}")
_FIELDS = {
    "signal": ("mean", "average", "avg", "intensity", "signal", "counts", "cps", "abs", "absorbance", "area",
               "mittelwert", "int", "mean cps", "mean intensity", "net intensity", "peak area"),
    "signal_sd": ("sd", "std dev", "stdev", "stddev", "standard deviation", "st dev"),
    "signal_rsd": ("rsd", "%rsd", "rsd %", "cv", "%cv", "rsd(%)", "rsd (%)", "(%rsd)"),
    "concentration": ("conc", "concentration", "result", "konz"),
}  # fmt: skip


@dataclass(slots=True)
class Wide:
    """Columns that become rows.

    Attributes
    ----------
    pattern
        For ``unfold``.
    fields
        Word in the header to field; empty where every matching column is a signal.
    columns
        Indices of the columns that are read.
    doubts
        What is uncertain.
    left
        Headers that name an element and are not read.
    zero_is_none
        Whether a signal of zero says that no peak was found.
    computed
        Whether these columns hold what the instrument computed itself, for want of signals.
    """

    pattern: str
    fields: dict[str, str]
    columns: list[int]
    doubts: list[str]
    left: list[str]
    computed: bool = False
    zero_is_none: bool = False


@dataclass(frozen=True, slots=True)
class _Found:
    at: int
    form: int
    rest: str
    field: str
    unit: str


def find_wide(headers: Sequence[Header], taken: set[int], is_numbers: Callable[[int], bool]) -> Wide | None:
    """Find the columns of a wide table; None where no header names an element."""
    found = [
        one for at, header in enumerate(headers) if at not in taken and is_numbers(at) and (one := _find(at, header))
    ]
    if not found:
        return None
    signals = [one for one in found if one.field == "signal"]
    doubts = []
    if not signals:
        signals = [one for one in found if one.field == "concentration"]
        doubts.append(
            "these columns hold concentrations that the instrument computed itself; no others can be the signal. "
            "Export the signal if the instrument can"
        )
    if not signals:
        return None
    if any(_MODE.fullmatch(one.rest) for one in signals):
        return _of_modes([one for one in signals if _MODE.fullmatch(one.rest)], headers, doubts, found)
    replicates = [_REPLICATE.fullmatch(one.rest) for one in signals]
    if signals and all(replicates):
        return _of_replicates(headers, signals, doubts, [one.at for one in found])
    statistic = next((name for name in ("signal_sd", "signal_rsd") if any(one.field == name for one in found)), "")
    kept = [*signals, *(one for one in found if one.field == statistic)]
    by_unit = {one.unit for one in signals}
    if len(by_unit) > 1 and len({one.rest for one in signals}) > 1 and not statistic:
        doubts.append(f"their headers state unlike units ({', '.join(sorted(by_unit))})")
    left = [headers[one.at].written for one in found if one not in kept]
    fields = (
        {}
        if not statistic
        else {one.rest: "signal" if one.field != statistic else statistic for one in kept if one.rest}
    )
    pattern = _pattern(kept, [header.written for header in headers], with_field=bool(fields))
    if any(one.rest == "" for one in kept) and fields:
        return _unnamed_mean(headers, signals, doubts, left)
    matching = {at for at, header in enumerate(headers) if at not in taken and re.search(pattern, header.written)}
    if matching != {one.at for one in kept}:  # a header that only looks like an element, such as No or In
        symbols = sorted({_symbol(headers[one.at], one) for one in kept})
        pattern = pattern.replace("[A-Z][a-z]?", "|".join(symbols))
    return Wide(pattern, fields, [one.at for one in kept], doubts, left, computed=signals[0].field == "concentration")


def _symbol(header: Header, found: _Found) -> str:
    match = _FORMS[found.form].fullmatch(header.written)
    return match["analyte"] if match else ""


def _of_modes(
    signals: list[_Found], headers: Sequence[Header], doubts: list[str], found: Sequence[_Found]
) -> Wide | None:
    """Read an element measured in several modes: mass, symbol and mode are the channel together."""
    forms = {one.form for one in signals}
    if len(forms) > 1:
        return None
    start = _WRITTEN[forms.pop()].replace("?P<channel>", "?:")
    at = [one.at for one in signals]
    left = [headers[one.at].written for one in found if one.at not in at]
    return Wide(rf"^(?P<channel>{start}\s*\[\s*\w+\s*\])$", {}, at, doubts, left)


def _of_replicates(headers: Sequence[Header], signals: list[_Found], doubts: list[str], named: list[int]) -> Wide:
    """Read numbered readings; statistics beside them say nothing new."""
    stems = sorted({match["stem"] for one in signals if (match := _REPLICATE.fullmatch(one.rest))})
    written = [header.written for header in headers]
    start = _pattern([_Found(one.at, one.form, "", "signal", "") for one in signals], written, with_field=False)
    gap = r"[\s|]*" if any(" | " in one for one in written) else r"\s*"
    pattern = f"{start[:-1]}{gap}(?P<replicate>(?:{'|'.join(map(re.escape, stems))})\\s*\\d+)$"
    at = [one.at for one in signals]
    return Wide(pattern, {}, at, doubts, [written[one] for one in named if one not in at])


def _unnamed_mean(headers: Sequence[Header], signals: list[_Found], doubts: list[str], left: list[str]) -> Wide:
    """Read the means alone where only their statistics have a word of their own."""
    at = [one.at for one in signals]
    others = [header.written for number, header in enumerate(headers) if _find(number, header) and number not in at]
    return Wide(
        _pattern(signals, [header.written for header in headers], with_field=False),
        {},
        at,
        doubts,
        sorted({*left, *others}),
    )


def names_element(header: str) -> bool:
    """Tell whether a header begins with the symbol of an element, alone or with its line or mass.

    >>> names_element("Zn 213.9"), names_element("Zone")
    (True, False)
    """
    return _find(0, Header(header, header)) is not None


def _find(at: int, header: Header) -> _Found | None:
    for form, pattern in enumerate(_FORMS):
        match = pattern.fullmatch(header.written)
        if match is None or match["analyte"] not in ELEMENTS:
            continue
        rest = match["rest"].strip(" |")
        field = _meaning(rest, header)
        if field is not None:
            return _Found(at, form, rest, field, header.unit)
    return None


def _meaning(rest: str, header: Header) -> str | None:
    """Return the field that the words behind the element name, None where they are not known."""
    word = plain(rest).strip("()[] ")
    if _REPLICATE.fullmatch(rest) or (_MODE.fullmatch(rest) and not measure(rest.strip("[] "))):
        return "signal"
    for field, words in _FIELDS.items():
        if word in words or plain(rest) in words:
            return field
    unit = rest.strip("()[], /")
    parts = [part for part in rest.split(" | ") if measure(part.strip("()[] ")) != "other"]
    if " | " in rest and len(parts) == 1:
        return _meaning(parts[0], header)
    of = measure(unit) or (measure(header.unit) if header.unit and rest.endswith(header.unit) else "")
    if of == "concentration":
        return "concentration"
    bare = plain(rest.removesuffix(header.unit).strip("()[], ")) if header.unit else word
    return next(
        (field for field, words in _FIELDS.items() if bare in words), "signal" if not rest or of == "other" else None
    )


def _pattern(found: Sequence[_Found], headers: Sequence[str], *, with_field: bool) -> str:
    """Write one pattern that matches the headers that are read."""
    forms = sorted({one.form for one in found})
    start = _WRITTEN[forms[0]] if len(forms) == 1 else ""
    if forms == [1, 2]:
        start = r"(?P<analyte>[A-Z][a-z]?)(?:[ _-]?(?P<channel>\d{1,3}(?:\.\d+)?))?"
    elif len(forms) > 1:
        start = r"(?:(?P<channel>\d{1,3})\s?)?(?P<analyte>[A-Z][a-z]?)"
    rests = list(dict.fromkeys(one.rest for one in found))
    words = "|".join(re.escape(rest).replace(r"\ ", " ") for rest in rests)
    gap = r"[\s|]*" if any(" | " in written for written in headers) else r"\s*"
    if with_field:
        return rf"^{start}{gap}(?P<field>{words})$"
    return rf"^{start}{gap}(?:{words})$" if any(rests) else f"^{start}$"
