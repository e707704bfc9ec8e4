"""Where a field of a layout comes from: columns, a heading, a group of the label, or a constant; and in which order.

Nothing here looks at an export.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, model_validator

from parsers.patterns import Pattern  # noqa: TC001 (pydantic reads annotations)
from parsers.wording import got

WRITE_NAME = "Write the name exactly as in the export's header"
#: The word for a unit that is glued to each number.
IN_CELL = "in cell"
#: Keys that say where a value comes from.
_PLACES = ("from", "number", "matching", "heading", "group", "constant")


class UnitPlace(BaseModel):
    """A unit that the export states: in a column of its own, or by a pattern of the number's header."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    column: str = Field(default="", alias="from")
    header: Pattern | None = None

    @model_validator(mode="after")
    def _one_place(self) -> UnitPlace:
        if bool(self.column) == (self.header is not None):
            raise ValueError("expected either 'from' (a column) or 'header' (a pattern)\nKeep one of the two")
        if self.header is not None and self.header.groups != 1:
            raise ValueError(
                f"expected one group in brackets around the unit, got {self.header.groups}\n"
                r"Write for instance '\((.+)\)$'"
            )
        return self


class Source(BaseModel):
    """One entry of ``columns``.

    Attributes
    ----------
    names
        Header names: replicate columns of a signal, columns to join of a time, alternatives of anything else.
    number, matching, occurrence
        A column by its number from 1, or by a pattern of its header; which one where a name stands several times.
    heading, group
        The name of a value outside the table, or of a group of the label rules.
    pattern
        What of the text is meant: its group, or the whole match. A text that does not match says nothing.
    map
        Word in the export to word that is meant.
    unit
        Unit of a quantity: as text, ``in cell`` where it is glued to each number, or the place where it stands.
    scale
        What each number is multiplied with.
    as_
        What a predilution says: a factor, its inverse, or the ratio of two volumes (taken, made up to).
    format
        Forms of a time, tried in order.
    constant
        The value of every row.
    optional
        The source may be absent, and its cells may be empty.
    choices
        Several sources; the first one that says something counts, and a disagreement is reported.
    """

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True)

    names: tuple[str, ...] = Field(default=(), alias="from")
    number: int | None = Field(default=None, ge=1)
    matching: Pattern | None = None
    occurrence: int | None = Field(default=None, ge=1)
    heading: str = ""
    group: str = ""
    pattern: Pattern | None = None
    map: dict[str, str] = {}
    unit: str | UnitPlace = ""
    scale: float | None = Field(default=None, allow_inf_nan=False)
    as_: Literal["factor", "inverse", "ratio"] = Field(default="factor", alias="as")
    format: tuple[str, ...] = ()
    constant: str | None = None
    optional: bool = False
    choices: tuple[Source, ...] = Field(default=(), exclude=True)

    @model_validator(mode="before")
    @classmethod
    def _short_forms(cls, value: Any) -> Any:
        """Take ``Label`` and ``[R1, R2]`` for ``{from: …}``, and a list with maps for several sources."""
        if isinstance(value, (cls, tuple)):
            return value
        if isinstance(value, list) and any(isinstance(one, dict) for one in value):
            return {"choices": value}
        if not isinstance(value, dict):
            return {"from": _names(value)}
        full = dict(value)
        if "from" in full:
            full["from"] = _names(full["from"])
        elif not any(place in full for place in (*_PLACES, "choices")):
            raise ValueError(f"expected 'from' or 'constant' in it, got neither\n{WRITE_NAME} under 'from'")
        if isinstance(full.get("format"), str):
            full["format"] = [full["format"]]
        return full

    @property
    def sources(self) -> tuple[Source, ...]:
        """The sources in order of precedence: this one, or its choices."""
        return self.choices or (self,)

    @property
    def in_columns(self) -> bool:
        """Whether a column of the table is named."""
        return bool(self.names) or self.number is not None or self.matching is not None

    @property
    def plain(self) -> bool:
        """Whether each cell of the column is the value, with nothing to be cut out, replaced or scaled."""
        return (
            self.in_columns
            and not (self.choices or self.heading or self.group or self.map)
            and self.pattern is None
            and self.scale is None
        )

    @property
    def stated_unit(self) -> str:
        """The unit that the layout itself states; nothing where the export does, or nobody."""
        return self.unit if isinstance(self.unit, str) and self.unit != IN_CELL else ""


def _names(value: Any) -> list[str]:
    names = value if isinstance(value, list) else [value]
    if not names or not all(isinstance(name, str) and name.strip() for name in names):
        wrong = next((name for name in names if not isinstance(name, str) or not name.strip()), value)
        raise ValueError(f"expected a column name or a list of them, got {got(wrong)}\n{WRITE_NAME}")
    return names


#: A source of which the layout says nothing further, and the same where a value may be absent.
UNSAID = Source.model_construct()
MAYBE = Source.model_construct(optional=True)
