"""Side tables: what a bench sheet or a list of levels says of a label, a sample or a position.

The text of a table comes from the caller; nothing here opens a file, and nothing looks at an export.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, model_validator

from parsers import fields
from parsers.patterns import Pattern  # noqa: TC001 (pydantic reads annotations)
from parsers.source import Source  # noqa: TC001 (pydantic reads annotations)
from parsers.spelling import fold, listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from parsers.document import Loc
    from parsers.readings import Texts
    from parsers.text import Lines

#: Fields that cannot stand in a side table: they are measured.
_MEASURED = ("signal", "signal_sd", "signal_rsd", "readings", "measured_at")
#: Longest side table in characters.
MOST_CHARACTERS = 5_000_000


#: Stands between the parts of a key that several fields make.
PARTED = " | "


def _listed(value: Any) -> Any:
    return [value] if isinstance(value, str) else value


class Lookup(BaseModel):
    """One entry of ``lookup``: what is looked up by which field, in a file or in values written in the layout.

    Attributes
    ----------
    by
        The field whose text (or number) is looked for; of several, their texts joined by `` | ``.
    file, key, separator, decimal
        A CSV file, the header of its column to compare with (default: the first), and how it is written.
    begin, end, table
        Instead of a file: a part of the export itself, behind a line and before another one (or the end); its rows
        under their header, or a plate with the columns ``well, row, column, value``.
    columns
        Field to column of the file or part.
    values
        Instead of a file: for each key the fields and their values.
    optional
        A key may be absent from the table.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    by: Annotated[
        tuple[Literal["label", "sample", "position", "level", "batch", "analyte"], ...], BeforeValidator(_listed)
    ] = Field(min_length=1)
    file: str = ""
    key: Annotated[tuple[str, ...], BeforeValidator(_listed)] = ()
    separator: Literal[",", ";", "tab", "|"] | None = None
    decimal: Literal[".", ","] | None = None
    begin: Pattern | None = None
    end: Pattern | None = None
    table: Literal["rows", "grid"] = "rows"
    columns: dict[str, Source] = {}
    values: dict[str, dict[str, str]] = {}
    optional: bool = False

    @model_validator(mode="after")
    def _one_form(self) -> Lookup:
        if bool(self.file) + bool(self.values) + (self.begin is not None) != 1:
            raise ValueError("expected either 'file', 'begin' or 'values'\nKeep one of them")
        if not self.values and not self.columns:
            raise ValueError("expected 'columns' with the fields to look up, got none\nWrite columns: {added: Added}")
        if self.key and len(self.key) != len(self.by):
            raise ValueError(
                f"expected a column for each of {listed(self.by)} in 'key', got {len(self.key)}\nName each"
            )
        if len(self.by) > 1 and self.file and not self.key:
            raise ValueError("expected 'key' with the columns to compare with, got none\nWrite key: [Level, Element]")
        for field in self.fields:
            if field not in fields.ALL or field in _MEASURED or (field in self.by and self.by != ("label",)):
                hint = suggestion(field, fields.ALL).strip() or "Take it out"
                raise ValueError(f"{field!r} is no field that can be looked up by {' and '.join(self.by)}\n{hint}")
        return self

    @property
    def place(self) -> str:
        """Where the table is, in words."""
        return self.file or (f"the part behind {self.begin.pattern!r}" if self.begin is not None else "lookup")

    @property
    def fields(self) -> frozenset[str]:
        """The fields that are looked up."""
        return frozenset(self.columns).union(*self.values.values())


@dataclass(frozen=True, slots=True)
class SideTable:
    """A side table, read: for each key the text of each field.

    Attributes
    ----------
    lookup
        What the layout says of it.
    entries
        Field to key to text; keys have folded blanks, those of positions are numbers.
    known
        Whether the table was there to be read.
    """

    lookup: Lookup
    entries: dict[str, dict[str, str]]
    known: bool = True

    @classmethod
    def of(
        cls, lookup: Lookup, number: int, tables: Mapping[str, str] | None, faults: list[tuple[Loc, str, str]]
    ) -> SideTable:
        """Read a side table; what is wrong with it is added to the faults of the layout."""
        if lookup.begin is not None:
            return cls(lookup, {})
        if not lookup.file:
            entries: dict[str, dict[str, str]] = {}
            for key, said in lookup.values.items():
                for field, text in said.items():
                    entries.setdefault(field, {})[_key(key, lookup)] = text
            return cls(lookup, entries)
        if tables is None:
            return cls(lookup, {field: {} for field in lookup.columns}, known=False)
        place: Loc = ("lookup", number, "file")
        if lookup.file not in tables:
            faults.append((place, f"expected the side table {lookup.file!r}, got no such file", "Write it"))
            return cls(lookup, {}, known=False)
        found = list(_faults(lookup, tables[lookup.file]))
        faults += [(place, what, todo) for what, todo in found]
        return cls(lookup, {}, known=False) if found else cls(lookup, _entries(lookup, tables[lookup.file]))

    def of_export(self, lines: Lines, separator: str) -> SideTable:
        """Return the table filled from its part of an export; one that lies elsewhere stays as it is.

        Raises
        ------
        ExportRefused
            If the part is not there, or something is wrong with it.
        """
        lookup = self.lookup
        if lookup.begin is None:
            return self
        first = next((at for at, line in enumerate(lines.lines) if lookup.begin.search(line)), None)
        if first is None:
            sentence = f"expected a line that matches {lookup.begin.pattern!r} (lookup), got none"
            raise lines.refusal(None, sentence, "Correct lookup in the layout, or export again")
        last = len(lines)
        if lookup.end is not None:
            last = next((at for at in range(first + 1, last) if lookup.end.search(lines.lines[at])), last)
        text = "\n".join(lines.lines[first + 1 : last])
        written = replace_separator(lookup, separator)
        for what, todo in _faults(written, text, first + 1):
            raise lines.refusal(first, what, todo)
        return SideTable(lookup, _entries(written, text))

    def texts(self, field: str, keys: Texts) -> list[str | None]:
        """Return what the table says of a field for each distinct key."""
        entries = self.entries.get(field, {})
        return [entries.get(_key(key, self.lookup)) or None for key in keys.names]


