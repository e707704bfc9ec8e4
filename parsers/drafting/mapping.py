"""Which column holds which field: by its header's words, checked against what its cells hold.

A column is never mapped by its place. Where two columns could be the signal, none is taken.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from itertools import pairwise
from typing import TYPE_CHECKING

from parsers.drafting.drawing import scalar
from parsers.drafting.errors import DraftRefused
from parsers.drafting.headers import Header, take_apart
from parsers.drafting.moments import forms_of_date, forms_of_moment, forms_of_time
from parsers.drafting.named import find_named
from parsers.drafting.numerals import numberish
from parsers.drafting.vocabulary import (
    ADDITION,
    DILUTED_FROM,
    DILUTED_TO,
    ELEMENTS,
    EXCLUDED,
    NO,
    UNIT_COLUMN,
    USED,
    field_of,
    is_unit,
    measure,
    plain,
    role_of,
)
from parsers.drafting.wide import Wide, find_wide
from parsers.spelling import listed

if TYPE_CHECKING:
    from parsers.drafting.structure import Structure

#: A column is one of numbers if at least so many of its filled cells are written like one.
MOSTLY = 0.6
_BRACKETED = re.compile(r"\[\s*[0-9][0-9.,]*\s*\]")
_NUMBERED = re.compile(r"(?P<stem>.*?)[\s_.#-]*(?P<number>[0-9]{1,2})")
_REPLICATE_STEMS = (
    "r",
    "rep",
    "replicate",
    "reading",
    "repeat",
    "abs",
    "signal",
    "intensity",
    "wdh",
    "int",
    "absorbance",
)
#: Fields in the order in which a layout lists them.
_ORDER = (
    "position", "label", "role", "analyte", "channel", "signal", "signal_sd", "signal_rsd", "readings", "replicate",
    "nominal", "added", "spike_volume", "level", "aliquot", "made_up_to", "mass", "digest_volume", "predilution",
    "batch", "analyst", "instrument", "comment", "measured_at",
)  # fmt: skip
#: Fields of which a wide table has one for each analyte.
_OF_READINGS = ("signal", "signal_sd", "signal_rsd", "readings", "channel", "concentration")
_NUMERIC = frozenset(
    ("signal", "signal_sd", "signal_rsd", "readings", "replicate", "nominal", "added", "spike_volume", "aliquot",
     "made_up_to", "mass", "digest_volume", "position", "concentration")
)  # fmt: skip
_MEASURES = {
    "spike_volume": ("volume",), "aliquot": ("volume",), "made_up_to": ("volume",), "digest_volume": ("volume",),
    "mass": ("mass",), "added": ("concentration", ""), "nominal": ("concentration", ""),
    "concentration": ("concentration", ""),
}  # fmt: skip


@dataclass(slots=True)
class Mapping:
    """What the columns of an example are.

    Attributes
    ----------
    headers
        Every header taken apart.
    columns
        Field to indices of its columns.
    formats
        Forms of the time of measurement.
    doubts
        Field to what is uncertain about it.
    wide
        Columns that become rows, where the table is wide.
    left
        What is said about columns that are not read.
    additions
        Columns that may say what was added, and cannot be read as long as nobody says their unit.
    excluded
        Columns that say which readings do not count, with the words that say so.
    nameless
        The column of labels, where some rows have none and nothing says whether they are readings.
    downwards
        Whether every signal is negative.
    unit_at
        Field to the column that holds its unit, row by row.
    bracketed
        Whether the nominals stand in brackets in a column that holds results otherwise.
    """

    headers: list[Header]
    columns: dict[str, list[int]] = field(default_factory=dict)
    formats: list[str] = field(default_factory=list)
    doubts: dict[str, str] = field(default_factory=dict)
    wide: Wide | None = None
    left: list[str] = field(default_factory=list)
    additions: list[int] = field(default_factory=list)
    bracketed: bool = False
    unit_at: dict[str, int] = field(default_factory=dict)
    downwards: bool = False
    nameless: int | None = None
    excluded: dict[int, list[str]] = field(default_factory=dict)

    def at(self, field_name: str) -> int | None:
        """Return the first column of a field."""
        found = self.columns.get(field_name)
        return found[0] if found else None

    def lines(self, structure: Structure) -> dict[str, str]:
        """Return the value that a layout gives each mapped field."""
        return {name: self._value(name, structure) for name in _ORDER if name in self.columns}

    def _value(self, name: str, structure: Structure) -> str:
        names = [scalar(self.headers[at].written) for at in self.columns[name]]
        several = f"[{', '.join(names)}]" if len(names) > 1 else names[0]
        parts = {"from": several, **self._how(name, structure)}
        if len(parts) == 1:
            return several
        return f"{{{', '.join(f'{key}: {value}' for key, value in parts.items())}}}"

    def _how(self, name: str, structure: Structure) -> dict[str, str]:
        """Return the keys of a source beside its columns."""
        at, unit = self.columns[name][0], self.headers[self.columns[name][0]].unit
        parts: dict[str, str] = {}
        if name == "measured_at":
            parts["format"] = ", ".join(f"'{form}'" for form in self.formats)
        elif name == "role":
            words = {word: role_of(word) for word in dict.fromkeys(structure.column(at)) if role_of(word)}
            parts["map"] = f"{{{', '.join(f'{scalar(word)}: {role}' for word, role in words.items())}}}"
        elif name == "predilution" and len(self.columns[name]) > 1:
            parts["as"] = "ratio"
        elif name == "nominal" and self.bracketed:
            parts["pattern"] = r"'^\[(.+)\]$'"
        elif name == "signal" and self.downwards:
            parts["scale"] = "-1"
        if name in self.unit_at:
            parts["unit"] = f"{{from: {scalar(self.headers[self.unit_at[name]].written)}}}"
        elif unit and name in _MEASURES:
            parts["unit"] = "in cell" if structure.table == "pairs" else scalar(unit)
        several = len(self.columns[name]) > 1 and name not in ("measured_at", "predilution")
        if (several or name in self.unit_at) and any("" in structure.column(one) for one in self.columns[name]):
            parts["optional"] = "yes"
        return parts


def find_columns(structure: Structure) -> Mapping:
    """Make out the columns.

    Raises
    ------
    DraftRefused
        If no column names the vials, or none or several could be the signal.
    """
    below = structure.units or [""] * len(structure.headers)
    mapping = Mapping([take_apart(name, unit) for name, unit in zip(structure.headers, below, strict=True)])
    finder = _Finder(structure, mapping)
    finder.by_words()
    finder.symbols()
    finder.bracketed()
    finder.diluted()
    finder.additions()
    finder.label()
    finder.times()
    if "analyte" not in mapping.columns:
        mapping.wide = find_wide(mapping.headers, finder.taken(besides=_OF_READINGS), finder.is_numbers)
    if (
        mapping.wide is not None
        and mapping.wide.computed
        and len(mapping.wide.columns) == 1
        and "signal" in mapping.columns
    ):
        mapping.wide = None  # one analyte, whose result stands beside its signal
    if mapping.wide is None and "analyte" not in mapping.columns:
        mapping.wide = find_named(mapping.headers, finder.taken(), finder.is_numbers, structure.column)
    if mapping.wide is None:
        finder.signal()
        finder.sign()
    else:  # a mode or a channel may have a word of additions
        mapping.additions = [at for at in mapping.additions if at not in mapping.wide.columns]
    for name in _OF_READINGS if mapping.wide is not None else ():
        mapping.columns.pop(name, None)
    finder.excluded()
    finder.rising()
    return mapping


@dataclass(slots=True)
class _Finder:
    structure: Structure
    mapping: Mapping

    def taken(self, besides: tuple[str, ...] = ()) -> set[int]:
        """Return the columns that have a field, but for some fields."""
        return {at for name, columns in self.mapping.columns.items() if name not in besides for at in columns}

    def is_numbers(self, at: int) -> bool:
        """Tell whether a column holds numbers."""
        filled = [cell for cell in self.structure.column(at) if cell]
        return bool(filled) and sum(map(numberish, filled)) >= MOSTLY * len(filled)

    def by_words(self) -> None:
        """Map what headers name, where the cells agree; the first column of a field keeps it."""
        names = [header.written for header in self.mapping.headers]
        for at, header in enumerate(self.mapping.headers):
            if not header.written or names.count(header.written) > 1:
                continue
            choices = [name for name in field_of(header.name) or field_of(header.written) if self._agrees(name, at)]
            free = next((name for name in choices if name not in self.mapping.columns), None)
            if free is not None:
                self.mapping.columns[free] = [at]

    def symbols(self) -> None:
        """Map a column that holds symbols of elements alone, whatever its header says."""
        if "analyte" in self.mapping.columns:
            return
        for at, header in enumerate(self.mapping.headers):
            cells = {cell for cell in self.structure.column(at) if cell}
            if header.written and at not in self.taken() and cells and cells <= ELEMENTS:
                self.mapping.columns["analyte"] = [at]
                self.mapping.doubts["analyte"] = f"{header.written!r} holds symbols of elements"
                return

    def _agrees(self, name: str, at: int) -> bool:
        """Tell whether a column's cells and unit can be a field."""
        header = self.mapping.headers[at]
        cells = [cell for cell in self.structure.column(at) if cell]
        if name in _MEASURES and measure(header.unit) not in _MEASURES[name]:
            return False
        counted = all(cell.isdigit() for cell in cells)
        agrees = {
            "role": sum(bool(role_of(cell)) for cell in cells) > len(cells) / 2,
            "analyte": not self.is_numbers(at),
            "position": counted and len(set(cells)) > 1,
            "replicate": counted,
            "signal": self.is_numbers(at) and measure(header.unit) != "concentration",
        }
        return bool(cells) and agrees.get(name, name not in _NUMERIC or self.is_numbers(at))

    def diluted(self) -> None:
        """Map two volumes of a dilution, where their headers say that they are such."""
        words = {plain(header.name): at for at, header in enumerate(self.mapping.headers)}
        pair = (
            [at for name, at in words.items() if name in DILUTED_FROM],
            [at for name, at in words.items() if name in DILUTED_TO],
        )
        columns = self.mapping.columns
        if [len(found) for found in pair] == [1, 1] and "predilution" not in columns:
            columns["predilution"] = [*pair[0], *pair[1]]

    def _unit_beside(self) -> tuple[int, str] | None:
        """Return the column that holds the unit of another, and what all of them measure."""
        for at, header in enumerate(self.mapping.headers):
            cells = {cell for cell in self.structure.column(at) if cell}
            if plain(header.name) in UNIT_COLUMN and cells and all(map(is_unit, cells)):
                kinds = {measure(cell) for cell in cells}
                return (at, kinds.pop()) if len(kinds) == 1 else None
        return None

    def additions(self) -> None:
        """Map a column whose header speaks of an addition by its unit; without one it waits for a person."""
        columns = self.mapping.columns
        by_unit = {"volume": "spike_volume", "concentration": "added"}
        beside = self._unit_beside()
        for at, header in enumerate(self.mapping.headers):
            named = field_of(header.name)
            speaks = ADDITION.search(header.written) is not None and not named
            speaks |= beside is not None and bool({"added", "spike_volume"} & set(named))
            if speaks and at not in self.taken() and not self.is_numbers(at) and any(self.structure.column(at)):
                self.mapping.additions.append(at)
            unclear = at in columns.get("added", []) and not header.unit
            if not (speaks and at not in self.taken() and self.is_numbers(at)) and not unclear:
                continue
            name = by_unit.get(measure(header.unit), "")
            if not header.unit and beside is not None and beside[1] in by_unit:
                name = by_unit[beside[1]]
                self.mapping.unit_at[name], beside = beside[0], None
            if name and name not in columns:
                columns[name] = [at]
            else:
                columns.pop("added", None)
                self.mapping.additions.append(at)

    def rising(self) -> None:
        """Find columns that begin at nothing and rise from row to row of one label: they may be additions."""
        mapping = self.mapping
        if {"added", "spike_volume"} & mapping.columns.keys():
            return
        labels = self.structure.names or self.structure.column(mapping.columns["label"][0])
        wide = mapping.wide.columns if mapping.wide else []
        for at in range(len(mapping.headers)):
            if at in self.taken() or at in wide or at in mapping.additions or self.counts(at):
                continue
            cells = self.structure.column(at)
            if (self.is_numbers(at) and self._rises(labels, cells)) or self._is_code(labels, cells):
                mapping.additions.append(at)

    def counts(self, at: int) -> bool:
        """Tell whether a column says which readings count."""
        name = self.mapping.headers[at].name
        return EXCLUDED.fullmatch(name) is not None or (USED.fullmatch(name) is not None and not self.is_numbers(at))

    @staticmethod
    def _is_code(labels: list[str], cells: list[str]) -> bool:
        """Tell whether a few words or numbers tell rows of one label apart."""
        few = len(set(cells)) <= max(3, len(cells) // 3) and all(len(cell) <= 12 and "." not in cell for cell in cells)
        said: dict[str, set[str]] = {}
        for label, cell in zip(labels, cells, strict=True):
            said.setdefault(label, set()).add(cell)
        return few and any(len(words) > 1 for words in said.values())

    @staticmethod
    def _rises(labels: list[str], cells: list[str]) -> bool:
        by_label: dict[str, list[str]] = {}
        for label, cell in zip(labels, cells, strict=True):
            by_label.setdefault(label, []).append(cell)
        return any(
            len(set(said)) > 1 and not said[0].strip("0.,") and any(one.strip("0.,") for one in said[1:])
            for said in by_label.values()
        )

    def label(self) -> None:
        """Settle the column of labels.

        Raises
        ------
        DraftRefused
            If no column names the vials.
        """
        mapping = self.mapping
        if self.structure.names:
            mapping.columns.pop("label", None)
            return
        if "label" in mapping.columns:
            self._fill_down(mapping.columns["label"][0])
            return
        free = [at for at in range(len(mapping.headers)) if at not in self.taken() and not self.is_numbers(at)]
        texts = [at for at in free if any(self.structure.column(at)) and mapping.headers[at].written]
        texts = [at for at in texts if not self._is_moment(at)]
        if len(texts) == 1:
            mapping.columns["label"] = texts
            mapping.doubts["label"] = f"{mapping.headers[texts[0]].written!r} is the only column of texts left"
            return
        blank = [at for at in free if any(self.structure.column(at)) and not mapping.headers[at].written]
        if blank and not texts:
            sentence = (
                "the column that names the vials has no header, so no layout can name it. Give it one in the export."
            )
        else:
            sentence = (
                f"expected a column that names the vials, found none by its header ({listed(self.structure.headers)}). "
                f"Write the layout by hand: columns.label."
            )
        raise DraftRefused(self.structure.example.name, sentence, self.structure.header_at + 1)

    def _is_moment(self, at: int) -> bool:
        """Tell whether a column holds times or dates."""
        cells = self.structure.column(at)
        return bool(forms_of_time(cells) or forms_of_date(cells) or forms_of_moment(cells))

    def _fill_down(self, at: int) -> None:
        """Fill labels down where a column tells the rows of each vial apart; else leave rows without label out.

        A row without label may be a further reading of the vial above as well as a statistic of it. Replicate numbers
        that begin anew with each label, or analytes that recur, prove the former.
        """
        cells = self.structure.column(at)
        named = [row for row, cell in enumerate(cells) if cell]
        if not named or named[0] != 0 or len(named) in (1, len(cells)):
            return
        self._counting(named, len(cells))
        if self._replicates_restart(named, len(cells)) or self._analytes_recur(named, len(cells)):
            self.structure.fill_down += [one for one in range(len(self.mapping.headers)) if self._as_empty_as(one, at)]
            self.mapping.doubts["label"] = "only the first row of each vial is named; the name is filled down"
        elif len({after - before for before, after in pairwise([*named, len(cells)])}) == 1:
            self.mapping.nameless = at
            self.structure.rows = [row for row in self.structure.rows if row[1][at]]

    def _as_empty_as(self, at: int, label: int) -> bool:
        """Tell whether a column of texts is filled in the rows that are named, and in no others."""
        cells, labels = self.structure.column(at), self.structure.column(label)
        return all(bool(cell) == bool(name) for cell, name in zip(cells, labels, strict=True)) and (
            at == label or not self.is_numbers(at)
        )

    def _replicates_restart(self, named: list[int], count: int) -> bool:
        """Tell whether replicate numbers count from 1 within each vial."""
        at = self.mapping.at("replicate")
        return at is not None and self._counts_up(at, named, count)

    def _analytes_recur(self, named: list[int], count: int) -> bool:
        """Tell whether each vial has one row for each of the same analytes."""
        at = self.mapping.at("analyte")
        if at is None:
            return False
        cells = self.structure.column(at)
        groups = [sorted(cells[first:last]) for first, last in pairwise([*named, count])]
        return all(group == groups[0] and len(set(group)) == len(group) for group in groups)

    def _counting(self, named: list[int], count: int) -> None:
        """Map a column whose numbers count from 1 within each vial as the replicates, whatever its header says."""
        if "replicate" in self.mapping.columns:
            return
        free = [at for at in range(len(self.mapping.headers)) if self.mapping.headers[at].written]
        found = [at for at in free if at not in self.taken() and self._counts_up(at, named, count)]
        if len(found) == 1:
            self.mapping.columns["replicate"] = found

    def _counts_up(self, at: int, named: list[int], count: int) -> bool:
        cells = self.structure.column(at)
        groups = [cells[first:last] for first, last in pairwise([*named, count])]
        return all(group == [str(number) for number in range(1, len(group) + 1)] for group in groups)

    def bracketed(self) -> None:
        """Take nominals out of a column in which they stand in brackets beside results."""
        columns, headers = self.mapping.columns, self.mapping.headers
        found = [
            at for at in range(len(headers))
            if any(_BRACKETED.fullmatch(cell) for cell in self.structure.column(at))
        ]  # fmt: skip
        if len(found) > 1 or (found and "analyte" not in columns and element_in(headers[found[0]].written)):
            names = listed(headers[at].written for at in found)
            self.mapping.left.append(f"{names}: nominals in brackets of several analytes; not read (unfold.nominal)")
        elif (
            found
            and "nominal" not in columns
            and (found[0] not in self.taken() or columns.get("concentration") == found)
        ):
            columns["nominal"] = found
            columns.pop("concentration", None)
            self.mapping.bracketed = True

    def excluded(self) -> None:
        """Find the words that say that a reading does not count."""
        for at in range(len(self.mapping.headers)):
            if at in self.taken() or not self.counts(at):
                continue
            by_no = USED.fullmatch(self.mapping.headers[at].name) is not None
            words = {cell for cell in self.structure.column(at) if cell and (plain(cell) in NO) == by_no}
            if words:
                self.mapping.excluded[at] = sorted(words)

    def times(self) -> None:
        """Settle the time of measurement, or leave it out where day and month could be changed over."""
        columns = self.mapping.columns
        date, time, both = (columns.pop(name, [])[:1] for name in ("date", "time", "measured_at"))
        alone = (*both, *date, *time)
        for at in alone:
            forms = forms_of_moment(self.structure.column(at))
            if forms:
                self._time([at], forms)
                return
        if date and time:
            days, clock = forms_of_date(self.structure.column(date[0])), forms_of_time(self.structure.column(time[0]))
            if days and clock:
                self._time([date[0], time[0]], [f"{day} {clock[0]}" for day in days])
                return
        if alone:
            names = listed(self.mapping.headers[at].written for at in alone)
            self.mapping.left.append(f"{names}: no date and time in a form that is known; not read")

    def _time(self, at: list[int], forms: list[str]) -> None:
        if len(forms) == 1:
            self.mapping.columns["measured_at"], self.mapping.formats = at, forms
            return
        written = [scalar(self.mapping.headers[one].written) for one in at]
        source = f"[{', '.join(written)}]" if len(written) > 1 else written[0]
        either = " or ".join(f"'{form}'" for form in forms)
        self.mapping.left.append(
            f"day and month may be changed over, so the time is not read. Add to columns, with the right form: "
            f"measured_at: {{from: {source}, format: …}} ({either})"
        )

    def signal(self) -> None:
        """Settle the columns of the signal.

        Raises
        ------
        DraftRefused
            If none or several could be it.
        """
        mapping = self.mapping
        replicates = self._replicates()
        if replicates:
            mapping.columns["signal"] = replicates
            for name in ("signal_sd", "signal_rsd", "readings"):
                mapping.columns.pop(name, None)
            return
        if "signal" in mapping.columns:
            self._other_signals()
            self._statistics()
            return
        free = [
            at for at in range(len(mapping.headers))
            if at not in self.taken() and self.is_numbers(at) and mapping.headers[at].written
        ]  # fmt: skip
        numbers = free or mapping.columns.get("concentration", [])
        if len(numbers) != 1:
            found = listed(mapping.headers[at].written for at in numbers) if numbers else "none"
            sentence = (
                f"expected one column that can be the signal, found {found}. Write the layout by hand: columns.signal."
            )
            raise DraftRefused(self.structure.example.name, sentence, self.structure.header_at + 1)
        header = mapping.headers[numbers[0]]
        mapping.columns["signal"] = numbers
        mapping.doubts["signal"] = (
            f"{header.written!r} is the only column of numbers left. Is it what the instrument measured?"
        )
        if measure(header.unit) == "concentration" or "concentration" in field_of(header.name):
            mapping.columns.pop("concentration", None)
            mapping.doubts["signal"] = (
                f"{header.written!r} is a concentration that the instrument computed itself; no other column can be "
                f"the signal. Export the signal if the instrument can"
            )
        self._statistics()

    def sign(self) -> None:
        """Count signals upwards where every one of them is negative, as currents are on some instruments."""
        cells = [cell for at in self.mapping.columns["signal"] for cell in self.structure.column(at) if numberish(cell)]
        if cells and all(cell[0] in "-−" for cell in cells):
            self.mapping.downwards = True
            self.mapping.doubts["signal"] = "every signal is negative, so they are counted downwards (scale: -1)"

    def _replicates(self) -> list[int]:
        """Return the columns of replicate readings: one stem, numbered from 1."""
        stems: dict[str, dict[int, int]] = {}
        for at, header in enumerate(self.mapping.headers):
            match = _NUMBERED.fullmatch(header.name)
            if match is None or not self.is_numbers(at):
                continue
            stem = match["stem"].casefold().strip()
            if stem in _REPLICATE_STEMS or "signal" in field_of(stem):
                stems.setdefault(stem, {})[int(match["number"])] = at
        whole = [
            found for found in stems.values() if len(found) > 1 and sorted(found) == list(range(1, len(found) + 1))
        ]
        if len(whole) != 1:
            return []
        return [whole[0][number] for number in sorted(whole[0])]

    def _other_signals(self) -> None:
        """Refuse where a second column could as well be the signal."""
        mapping = self.mapping
        first = mapping.columns["signal"][0]
        others = [
            at for at, header in enumerate(mapping.headers)
            if at not in self.taken() and "signal" in field_of(header.name) and self._agrees("signal", at)
        ]  # fmt: skip
        averages = ("mean", "average")
        named = [first, *others]
        means = [at for at in named if any(word in mapping.headers[at].name.casefold() for word in averages)]
        if len(means) == 1 and others:
            mapping.columns["signal"] = means
            mapping.doubts["signal"] = (
                f"{listed(mapping.headers[at].written for at in named if at != means[0])} could be the signal as well"
            )
        elif others:
            sentence = (
                f"expected one column that can be the signal, found "
                f"{listed(mapping.headers[at].written for at in named)}. Write the layout by hand: columns.signal."
            )
            raise DraftRefused(self.structure.example.name, sentence, self.structure.header_at + 1)

    def _statistics(self) -> None:
        """Keep one statistic beside the mean, and none whose cells are no numbers."""
        columns = self.mapping.columns
        for name in ("signal_sd", "signal_rsd", "readings"):
            at = self.mapping.at(name)
            if at is not None and not all(numberish(cell) for cell in self.structure.column(at) if cell):
                del columns[name]
                self.mapping.left.append(f"{self.mapping.headers[at].written!r} holds more than numbers; not read")
        if "signal_sd" in columns:
            columns.pop("signal_rsd", None)


#: Words of the language, and letters that mean other things as well.
_ALSO_WORDS = frozenset({"In", "As", "He", "Be", "I", "No", "At", "Am"})


def element_in(text: str) -> str:
    """Return the only element symbol of two letters that a text names as a word, else nothing.

    >>> element_in("Zn 213.9 nm"), element_in("bench 2")
    ('Zn', '')
    """
    found = {word for word in re.findall(r"(?<![A-Za-z])[A-Z][a-z]?(?![A-Za-z])", text) if word in ELEMENTS}
    found = {word for word in found - _ALSO_WORDS if len(word) > 1}
    return found.pop() if len(found) == 1 else ""
