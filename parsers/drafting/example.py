"""The bytes of an example as text, with the encodings that its layout must declare.

Nothing here knows what a line means.
"""

from __future__ import annotations

import codecs
from dataclasses import dataclass

from parsers.drafting.errors import DraftRefused
from parsers.errors import ExportRefused
from parsers.text import decode

#: The default of a layout, which needs no key.
USUAL = ("utf-8", "cp1252")
_UTF16 = {codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE}
#: From this share of NUL bytes in every other place on, text is taken for UTF-16 without mark.
_MOSTLY = 0.4


@dataclass(frozen=True, slots=True)
class Example:
    """One export to draft from.

    Attributes
    ----------
    name
        The file's name.
    data
        Its bytes.
    encodings
        What the layout must declare.
    lines
        Its lines without line ends; line number 1 is ``lines[0]``.
    doubt
        What is uncertain about the encoding, or nothing.
    """

    name: str
    data: bytes
    encodings: tuple[str, ...]
    lines: list[str]
    doubt: str = ""


def open_example(name: str, data: bytes) -> Example:
    """Decode an example.

    Raises
    ------
    DraftRefused
        If it is empty or no text in one of the usual encodings.
    """
    encodings = _encodings(data)
    try:
        found = decode(data, encodings, name)
        lines = found.lines
    except ExportRefused as refused:
        sentence = f"this is no text that can be drafted from: {refused.sentence}"
        raise DraftRefused(name, sentence, refused.line) from refused
    doubt = ""
    if found.encoding == "cp1252":
        strange = sorted({character for character in found.text if not character.isascii()})
        doubt = f"no mark says the encoding; read as cp1252 it holds {' '.join(strange[:12])}. Do they look right?"
    return Example(name, data, encodings, lines, doubt)


def _encodings(data: bytes) -> tuple[str, ...]:
    if data[:2] in _UTF16 and data[:4] != codecs.BOM_UTF32_LE:
        return ("utf-16",)
    head = data[:4096]
    half = max(len(head) // 2, 1)
    if head[1::2].count(0) > _MOSTLY * half:
        return ("utf-16-le",)
    if head[0::2].count(0) > _MOSTLY * half:
        return ("utf-16-be",)
    return USUAL
