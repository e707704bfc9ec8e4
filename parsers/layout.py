"""A layout: what one kind of export looks like, as it was written in YAML and checked.

`parse_layout` finds every fault at once. Keys that belong to the settings (`SETTINGS_KEYS`) are accepted unread: their
values and lines are in `Layout.settings`. Nothing here looks at an export.
"""

from __future__ import annotations

import re
from dataclasses import replace
from functools import cached_property
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, PrivateAttr, model_validator

from parsers import consistency
from parsers.cells import Grammar
from parsers.document import Document, load, validate
from parsers.errors import DocumentInvalid
from parsers.labels import LabelRule  # noqa: TC001 (pydantic reads annotations)
from parsers.patterns import Pattern, compiled
from parsers.sidetable import Lookup, SideTable
from parsers.source import Source
from parsers.spelling import fold
from parsers.wording import got

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

__all__ = ["SETTINGS_KEYS", "Blocks", "Cells", "Claims", "Columns", "Layout", "Source", "Unfold", "parse_layout"]

#: Keys that a layout may hold for the settings side.
SETTINGS_KEYS = (
    "bench", "stocks", "limits", "report", "blank", "variance", "added_refers_to", "concentration_refers_to",
    "reference", "spiked_at", "expect",
)  # fmt: skip
CONSEQUENCE = "No export can be read with this layout."
#: Separator where two blanks or more part the columns, and names may hold single ones.
WIDE_BLANKS = "  "
#: The word for an export without header: its columns are numbered from 1.
NO_HEADER = "none"


def _known_encoding(name: str) -> str:
    try:
        "".encode(name)
    except LookupError as error:
        raise ValueError(
            f"expected the name of an encoding, got {name!r}\nUsual ones: utf-8, cp1252, latin-1, utf-16-le"
        ) from error
    return name


def _separator(value: str) -> str:
    written = {"tab": "\t", "blanks": " ", "wide blanks": WIDE_BLANKS}.get(value, value)
    if written != WIDE_BLANKS and (len(written) != 1 or written in '"\n\r'):
        words = "one character, 'tab', 'blanks' or 'wide blanks'"
        raise ValueError(f"expected {words}, got {got(value)}\nWrite it in single quotes: ';'")
    return written


def _one_or_more(value: Any) -> Any:
    return [value] if isinstance(value, str) else value


def _pattern_or_words(value: Any) -> Any:
    """Take a text for a pattern and a list for words that fill the whole cell."""
    if isinstance(value, list) and all(isinstance(word, str) for word in value):
        return tuple(value)
    return compiled(value)


def _header(value: Any) -> Any:
    return value if value == NO_HEADER else compiled(value)


def _maps(value: Any) -> Any:
    if value == []:
        raise ValueError("expected fields and their columns, got an empty list\nWrite for instance {label: Label}")
    return value if isinstance(value, list) else [value]


Encoding = Annotated[str, AfterValidator(_known_encoding)]
Mark = Literal["", ".", ",", "'", "’", " ", "_"]
PatternOrWords = Annotated[Any, BeforeValidator(_pattern_or_words)]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class Claims(_Part):
    """Which exports a layout is for; what is given must hold."""

    file: str = ""
    text: Pattern | None = None


class Columns(_Part):
    """The source of each field."""

    label: Source | None = None
    sample: Source | None = None
    role: Source | None = None
    analyte: Source | None = None
    channel: Source | None = None
    level: Source | None = None
    stock: Source | None = None
    batch: Source | None = None
    analyst: Source | None = None
    instrument: Source | None = None
    comment: Source | None = None
    signal: Source | None = None
    signal_sd: Source | None = None
    signal_rsd: Source | None = None
    readings: Source | None = None
    replicate: Source | None = None
    position: Source | None = None
    added: Source | None = None
    nominal: Source | None = None
    spike_volume: Source | None = None
    aliquot: Source | None = None
    made_up_to: Source | None = None
    mass: Source | None = None
    digest_volume: Source | None = None
    predilution: Source | None = None
    measured_at: Source | None = None
    concentration: Source | None = None
    reported_result: Source | None = None
    reference_signal: Source | None = None
    excluded: Source | None = None
    duplicate_of: Source | None = None

    def given(self) -> Iterator[tuple[str, Source]]:
        """Yield each mapped field with its source."""
        for field in type(self).model_fields:
            source = getattr(self, field)
            if source is not None:
                yield field, source


