"""Bytes to lines: a strict decoding with the declared encodings, marks honoured, line ends of every kind.

A character that does not belong refuses the export; nothing is ever replaced. Lines are numbered as an editor numbers
them. Nothing here knows what a line means.
"""

from __future__ import annotations

import codecs
import re
from functools import cached_property
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from parsers.errors import ExportRefused
from parsers.patterns import literal_start

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

#: Largest export in bytes: fifty times the longest seen.
MOST_BYTES = 512 * 1024 * 1024
#: Longest line in characters: a thousand columns fit, and no pattern runs for minutes.
MOST_CHARACTERS = 50_000

#: Marks at the beginning of a file, the longer ones first, and the encodings that must be declared for them.
_MARKS = (
    (codecs.BOM_UTF32_LE, "utf-32"),
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
_RETURN, _FEED = 13, 10
_REFUSED = "Nothing of this export is read."


class Line(NamedTuple):
    """One line of an export.

    Attributes
    ----------
    at
        Its index from 0.
    offset
        Where it begins in the text.
    text
        What it says.
    """

    at: int
    offset: int
    text: str


class Lines:
    """A decoded export; it is split into lines as far as somebody looks.

    Attributes
    ----------
    name
        The export, for errors.
    encoding
        The declared encoding that matched.
    text
        All of it, every line end a line feed.
    data
        The same in UTF-8, with line feeds alone or after carriage returns, where the export came so; else None.
    """

    def __init__(self, name: str, encoding: str, text: str, data: bytes | None = None) -> None:
        self.name = name
        self.encoding = encoding
        self.text = text
        self.data = data
        self._length = text.count("\n") + (not text.endswith("\n"))

    def __len__(self) -> int:
        """Return the number of lines."""
        return self._length

    @cached_property
    def lines(self) -> list[str]:
        """The lines without line ends; line number 1 is ``lines[0]``.

        Raises
        ------
        ExportRefused
            If a line is too long.
        """
        return self._split(self.text.removesuffix("\n").split("\n"))

    def head(self, count: int) -> list[str]:
        """Return the first lines, fewer where the export is shorter.

        Raises
        ------
        ExportRefused
            If one of them is too long.
        """
        if "lines" in self.__dict__ or count >= len(self):
            return self.lines[:count]
        end = -1
        for _ in range(count):
            end = self.text.find("\n", end + 1)
        return self._split(self.text[:end].split("\n"))

    def line(self, at: int) -> str:
        """Return the line of an index."""
        return self.lines[at] if "lines" in self.__dict__ else self.head(at + 1)[at]

    def may_be_long(self) -> bool:
        """Tell, without splitting, whether a line may be too long: then half of what is allowed has no line end."""
        half = MOST_CHARACTERS // 2
        last = len(self.text) - half
        return any(self.text.find("\n", at, at + half) < 0 for at in range(0, last, half))

    def matching(self, pattern: re.Pattern[str], first: int, offset: int) -> list[Line]:
        """Return the lines in which a pattern is found.

        Parameters
        ----------
        pattern
            Searched in each line.
        first, offset
            Index of the first line to look at, and where it begins in the text.
        """
        start = literal_start(pattern)
        return [line for line in self._candidates(start, first, offset) if pattern.search(line.text)]

    def all_from(self, first: int, offset: int) -> Iterator[Line]:
        """Yield the lines from an index on."""
        for at, text in enumerate(self.lines[first:], first):
            yield Line(at, offset, text)
            offset += len(text) + 1

    def _candidates(self, start: str, first: int, offset: int) -> Iterator[Line]:
        """Yield the lines that begin with a text, without splitting the export."""
        if not start:
            yield from self.all_from(first, offset)
            return
        needle, text = f"\n{start}", self.text
        place = offset if text.startswith(start, offset) else text.find(needle, offset) + 1
        while place or (place == offset and text.startswith(start)):
            first, offset = first + text.count("\n", offset, place), place
            end = text.find("\n", place)
            yield Line(first, place, text[place : len(text) if end < 0 else end])
            place = text.find(needle, place) + 1
            if not place:
                return

    def byte_range(self, first: int, last: int) -> tuple[int, int]:
        """Return where the lines from an index to before another one begin and end in `data`."""
        data = self.data or b""
        begin, end = 0, len(data)
        for _ in range(first):
            begin = data.find(b"\n", begin) + 1
        if last < len(self):
            place = end - data.endswith(b"\n")
            for _ in range(len(self) - last):
                place = data.rfind(b"\n", 0, place)
            end = place + 1
        return begin, end

    def refusal(self, at: int | None, sentence: str, todo: str, column: str | None = None) -> ExportRefused:
        """Make the error for the line of an index: what is wrong, and what to do."""
        line = None if at is None else at + 1
        return _refusal(self.name, line, sentence, todo, column)

    def _split(self, lines: list[str]) -> list[str]:
        if max(map(len, lines), default=0) > MOST_CHARACTERS:
            at = next(at for at, line in enumerate(lines) if len(line) > MOST_CHARACTERS)
            sentence = f"expected at most {MOST_CHARACTERS} characters in a line, got {len(lines[at])}"
            raise self.refusal(at, sentence, "Look whether this is a text export")
        return lines


def decode(data: bytes, encodings: Sequence[str], name: str) -> Lines:
    """Decode an export.

    Parameters
    ----------
    data
        The whole export.
    encodings
        Declared encodings, tried in order. A mark at the beginning decides instead, if its encoding is declared.
    name
        The export, for errors.

    Raises
    ------
    ExportRefused
        If it is empty or too large, no declared encoding fits, or it holds NUL characters.
    """
    if not data:
        raise _refusal(name, None, "expected lines of text, got an empty file", "Export again")
    if len(data) > MOST_BYTES:
        raise _refusal(name, None, f"expected at most {MOST_BYTES} bytes, got {len(data)}", "Export fewer runs at once")
    encoding, text = _decoded(data, encodings, name)
    same = data if _plain(encoding) == "utf-8" and not data.startswith(codecs.BOM_UTF8) else None
    if "\r" not in text:
        return Lines(name, encoding, text, same)
    if same is not None and _only_pairs(same):
        return Lines(name, encoding, text.replace("\r", ""), same)
    return Lines(name, encoding, text.replace("\r\n", "\n").replace("\r", "\n"))


def _only_pairs(data: bytes) -> bool:
    """Tell whether every carriage return is followed by a line feed."""
    codes = np.frombuffer(data, dtype=np.uint8)
    returns = np.flatnonzero(codes == _RETURN)
    return int(returns[-1]) + 1 < len(codes) and bool((codes[returns + 1] == _FEED).all())


def _decoded(data: bytes, encodings: Sequence[str], name: str) -> tuple[str, str]:
    for mark, marked in _MARKS:
        if data.startswith(mark):
            return _marked(data, mark, marked, encodings, name)
    failures: list[ExportRefused] = []
    for encoding in encodings:
        try:
            if _plain(encoding) in ("utf-16", "utf-32"):
                sentence = f"expected the mark of {encoding} at the beginning, got none"
                raise _refusal(name, 1, sentence, f"Declare {encoding}-le or {encoding}-be")
            text = data.decode("utf-8" if _plain(encoding) == "utf-8" else encoding, "strict")
            _refuse_nul(text, name)
        except UnicodeDecodeError as error:
            failures.append(_undecodable(data, error, encoding, name))
        except ExportRefused as error:
            failures.append(error)
        else:
            return encoding, text
    # A NUL says more about what the file is than a byte that another encoding did not know.
    raise next((failure for failure in failures if "NUL" in failure.sentence), failures[0])


def _marked(data: bytes, mark: bytes, marked: str, encodings: Sequence[str], name: str) -> tuple[str, str]:
    declared = [encoding for encoding in encodings if _plain(encoding).startswith(marked)]
    if not declared:
        sentence = f"the file begins with the mark of {marked}, which is not among the declared encodings"
        raise _refusal(name, 1, f"{sentence} ({', '.join(encodings)})", f"Add {marked} to encodings in the layout")
    try:
        text = data.decode("utf-8-sig" if mark == codecs.BOM_UTF8 else marked, "strict")
    except UnicodeDecodeError as error:
        raise _undecodable(data, error, marked, name) from error
    _refuse_nul(text, name)
    return declared[0], text


def _plain(encoding: str) -> str:
    """Return the usual name of an encoding; the mark of UTF-8 is looked for in any case."""
    return codecs.lookup(encoding).name.removesuffix("-sig")


def _undecodable(data: bytes, error: UnicodeDecodeError, encoding: str, name: str) -> ExportRefused:
    line = len(re.findall(rb"\r\n|\r|\n", data[: error.start])) + 1
    sentence = f"expected text in {encoding}, got the byte 0x{data[error.start]:02X}, which does not belong there"
    return _refusal(name, line, sentence, "Declare the right encodings in the layout")


def _refuse_nul(text: str, name: str) -> None:
    at = text.find("\0")
    if at < 0:
        return
    line = len(re.findall(r"\r\n|\r|\n", text[:at])) + 1
    todo = "Look whether this is a text export"
    if text.count("\0") * 3 > len(text):
        todo = "It looks like UTF-16 without a mark: declare utf-16-le or utf-16-be in the layout"
    raise _refusal(name, line, "expected text, got a NUL character", todo)


def _refusal(name: str, line: int | None, sentence: str, todo: str, column: str | None = None) -> ExportRefused:
    return ExportRefused(name, line, column, f"{sentence}. {_REFUSED} {todo}.", f"{todo}.")
