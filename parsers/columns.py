"""Which columns of a table feed which fields: by exact name, by alternatives, or spread from a wide table.

A missing or ambiguous column refuses the export with the list of its headers. Nothing here reads a row.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from parsers import fields
from parsers.readings import ColumnUse
from parsers.spelling import fold, listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterable

    from parsers.errors import ExportRefused
    from parsers.layout import Layout, Unfold
    from parsers.source import Source
    from parsers.table import Frame


@dataclass(frozen=True, slots=True)
class Mapped:
    """The columns of one field.

    Attributes
    ----------
    source
        What the layout says.
    columns
        Indices of the columns: several for replicate readings and joined times.
    """

    source: Source
    columns: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Entry:
    """What a wide table says of one analyte and channel: the column of each field."""

    analyte: str | None
    channel: str | None
    columns: dict[str, int]


@dataclass(frozen=True, slots=True)
class Plan:
    """How a table is read.

    Attributes
    ----------
    mapped
        Columns by field; constants are not among them.
    entries
        One for each analyte and channel of a wide table; none where each row is one reading.
    uses
        What became of each column.
    """

    mapped: dict[str, Mapped]
    entries: tuple[Entry, ...]
    uses: tuple[ColumnUse, ...]

    @property
    def text_columns(self) -> frozenset[int]:
        """Indices of the columns that are read as texts."""
        return frozenset(at for field, mapped in self.mapped.items() if not _numeric(field) for at in mapped.columns)

    @property
    def number_columns(self) -> frozenset[int]:
        """Indices of the columns that are read as numbers."""
        mapped = {at for field, mapped in self.mapped.items() if _numeric(field) for at in mapped.columns}
        return frozenset(mapped.union(*(entry.columns.values() for entry in self.entries))) - self.text_columns


def _numeric(field: str) -> bool:
    return field in fields.NUMBERS or field in fields.QUANTITIES


def resolve(frame: Frame, layout: Layout) -> Plan:
    """Find the columns of a layout in the header of a table.

    Raises
    ------
    ExportRefused
        If a column is missing or stands twice, or no column matches ``unfold``; the header is listed.
    """
    mapped, missing = {}, []
    for field, source in layout.columns.given():
        if source.constant is not None:
            continue
        found = _find(frame, field, source)
        missing += [(name, field) for name in found.missing]
        if found.columns:
            mapped[field] = Mapped(source, found.columns)
    if missing:
        raise _missing(frame, missing)
    entries = () if layout.unfold is None else _spread(frame, layout.unfold, taken=_taken(mapped))
    return Plan(mapped, entries, _uses(frame.headers, mapped, entries))


@dataclass(frozen=True, slots=True)
class _Found:
    columns: tuple[int, ...] = ()
    missing: tuple[str, ...] = ()


def _find(frame: Frame, field: str, source: Source) -> _Found:
    present = [(name, frame.headers.index(fold(name))) for name in source.names if fold(name) in frame.headers]
    together = field in ("signal", "measured_at")
    if not together:
        present = present[:1]
    for name, at in present:
        times = frame.headers.count(frame.headers[at])
        if times > 1:
            sentence = f"expected one column of this name for {field}, got {times}"
            raise frame.lines.refusal(frame.header_at, sentence, "Give each column its own name in the export", name)
    absent = [name for name in source.names if name not in dict(present)]
    columns = tuple(at for _, at in present)
    optional = source.optional and (bool(present) or field != "signal")
    if optional or (present and not together) or not absent:
        incomplete = field == "measured_at" and absent  # half a time is none
        return _Found(() if incomplete else columns)
    return _Found(missing=tuple(absent) if together else (" or ".join(absent),))


def _missing(frame: Frame, missing: list[tuple[str, str]]) -> ExportRefused:
    wanted = ", ".join(f"{name!r} (for {field})" for name, field in missing)
    hints = {hint for name, _ in missing if (hint := suggestion(name, filter(None, frame.headers)).strip())}
    sentence = f"expected the columns {wanted}, and the header does not have them; it holds {listed(frame.headers)}"
    todo = " ".join([*sorted(hints), "Correct the names or the separator in the layout"])
    return frame.lines.refusal(frame.header_at, sentence, todo)


def _taken(mapped: dict[str, Mapped]) -> set[int]:
    return {at for found in mapped.values() for at in found.columns}


def _spread(frame: Frame, unfold: Unfold, taken: set[int]) -> tuple[Entry, ...]:
    """Group the matching columns of a wide table by analyte and channel, in the order of the header."""
    groups: dict[tuple[str | None, str | None], dict[str, int]] = {}
    for at, header in enumerate(frame.headers):
        match = unfold.pattern.search(header) if header and at not in taken else None
        if match is None or (unfold.except_ is not None and unfold.except_.search(header)):
            continue
        said = {group: fold(text) for group, text in match.groupdict().items() if text}
        field = _field(frame, unfold, header, said.get("field"))
        columns = groups.setdefault((said.get("analyte"), said.get("channel")), {})
        if field in columns:
            other = frame.headers[columns[field]]
            sentence = f"the column {other!r} is the {field} of the same analyte and channel"
            todo = "Tell them apart in unfold.pattern, or leave one out with unfold.except"
            raise frame.lines.refusal(frame.header_at, sentence, todo, header)
        columns[field] = at
    entries = tuple(Entry(analyte, channel, columns) for (analyte, channel), columns in groups.items())
    if not entries:
        sentence = (
            f"no column matches unfold.pattern {unfold.pattern.pattern!r}; the header holds {listed(frame.headers)}"
        )
        raise frame.lines.refusal(frame.header_at, sentence, "Correct the pattern in the layout")
    for entry in entries:
        _complete(frame, unfold, entry)
    return entries


def _field(frame: Frame, unfold: Unfold, header: str, word: str | None) -> str:
    if not unfold.fields:
        return "signal"
    if word in unfold.fields:
        return unfold.fields[word]
    sentence = f"expected one of {listed(unfold.fields)} as field, got {word!r}"
    raise frame.lines.refusal(
        frame.header_at, sentence, "Add the word to unfold.fields, or leave the column out with unfold.except", header
    )


def _complete(frame: Frame, unfold: Unfold, entry: Entry) -> None:
    header = frame.headers[next(iter(entry.columns.values()))]
    todo = "Correct the pattern in the layout, or leave the column out with unfold.except"
    if "signal" not in entry.columns:
        raise frame.lines.refusal(frame.header_at, "no column holds the signal that belongs to it", todo, header)
    if "analyte" in unfold.pattern.groupindex and entry.analyte is None:
        raise frame.lines.refusal(frame.header_at, "unfold.pattern finds no analyte in this header", todo, header)


def _uses(headers: Iterable[str], mapped: dict[str, Mapped], entries: tuple[Entry, ...]) -> tuple[ColumnUse, ...]:
    feeds: dict[int, list[str]] = {}
    for field, found in mapped.items():
        for at in found.columns:
            feeds.setdefault(at, []).append(field)
    for entry in entries:
        for field, at in entry.columns.items():
            said = [word for word in ("analyte", "channel") if getattr(entry, word) is not None]
            feeds.setdefault(at, []).extend([field, *said])
    return tuple(ColumnUse(header, tuple(feeds.get(at, ()))) for at, header in enumerate(headers))