class Unfold(_Part):
    """Columns of a wide table that become readings, by named groups of their headers.

    ``analyte``, ``channel``, ``field`` (which statistic), ``replicate`` and ``unit``.
    """

    pattern: Pattern
    fields: dict[
        str,
        Literal[
            "signal", "signal_sd", "signal_rsd", "readings", "concentration", "reported_result", "reference_signal",
            "nominal",
        ],
    ] = {}  # fmt: skip
    except_: Pattern | None = Field(default=None, alias="except")
    map: dict[str, str] = {}
    nominal: Pattern | None = None
    optional: bool = False


class Marks(_Part):
    """Other marks for the cells that a pattern finds."""

    where: Pattern
    decimal: Literal[".", ","] = "."
    thousands: Mark = ""


class Cells(_Part):
    """Cells that are no numbers and yet explained: a text is a pattern, a list holds whole words."""

    missing: tuple[str, ...] = ("",)
    below: PatternOrWords = ()
    above: PatternOrWords = ()
    flags: Pattern | None = None
    glued: tuple[str, ...] = ()
    zero: Literal["number", "below", "missing"] = "number"
    marks: tuple[Marks, ...] = ()


class Captured(_Part):
    """A value outside the table: its pattern, and whether it may be absent."""

    pattern: Pattern
    optional: bool = False

    @model_validator(mode="before")
    @classmethod
    def _short_form(cls, value: Any) -> Any:
        """Take a pattern for ``{pattern: …}``."""
        return value if isinstance(value, (dict, cls)) else {"pattern": value}


class Blocks(_Part):
    """Parts of an export that repeat, each with a table of its own, and the values that hold in each."""

    begin: Pattern
    end: Pattern | None = None
    heading: dict[str, Captured] = {}
    blocks: Blocks | None = None

    def headings(self) -> Iterator[str]:
        """Yield the names of the values of these blocks and of those in them."""
        yield from self.heading
        if self.blocks is not None:
            yield from self.blocks.headings()


class RowRule(_Part):
    """What the rows are that fulfil all conditions: patterns of cells by column, or of the whole line."""

    where: dict[str, Pattern] = {}
    line: Pattern | None = None
    are: Literal["reading", "replicate", "mean", "sd", "rsd", "unit", "limit", "excluded", "left out"]


class Example(_Part):
    """An export and the readings that are expected of it; `check` compares them."""

    export: str = Field(min_length=1)
    expected: str = Field(min_length=1)