def replace_separator(lookup: Lookup, separator: str) -> Lookup:
    """Return a lookup that is written with the separator of the export where it names none."""
    word = {"\t": "tab"}.get(separator, separator)
    known = lookup.separator is not None or word not in (",", ";", "tab", "|")
    return lookup if known else lookup.model_copy(update={"separator": word})


def _key(text: str, lookup: Lookup) -> str:
    """Return the form in which keys are compared: blanks folded, positions as numbers."""
    folded = fold(text)
    if "position" not in lookup.by:
        return folded
    parts = folded.split(PARTED)
    at = lookup.by.index("position")
    try:
        parts[at] = f"{float(parts[at]):g}"
    except (ValueError, IndexError):
        return folded
    return PARTED.join(parts)


def _key_columns(lookup: Lookup, header: list[str]) -> list[int]:
    return [header.index(fold(name)) for name in lookup.key if fold(name) in header] or [0]


def _key_of(lookup: Lookup, record: list[str], places: list[int]) -> str:
    return _key(PARTED.join(record[at] for at in places), lookup) if all(record[at] for at in places) else ""


def _records(lookup: Lookup, text: str) -> list[tuple[int, list[str]]]:
    separator = "\t" if lookup.separator == "tab" else lookup.separator or ","
    reader = csv.reader(text.removeprefix("\ufeff").splitlines(keepends=True), delimiter=separator, strict=True)
    records = [(reader.line_num, list(map(fold, record))) for record in reader if any(map(str.strip, record))]
    if lookup.table == "rows" or not records:
        return records
    numbers = records[0][1]
    wells = [
        (line, [row[0] + number, row[0], number, cell])
        for line, row in records[1:]
        for number, cell in zip(numbers[1:], row[1:], strict=False)
        if cell and number
    ]
    return [(records[0][0], ["well", "row", "column", "value"]), *wells]


def _places(lookup: Lookup, header: list[str]) -> dict[str, int]:
    return {
        field: header.index(name)
        for field, source in lookup.columns.items()
        for name in map(fold, source.names)
        if name in header
    }


def _faults(lookup: Lookup, text: str, above: int = 0) -> Iterator[tuple[str, str]]:
    """Yield what is wrong with a side table, and what to do; so many lines stand above it."""
    if len(text) > MOST_CHARACTERS:
        yield f"{lookup.place}: expected at most {MOST_CHARACTERS} characters, got {len(text)}", "Shorten it"
        return
    try:
        records = _records(lookup, text)
    except csv.Error as error:
        yield f"{lookup.place}: expected a CSV file, got one that breaks: {error}", "Save it as CSV again"
        return
    if len(records) < 2:
        yield f"{lookup.place}: expected a header and rows, got {len(records)} lines", "Complete it"
        return
    header = records[0][1]
    for name in [*lookup.key, *(name for source in lookup.columns.values() for name in source.names)]:
        if name and fold(name) not in header:
            todo = suggestion(name, header).strip() or "Correct the name or the separator"
            yield f"{lookup.place}: expected the column {name!r}, and the header holds {listed(header)}", todo
    places = _key_columns(lookup, header)
    first: dict[str, int] = {}
    for line, record in ((number + above, record) for number, record in records[1:]):
        if len(record) != len(header):
            sentence = f"{lookup.place}, line {line}: expected {len(header)} fields as in the header, got {len(record)}"
            yield sentence, "Correct the line"
        elif key := _key_of(lookup, record, places):
            before = first.setdefault(key, line)
            if before != line:
                sentence = f"{lookup.place}, line {line}: {key!r} stands here again, first in line {before}"
                yield sentence, "Keep one of the lines"


def _entries(lookup: Lookup, text: str) -> dict[str, dict[str, str]]:
    records = _records(lookup, text)
    header = records[0][1]
    at = _key_columns(lookup, header)
    keyed = [(key, record) for _, record in records[1:] if (key := _key_of(lookup, record, at))]
    return {field: {key: record[place] for key, record in keyed} for field, place in _places(lookup, header).items()}
