"""Side tables handed over with an example: a bench sheet that says of labels or positions what the export does not.

A table belongs to an export where one of its columns holds the export's labels, or its positions.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from parsers.drafting.drawing import scalar
from parsers.drafting.headers import take_apart
from parsers.drafting.numerals import numberish
from parsers.drafting.structure import SEPARATORS
from parsers.drafting.vocabulary import field_of, measure, role_of
from parsers.spelling import fold

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from parsers.drafting.example import Example

#: What a side table may say, in the order in which a layout lists it.
FIELDS = ("sample", "role", "nominal", "added", "spike_volume", "level", "aliquot", "made_up_to", "mass",
          "digest_volume", "predilution")  # fmt: skip
_MEASURES = {
    "spike_volume": "volume", "aliquot": "volume", "made_up_to": "volume", "digest_volume": "volume", "mass": "mass",
    "added": "concentration", "nominal": "concentration",
}  # fmt: skip


@dataclass(slots=True)
class Beside:
    """A side table.

    Attributes
    ----------
    name, text
        The file's name and text.
    by, key
        The field that is looked up, and the header of its column; empty where it is the first.
    columns
        Field to header.
    said
        Field to key to cell, filled cells only.
    count
        How many keys the table has.
    """

    name: str
    text: str
    by: str
    key: str
    columns: dict[str, str] = field(default_factory=dict)
    said: dict[str, dict[str, str]] = field(default_factory=dict)
    count: int = 0

    def line(self, keys: set[str]) -> str:
        """Return the entry of ``lookup``; keys of the export that the table lacks make it optional."""
        known = {key for cells in self.said.values() for key in cells}
        columns = ", ".join(f"{name}: {self._source(name)}" for name in FIELDS if name in self.columns)
        key = f", key: {scalar(self.key)}" if self.key else ""
        lacks = ", optional: yes" if keys - known else ""
        return f"{{file: {scalar(self.name)}, by: {self.by}{key}, columns: {{{columns}}}{lacks}}}"

    def _source(self, name: str) -> str:
        header = self.columns[name]
        parts = [f"from: {scalar(header)}"]
        unit = take_apart(header).unit
        if name == "role":
            words = dict.fromkeys(self.said[name].values())
            parts.append(f"map: {{{', '.join(f'{scalar(word)}: {role_of(word)}' for word in words)}}}")
        elif unit:
            parts.append(f"unit: {scalar(unit)}")
        elif any(not numberish(cell) for cell in self.said[name].values()) and name not in ("sample", "level"):
            parts.append("unit: in cell")
        if len(self.said[name]) < self.count and name != "sample":
            parts.append("optional: yes")
        return f"{{{', '.join(parts)}}}" if len(parts) > 1 else scalar(header)


def find_beside(example: Example, keys: Mapping[str, Sequence[str]]) -> Beside | None:
    """Read a text as a side table; None where no column of it holds keys of the export.

    Parameters
    ----------
    example
        The text.
    keys
        What may be looked up, field to its distinct texts in the export, the likelier first.
    """
    for character in (SEPARATORS[word] for word in ("tab", ";", ",")):
        rows = [[fold(cell) for cell in row] for row in csv.reader(example.lines, delimiter=character) if any(row)]
        if len(rows) < 2 or len(rows[0]) < 2 or any(len(row) != len(rows[0]) for row in rows):
            continue
        for by, texts in keys.items():
            for at in range(len(rows[0])):
                cells = [row[at] for row in rows[1:]]
                if set(cells) <= set(texts) and len(set(cells)) == len(cells):
                    return _filled(
                        Beside(example.name, "\n".join(example.lines), by, rows[0][at] if at else ""), rows, at
                    )
    return None


def _filled(found: Beside, rows: list[list[str]], key: int) -> Beside:
    found.count = len(rows) - 1
    for at, header in enumerate(rows[0]):
        if at == key:
            continue
        said = {row[key]: row[at] for row in rows[1:] if row[at]}
        name = _field(header, list(said.values()))
        if name and name not in found.columns:
            found.columns[name], found.said[name] = header, said
    return found


def _field(header: str, cells: list[str]) -> str:
    """Return the field of a column, nothing where it is not known."""
    apart = take_apart(header)
    if cells and all(map(role_of, cells)):
        return "role"
    of = measure(apart.unit or next((cell.rpartition(" ")[2] for cell in cells if " " in cell), ""))
    choices = ("sample" if name == "label" else name for name in field_of(apart.name))
    return next((name for name in choices if name in FIELDS and of == _MEASURES.get(name, of)), "")