class Layout(_Part):
    """One kind of export. Every key has the meaning and default that the documentation of layouts gives it."""

    layout: str = Field(min_length=1)
    claims: Claims
    encodings: Annotated[tuple[Encoding, ...], BeforeValidator(_one_or_more)] = Field(("utf-8", "cp1252"), min_length=1)
    separator: Annotated[str, AfterValidator(_separator)] = ""
    widths: tuple[Annotated[int, Field(ge=1)], ...] = ()
    quote: Literal['"', "'", "none"] = '"'
    table: Literal["rows", "transposed", "grid", "pairs"] = "rows"
    file_name: Pattern | None = None
    blocks: Blocks | None = None
    header: Annotated[Any, BeforeValidator(_header)] = None
    header_lines: int = Field(default=1, ge=1, le=9)
    repeat_right: tuple[int, ...] = ()
    unnamed: str = ""
    short_rows: Literal["refuse", "fill"] = "refuse"
    fill_down: Annotated[tuple[str, ...], BeforeValidator(_one_or_more)] = ()
    rows: tuple[RowRule, ...] = ()
    lookup: tuple[Lookup, ...] = ()
    unit_words: dict[str, str] = {}
    examples: tuple[Example, ...] = ()
    until: Pattern | None = None
    finished: Pattern | None = None
    skip: Annotated[tuple[Pattern, ...], BeforeValidator(_one_or_more)] = ()
    decimal: Literal[".", ","] = "."
    thousands: Mark = ""
    heading: dict[str, Captured] = {}
    column_maps: Annotated[tuple[Columns, ...], BeforeValidator(_maps)] = Field(alias="columns")
    unfold: Unfold | None = None
    labels: tuple[LabelRule, ...] = ()
    unmatched: Literal["refuse", "set aside"] = "refuse"
    sample_case: Literal["as written", "ignore"] = "as written"
    cells: Cells = Cells()
    bench: Any = None
    stocks: Any = None
    limits: Any = None
    report: Any = None
    blank: Any = None
    variance: Any = None
    added_refers_to: Any = None
    concentration_refers_to: Any = None
    reference: Any = None
    spiked_at: Any = None
    expect: Any = None

    _document: Document = PrivateAttr()
    _tables: tuple[SideTable, ...] = PrivateAttr(default=())

    @classmethod
    def of(cls, document: Document, tables: Mapping[str, str] | None = None) -> Layout:
        """Make a layout of a document and the texts of its side tables.

        Raises
        ------
        DocumentInvalid
            With every fault.
        """
        layout = validate(document, cls, CONSEQUENCE)
        layout._document = document  # noqa: SLF001 (its own)
        found = consistency.faults(layout)
        layout._tables = tuple(  # noqa: SLF001 (its own)
            SideTable.of(lookup, number, tables, found) for number, lookup in enumerate(layout.lookup)
        )
        if found:
            raise DocumentInvalid(tuple(document.fault(loc, what, CONSEQUENCE, todo) for loc, what, todo in found))
        return layout

    @property
    def document(self) -> Document:
        """The layout as it was written, with lines."""
        return self._document

    @property
    def columns(self) -> Columns:
        """The sources of the fields; of several readings to a row, those of the first."""
        return self.column_maps[0]

    def singles(self) -> list[Layout]:
        """Return the layouts of which each reads one reading to a row (and entry of a wide table)."""
        if len(self.column_maps) == 1:
            return [self]
        return [self.model_copy(update={"column_maps": (columns,)}) for columns in self.column_maps]

    @property
    def header_pattern(self) -> re.Pattern[str] | None:
        """The pattern of the first header line, if one is given."""
        return self.header if isinstance(self.header, re.Pattern) else None

    @property
    def side_tables(self) -> tuple[SideTable, ...]:
        """The side tables, read."""
        return self._tables

    @cached_property
    def headings(self) -> frozenset[str]:
        """The names of all values outside the table, whether they stand above it, in blocks or in the file's name."""
        of_blocks = () if self.blocks is None else self.blocks.headings()
        of_name = () if self.file_name is None else self.file_name.groupindex
        return frozenset([*self.heading, *of_blocks, *of_name])

    @cached_property
    def plain(self) -> bool:
        """Whether the export is one table under one header line, every line behind it a row or left out."""
        return (
            self.table == "rows"
            and self.blocks is None
            and not (self.widths or self.rows or self.fill_down or self.unnamed)
            and self.header_lines == 1
            and self.header != NO_HEADER
            and self.quote == '"'
            and self.separator != WIDE_BLANKS
        )

    @property
    def settings(self) -> Document:
        """The unread keys of the settings side, to be validated there."""
        return self._document.only(SETTINGS_KEYS)

    @cached_property
    def grammar(self) -> Grammar:
        """How the cells of this layout are read."""
        cells = self.cells
        plain = Grammar.of(self.decimal, self.thousands, cells.missing, cells.below, cells.above, cells.flags)
        others = tuple((marks.where, Grammar(marks.decimal, marks.thousands)) for marks in cells.marks)
        return replace(plain, glued=frozenset(map(fold, cells.glued)), zero=cells.zero, others=others)


def parse_layout(text: str, path: str, tables: Mapping[str, str] | None = None) -> Layout:
    """Read a layout.

    Parameters
    ----------
    text
        The YAML text.
    path
        How to name the file in faults.
    tables
        The texts of the side tables by the name that the layout gives them; without it they are not looked for, and
        an export that needs one is refused.

    Raises
    ------
    DocumentInvalid
        With every fault that can be seen at once.
    """
    return Layout.of(load(text, path, CONSEQUENCE), tables)
