"""Where a field of a layout comes from: columns by name, or a constant.

Nothing here looks at an export.
"""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel, ConfigDict, Field, model_validator

from parsers.wording import got

WRITE_NAME = "Write the name exactly as in the export's header"


class Source(BaseModel):
    """One entry of ``columns``.

    Attributes
    ----------
    names
        Header names: replicate columns of a signal, columns to join of a time, alternatives of anything else.
    unit
        Unit of a quantity, as text.
    format
        Forms of a time, tried in order.
    constant
        The value of every row.
    optional
        The column may be absent, and its cells may be empty.
    map
        Word in the export to word that is meant.
    """

    model_config = ConfigDict(extra="forbid", frozen=True)

    names: tuple[str, ...] = Field(default=(), alias="from")
    unit: str = ""
    format: tuple[str, ...] = ()
    constant: str | None = None
    optional: bool = False
    map: dict[str, str] = {}

    @model_validator(mode="before")
    @classmethod
    def _short_forms(cls, value: Any) -> Any:
        """Take ``Label`` and ``[R1, R2]`` for ``{from: …}``."""
        if not isinstance(value, dict):
            return {"from": _names(value)}
        full = dict(value)
        if "from" in full:
            full["from"] = _names(full["from"])
        elif "constant" not in full:
            raise ValueError(f"expected 'from' or 'constant' in it, got neither\n{WRITE_NAME} under 'from'")
        if isinstance(full.get("format"), str):
            full["format"] = [full["format"]]
        return full


def _names(value: Any) -> list[str]:
    names = value if isinstance(value, list) else [value]
    if not names or not all(isinstance(name, str) and name.strip() for name in names):
        wrong = next((name for name in names if not isinstance(name, str) or not name.strip()), value)
        raise ValueError(f"expected a column name or a list of them, got {got(wrong)}\n{WRITE_NAME}")
    return names
