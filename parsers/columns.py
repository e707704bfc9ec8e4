"""Which columns of a table feed which fields: by exact name, by alternatives, or spread from a wide table.

A missing or ambiguous column refuses the export with the list of its headers. Nothing here reads a row.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from parsers import fields
from parsers.readings import ColumnUse
from parsers.source import IN_CELL, MAYBE, Source
from parsers.spelling import fold, listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator

    from parsers.errors import ExportRefused
    from parsers.layout import Layout, Unfold
    from parsers.table import Frame


#: Fields of which several columns belong together.
_TOGETHER = ("signal", "measured_at")


@dataclass(frozen=True, slots=True)
class Mapped:
    """The columns of one source of a field.

    Attributes
    ----------
    source
        What the layout says.
    columns
        Indices of the columns: several for replicate readings, joined times and ratios.
    unit
        The unit that the header of the column states.
    unit_column
        The column that holds the unit, or None.
    """

    source: Source
    columns: tuple[int, ...]
    unit: str = ""
    unit_column: int | None = None


@dataclass(frozen=True, slots=True)
class Entry:
    """What a wide table says of one analyte and channel.

    Attributes
    ----------
    analyte, channel
        As the header says.
    columns
        The columns of each field: several for replicate readings.
    units
        The unit of a field, where the header says it.
    """

    analyte: str | None
    channel: str | None
    columns: dict[str, tuple[int, ...]]
    units: dict[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Plan:
    """How a table is read.

    Attributes
    ----------
    choices
        For each field the columns of its sources, by their place in the order of precedence.
    entries
        One for each analyte and channel of a wide table; none where each row is one reading.
    uses
        What became of each column.
    captured
        Columns behind those of the header that hold the values of blocks, by name.
    """

    choices: dict[str, dict[int, Mapped]]
    entries: tuple[Entry, ...]
    uses: tuple[ColumnUse, ...]
    captured: dict[str, int] = field(default_factory=dict)

    @property
    def mapped(self) -> dict[str, Mapped]:
        """The first source of each field that is a column."""
        return {name: next(iter(choices.values())) for name, choices in self.choices.items()}

    @property
    def text_columns(self) -> frozenset[int]:
        """Indices of the columns that are read as texts."""
        texts = [at for name, one in self._all() if not _numeric(name, one.source) for at in one.columns]
        units = [one.unit_column for _, one in self._all() if one.unit_column is not None]
        return frozenset([*texts, *units])

    @property
    def number_columns(self) -> frozenset[int]:
        """Indices of the columns that are read as numbers."""
        numbers = {at for name, one in self._all() if _numeric(name, one.source) for at in one.columns}
        of_entries = (columns for entry in self.entries for columns in entry.columns.values())
        return frozenset(numbers.union(*of_entries)) - self.text_columns

    def with_statistics(self, beside: dict[str, int]) -> Plan:
        """Return the plan with the statistic rows below each row, so many columns behind its own."""
        choices, entries = dict(self.choices), self.entries
        for name, distance in beside.items():
            signal = choices.get("signal")
            if signal is not None:
                columns = tuple(at + distance for at in next(iter(signal.values())).columns[:1])
                choices[name] = {0: Mapped(MAYBE, columns)}
            entries = tuple(_with_row(entry, name, distance) for entry in entries)
        return replace(self, choices=choices, entries=entries)

    def with_column(self, name: str, column: int) -> Plan:
        """Return the plan with the column of a field that has none yet."""
        if name in self.choices:
            return self
        return replace(self, choices=self.choices | {name: {0: Mapped(MAYBE, (column,))}})

    def _all(self) -> Iterator[tuple[str, Mapped]]:
        for name, choices in self.choices.items():
            for one in choices.values():
                yield name, one


def _with_row(entry: Entry, name: str, distance: int) -> Entry:
    return replace(entry, columns=entry.columns | {name: (entry.columns["signal"][0] + distance,)})


def _numeric(name: str, source: Source) -> bool:
    numeric = name in fields.NUMBERS or name in fields.QUANTITIES
    return numeric and (source.plain or not source.in_columns) and source.unit != IN_CELL


def resolve(frame: Frame, layout: Layout) -> Plan:
    """Find the columns of a layout in the header of a table.

    Raises
    ------
    ExportRefused
        If a column is missing or stands twice, or no column matches ``unfold``; the header is listed.
    """
    choices: dict[str, dict[int, Mapped]] = {}
    missing = []
    for name, source in layout.columns.given():
        found = [_find(frame, name, one) for one in source.sources]
        missing += [(wanted, name) for one in found for wanted in one.missing]
        mapped = {
            at: _with_unit(frame, name, Mapped(one, found[at].columns))
            for at, one in enumerate(source.sources)
            if found[at].columns
        }
        if mapped:
            choices[name] = mapped
    if missing:
        raise _missing(frame, missing, guessed=layout.header is None)
    taken = {at for found in choices.values() for one in found.values() for at in one.columns}
    entries = () if layout.unfold is None else _spread(frame, layout.unfold, taken)
    return Plan(choices, entries, _uses(frame.headers, choices, entries))


@dataclass(frozen=True, slots=True)
class _Found:
    columns: tuple[int, ...] = ()
    missing: tuple[str, ...] = ()


def _find(frame: Frame, name: str, source: Source) -> _Found:
    if not source.in_columns:
        return _Found()
    together = name in _TOGETHER or source.as_ == "ratio"
    wanted = list(_candidates(frame, source))
    present = [(word, found) for word, found in wanted if found]
    if not together:
        present = present[:1]
    columns: list[int] = []
    for word, found in present:
        if source.matching is not None and name == "signal" and source.occurrence is None:
            columns += found
        else:
            columns.append(_one(frame, name, source, word, found))
    absent = [word for word, found in wanted if not found]
    optional = source.optional and (bool(present) or name != "signal")
    if optional or (present and not together) or not absent:
        incomplete = together and name != "signal" and absent  # half a time is none
        return _Found(() if incomplete else tuple(columns))
    return _Found(missing=tuple(absent) if together else (" or ".join(absent),))


def _candidates(frame: Frame, source: Source) -> Iterator[tuple[str, list[int]]]:
    """Yield what a source asks for, each with the columns that answer."""
    if source.number is not None:
        at = source.number - 1
        yield f"number {source.number}", [at] if at < len(frame.headers) else []
    elif source.matching is not None:
        pattern = source.matching
        yield pattern.pattern, [at for at, header in enumerate(frame.headers) if header and pattern.search(header)]
    for name in source.names:
        yield name, frame.named(name)


def _one(frame: Frame, name: str, source: Source, word: str, found: list[int]) -> int:
    """Return the one column that is meant."""
    if source.occurrence is not None:
        if source.occurrence <= len(found):
            return found[source.occurrence - 1]
        sentence = f"expected this column at least {source.occurrence} times for {name}, got {len(found)}"
        raise frame.lines.refusal(frame.header_at, sentence, "Correct occurrence in the layout", word)
    if len(found) > 1:
        sentence = f"expected one column of this name for {name}, got {len(found)}"
        todo = "Give each column its own name in the export, or say which with occurrence in the layout"
        raise frame.lines.refusal(frame.header_at, sentence, todo, word)
    return found[0]


def _with_unit(frame: Frame, name: str, mapped: Mapped) -> Mapped:
    """Find the unit that the export states for a column."""
    place = mapped.source.unit
    if isinstance(place, str):
        return mapped
    if place.header is None:
        found = frame.named(place.column)
        if len(found) != 1:
            raise _missing(frame, [(place.column, f"the unit of {name}")])
        return replace(mapped, unit_column=found[0])
    header = frame.headers[mapped.columns[0]]
    match = place.header.search(header)
    if match is None or not match.group(1):
        sentence = f"expected the unit of {name} in the header ({place.header.pattern!r}), got none"
        raise frame.lines.refusal(frame.header_at, sentence, "Correct the unit in the layout", header)
    return replace(mapped, unit=fold(match.group(1)))


def _missing(frame: Frame, missing: list[tuple[str, str]], *, guessed: bool = False) -> ExportRefused:
    wanted = ", ".join(f"{name!r} (for {field})" for name, field in missing)
    hints = {hint for name, _ in missing if (hint := suggestion(name, filter(None, frame.headers)).strip())}
    sentence = f"expected the columns {wanted}, and the header does not have them; it holds {listed(frame.headers)}"
    todo = " ".join([*sorted(hints), "Correct the names or the separator in the layout"])
    if guessed:
        line = frame.header_at + 1
        todo += f", or write there which line is the header (header: '^…'): without it line {line} was taken"
    return frame.lines.refusal(frame.header_at, sentence, todo)


def _spread(frame: Frame, unfold: Unfold, taken: set[int]) -> tuple[Entry, ...]:
    """Group the matching columns of a wide table by analyte and channel, in the order of the header."""
    groups: dict[tuple[str | None, str | None], _Group] = {}
    words = {fold(word): meant for word, meant in unfold.map.items()}
    for at, header in enumerate(frame.headers):
        match = unfold.pattern.search(header) if header and at not in taken else None
        if match is None or (unfold.except_ is not None and unfold.except_.search(header)):
            continue
        said = {group: fold(text) for group, text in match.groupdict().items() if text and text.strip()}
        name = _field(frame, unfold, header, said.get("field"))
        analyte = said.get("analyte")
        key = (words.get(analyte, analyte) if analyte is not None else None, said.get("channel"))
        group = groups.setdefault(key, _Group())
        replicates = group.columns.setdefault(name, {})
        replicate = said.get("replicate", "")
        if replicate in replicates:
            other = frame.headers[replicates[replicate]]
            sentence = f"the column {other!r} is the {name} of the same analyte and channel"
            todo = "Tell them apart in unfold.pattern, or leave one out with unfold.except"
            raise frame.lines.refusal(frame.header_at, sentence, todo, header)
        if replicates and name != "signal":
            sentence = f"expected one {name} for each analyte and channel, got another replicate"
            raise frame.lines.refusal(frame.header_at, sentence, "Leave it out with unfold.except", header)
        replicates[replicate] = at
        if "unit" in said:
            group.units[name] = said["unit"]
    entries = tuple(
        Entry(*key, {name: tuple(found.values()) for name, found in group.columns.items()}, group.units)
        for key, group in groups.items()
    )
    if not entries:
        sentence = (
            f"no column matches unfold.pattern {unfold.pattern.pattern!r}; the header holds {listed(frame.headers)}"
        )
        raise frame.lines.refusal(frame.header_at, sentence, "Correct the pattern in the layout")
    for entry in entries:
        _complete(frame, unfold, entry)
    return entries


@dataclass(slots=True)
class _Group:
    """The columns of one analyte and channel by field and replicate, and the units of the fields."""

    columns: dict[str, dict[str, int]] = field(default_factory=dict)
    units: dict[str, str] = field(default_factory=dict)


def _field(frame: Frame, unfold: Unfold, header: str, word: str | None) -> str:
    if not unfold.fields:
        return "signal"
    known: dict[str, str] = {fold(name): meant for name, meant in unfold.fields.items()}
    if (word or "") in known:
        return known[word or ""]
    sentence = f"expected one of {listed(unfold.fields)} as field, got {word!r}"
    raise frame.lines.refusal(
        frame.header_at, sentence, "Add the word to unfold.fields, or leave the column out with unfold.except", header
    )


def _complete(frame: Frame, unfold: Unfold, entry: Entry) -> None:
    header = frame.headers[next(iter(entry.columns.values()))[0]]
    todo = "Correct the pattern in the layout, or leave the column out with unfold.except"
    if "signal" not in entry.columns:
        raise frame.lines.refusal(frame.header_at, "no column holds the signal that belongs to it", todo, header)
    if "analyte" in unfold.pattern.groupindex and entry.analyte is None:
        raise frame.lines.refusal(frame.header_at, "unfold.pattern finds no analyte in this header", todo, header)
    if len(entry.columns["signal"]) > 1 and {"signal_sd", "signal_rsd", "readings"} & entry.columns.keys():
        sentence = "the statistics of a mean stand beside several replicates of the same analyte and channel"
        raise frame.lines.refusal(frame.header_at, sentence, "Leave one of the two out with unfold.except", header)


def _uses(
    headers: Iterable[str], choices: dict[str, dict[int, Mapped]], entries: tuple[Entry, ...]
) -> tuple[ColumnUse, ...]:
    feeds: dict[int, list[str]] = {}
    for name, found in choices.items():
        for one in found.values():
            for at in one.columns:
                feeds.setdefault(at, []).append(name)
            if one.unit_column is not None:
                feeds.setdefault(one.unit_column, []).append(f"unit of {name}")
    for entry in entries:
        said = [word for word in ("analyte", "channel") if getattr(entry, word) is not None]
        for name, columns in entry.columns.items():
            for at in columns:
                feeds.setdefault(at, []).extend([name, *said])
    return tuple(ColumnUse(header, tuple(feeds.get(at, ()))) for at, header in enumerate(headers))
