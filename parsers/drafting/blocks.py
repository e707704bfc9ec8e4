"""Tables that begin again under lines of their own: a vial, a batch, a wavelength, with what such a line says.

Nothing here looks at the rows.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from parsers.drafting.patterns import literal
from parsers.drafting.vocabulary import field_of

if TYPE_CHECKING:
    from collections.abc import Sequence

#: A text without two blanks in a row, as far as the next separator.
VALUE = r"([^\s;,]+(?: [^\s;,]+)*)"
#: A line that names a vial by itself.
_NAMING = re.compile(
    r"(?P<key>(?:Sample(?: ID| [Nn]ame| [Ll]abel)?|Label|Vial|Solution|Vessel|Probe)\s*[:=])\s*"
    rf"(?P<value>{VALUE})(?:[;,\t\s]*| {{2,}}\S.*)$"
)
#: A line that says one thing of what follows.
_KEYED = re.compile(
    rf"\s*(?P<key>[A-Za-z][^:=;,\t]{{1,30}}?\s*[:=;,\t])\s*(?P<value>{VALUE})(?:[;,\t\s]*| {{2,}}\S.*)$"
)
_DILUTION = re.compile(r"\s*(?P<key>Dil(?:ution|\.)?(?: factor)?\s*[:=]?)\s*(?P<value>\d+(?:\s*[:+/]\s*\d+)?)\s*$")
_WAVE = re.compile(r"(?P<channel>\d+(?:\.\d+)?)\s*nm")
_FIELDS = ("batch", "analyst", "instrument")


@dataclass(slots=True)
class Blocks:
    """Lines that begin blocks.

    Attributes
    ----------
    key
        How each of them begins.
    starts
        Index of each, and what it says behind the key.
    named
        Whether they name the vials of the rows below.
    heading
        Field to pattern, as a layout writes it.
    optional
        Fields of it that some blocks lack.
    """

    key: str
    starts: dict[int, str]
    named: bool
    heading: dict[str, str] = field(default_factory=dict)
    optional: set[str] = field(default_factory=set)

    def start_of(self, at: int) -> int:
        """Return the line that begins the block of a line."""
        return max(start for start in self.starts if start < at)


def find_blocks(lines: Sequence[str], heads: Sequence[int]) -> Blocks | None:
    """Find the lines that begin blocks: one before each header; None where there are none.

    Parameters
    ----------
    lines
        The example's lines.
    heads
        Index of each line that is a header, in order.
    """
    if len(heads) < 2:
        return None
    blocks = _by_key(lines, heads, _NAMING, named=True) or _by_key(lines, heads, _KEYED, named=False)
    if blocks is None:
        return None
    if blocks.named:
        blocks.heading["label"] = f"^{literal(blocks.key)}\\s*{VALUE}"
    inside = [at for start, head in zip(sorted(blocks.starts), heads, strict=True) for at in range(start, head)]
    for at in inside:
        _say(blocks, lines[at], everywhere=_count(lines, inside, lines[at]) == len(heads))
    return blocks


def _by_key(lines: Sequence[str], heads: Sequence[int], form: re.Pattern[str], *, named: bool) -> Blocks | None:
    found: dict[str, dict[int, str]] = {}
    for at, line in enumerate(lines):
        match = form.match(line)
        if match is not None:
            found.setdefault(match["key"], {})[at] = match["value"]
    for key, starts in found.items():
        order = sorted(starts)
        fits = len(order) == len(heads) and all(start < head for start, head in zip(order, heads, strict=True))
        if fits and all(head < start for head, start in zip(heads, order[1:], strict=False)):
            return Blocks(key, starts, named)
    return None


def _count(lines: Sequence[str], inside: Sequence[int], line: str) -> int:
    """Return how many lines before headers have the key of a line."""
    match = _DILUTION.match(line) or _KEYED.match(line)
    return sum(lines[at].lstrip().startswith(match["key"]) for at in inside) if match else 0


def _say(blocks: Blocks, line: str, *, everywhere: bool) -> None:
    """Add what a line says of the rows below."""
    dilution, keyed = _DILUTION.match(line), _KEYED.match(line)
    if dilution is not None:
        _add(blocks, "predilution", f"^\\s*{literal(dilution['key'].strip())}\\s*(\\S.*)$", everywhere=everywhere)
    elif keyed is not None:
        key = keyed["key"]
        start = f"^\\s*{literal(key)}\\s*" if line[:1].isspace() else f"^{literal(key)}\\s*"
        name = next((name for name in field_of(key.rstrip(":=;,\t ")) if name in _FIELDS), "")
        if name:
            _add(blocks, name, start + VALUE, everywhere=everywhere)
        elif _WAVE.fullmatch(keyed["value"]):
            _add(blocks, "channel", start + r"(\d+(?:\.\d+)?)", everywhere=everywhere)


def _add(blocks: Blocks, name: str, pattern: str, *, everywhere: bool) -> None:
    blocks.heading.setdefault(name, pattern)
    if not everywhere:
        blocks.optional.add(name)
