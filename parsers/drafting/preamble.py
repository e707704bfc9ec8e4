"""Values above the table that hold for all its rows: batch, analyst, instrument, element.

Nothing here reads the table.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from parsers.drafting.mapping import element_in
from parsers.drafting.vocabulary import field_of

if TYPE_CHECKING:
    from collections.abc import Iterable

    from parsers.drafting.structure import Structure

_KEYED = re.compile(r'"?(?P<key>[^:;=,\t"]{2,30}?)"?\s*(?P<sign>[:=;,\t])\s*"?(?P<value>[^;\t"]*[^;\t\s",])')
_FIELDS = ("batch", "analyst", "instrument")
#: Keys whose value may begin with the symbol of the only element.
_ELEMENT_KEYS = re.compile(
    r"(?:element|analyte|metal|analyt|elemento|element line|line|method|wavelength)\b.*", re.IGNORECASE
)


def find_heading(structure: Structure, taken: Iterable[str]) -> dict[str, str]:
    """Return the pattern of each value above the table whose field has no other source.

    Parameters
    ----------
    structure
        The table of an example.
    taken
        Fields that have a source already.
    """
    found: dict[str, str] = {}
    used = set(taken)
    for line in structure.example.lines[: structure.header_at]:
        match = _KEYED.match(line)
        if match is None:
            continue
        key, sign, value = match["key"].strip(), match["sign"], match["value"].strip()
        name = next((name for name in field_of(key) if name in _FIELDS and name not in used), "")
        start = f'^"?{re.escape(key)}"?\\s*{_sign(sign)}\\s*'.replace(r"\ ", " ").replace(
            '"?', '"?' if '"' in line else ""
        )
        if name:
            found[name] = start + (r'"?([^;"\t]+)' if sign in ";\t" or ";" in line or "\t" in line else r"(.+?)[,\s]*$")
            used.add(name)
        elif (
            "analyte" not in used
            and _ELEMENT_KEYS.fullmatch(key)
            and element_in(value)
            and value.startswith(element_in(value))
        ):
            found["analyte"] = start + r'"?([A-Z][a-z]?)\b'
            used.add("analyte")
    return found


def _sign(sign: str) -> str:
    return {"\t": r"\t"}.get(sign, sign)
