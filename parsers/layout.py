"""A layout: what one kind of export looks like, as it was written in YAML and checked.

`parse_layout` finds every fault at once. Keys that belong to the settings (`SETTINGS_KEYS`) are accepted unread: their
values and lines are in `Layout.settings`. Nothing here looks at an export.
"""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, PrivateAttr

from parsers import consistency
from parsers.cells import Grammar
from parsers.document import Document, load, validate
from parsers.errors import DocumentInvalid
from parsers.labels import LabelRule  # noqa: TC001 (pydantic reads annotations)
from parsers.patterns import Pattern, compiled
from parsers.source import Source
from parsers.wording import got

if TYPE_CHECKING:
    import re
    from collections.abc import Iterator

__all__ = ["SETTINGS_KEYS", "Cells", "Claims", "Columns", "Layout", "Source", "Unfold", "parse_layout"]

#: Keys that a layout may hold for the settings side.
SETTINGS_KEYS = (
    "bench", "stocks", "limits", "report", "blank", "variance", "added_refers_to", "concentration_refers_to",
    "reference", "spiked_at", "expect",
)  # fmt: skip
CONSEQUENCE = "No export can be read with this layout."


def _known_encoding(name: str) -> str:
    try:
        "".encode(name)
    except LookupError as error:
        raise ValueError(
            f"expected the name of an encoding, got {name!r}\nUsual ones: utf-8, cp1252, latin-1, utf-16-le"
        ) from error
    return name


def _separator(value: str) -> str:
    written = {"tab": "\t", "blanks": " "}.get(value, value)
    if len(written) != 1 or written in '"\n\r':
        raise ValueError(f"expected one character, 'tab' or 'blanks', got {got(value)}\nWrite it in single quotes: ';'")
    return written


def _one_or_more(value: Any) -> Any:
    return [value] if isinstance(value, str) else value


def _pattern_or_words(value: Any) -> Any:
    """Take a text for a pattern and a list for words that fill the whole cell."""
    if isinstance(value, list) and all(isinstance(word, str) for word in value):
        return tuple(value)
    return compiled(value)


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
    duplicate_of: Source | None = None
    comment: Source | None = None
    signal: Source | None = None
    signal_sd: Source | None = None
    signal_rsd: Source | None = None
    readings: Source | None = None
    replicate: Source | None = None
    position: Source | None = None
    added: Source | None = None
    nominal: Source | None = None
    concentration: Source | None = None
    reported_result: Source | None = None
    reference_signal: Source | None = None
    spike_volume: Source | None = None
    aliquot: Source | None = None
    made_up_to: Source | None = None
    mass: Source | None = None
    digest_volume: Source | None = None
    predilution: Source | None = None
    measured_at: Source | None = None

    def given(self) -> Iterator[tuple[str, Source]]:
        """Yield each mapped field with its source."""
        for field in type(self).model_fields:
            source = getattr(self, field)
            if source is not None:
                yield field, source


class Unfold(_Part):
    """Columns of a wide table that become rows: named groups ``analyte``, ``channel``, ``field`` of their headers."""

    pattern: Pattern
    fields: dict[str, Literal["signal", "signal_sd", "signal_rsd", "readings"]] = {}
    except_: Pattern | None = Field(default=None, alias="except")


class Cells(_Part):
    """Cells that are no numbers and yet explained: a text is a pattern, a list holds whole words."""

    missing: tuple[str, ...] = ("",)
    below: PatternOrWords = ()
    above: PatternOrWords = ()
    flags: Pattern | None = None


class Layout(_Part):
    """One kind of export. Every key has the meaning and default that the documentation of layouts gives it."""

    layout: str = Field(min_length=1)
    claims: Claims
    encodings: Annotated[tuple[Encoding, ...], BeforeValidator(_one_or_more)] = Field(("utf-8", "cp1252"), min_length=1)
    separator: Annotated[str, AfterValidator(_separator)]
    header: Pattern | None = None
    until: Pattern | None = None
    finished: Pattern | None = None
    skip: Annotated[tuple[Pattern, ...], BeforeValidator(_one_or_more)] = ()
    decimal: Literal[".", ","] = "."
    thousands: Mark = ""
    heading: dict[str, Pattern] = {}
    columns: Columns
    unfold: Unfold | None = None
    labels: tuple[LabelRule, ...] = ()
    unmatched: Literal["refuse", "set aside"] = "refuse"
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

    @classmethod
    def of(cls, document: Document) -> Layout:
        """Make a layout of a document.

        Raises
        ------
        DocumentInvalid
            With every fault.
        """
        layout = validate(document, cls, CONSEQUENCE)
        layout._document = document  # noqa: SLF001 (its own)
        faults = tuple(document.fault(loc, what, CONSEQUENCE, todo) for loc, what, todo in consistency.faults(layout))
        if faults:
            raise DocumentInvalid(faults)
        return layout

    @property
    def document(self) -> Document:
        """The layout as it was written, with lines."""
        return self._document

    @property
    def settings(self) -> Document:
        """The unread keys of the settings side, to be validated there."""
        return self._document.only(SETTINGS_KEYS)

    @cached_property
    def grammar(self) -> Grammar:
        """How the cells of this layout are read."""
        return Grammar.of(self.decimal, self.thousands, self.cells.missing, *self._odd_cells())

    def _odd_cells(self) -> tuple[Any, Any, re.Pattern[str] | None]:
        return self.cells.below, self.cells.above, self.cells.flags


def parse_layout(text: str, path: str) -> Layout:
    """Read a layout.

    Parameters
    ----------
    text
        The YAML text.
    path
        How to name the file in faults.

    Raises
    ------
    DocumentInvalid
        With every fault that can be seen at once.
    """
    return Layout.of(load(text, path, CONSEQUENCE))
