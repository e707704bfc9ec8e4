"""Lines of an example that are no readings, as a layout tells them: header, end, what is left out.

Only what is surely no row is left out; any other line stays an error.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from parsers.drafting.drawing import scalar
from parsers.drafting.errors import DraftRefused
from parsers.drafting.patterns import general, literal
from parsers.drafting.structure import split
from parsers.drafting.vocabulary import begins_with_statistic
from parsers.spelling import fold

if TYPE_CHECKING:
    from collections.abc import Iterable

    from parsers.drafting.blocks import Blocks
    from parsers.drafting.structure import Structure


def header_line(structure: Structure) -> str:
    """Return a pattern of the header, or of each header where their columns stand in different orders.

    Raises
    ------
    DraftRefused
        If no name of a column tells the headers from other lines.
    """
    if not structure.any_order:
        return _start_of(structure, structure.header_at)
    character = literal(structure.character)
    heads = [line for line in structure.example.lines if _cells(structure, line) == sorted(structure.headers)]
    for name in structure.headers:
        pattern = f"(?:^|{character}) *{literal(name)} *(?:{character}|$)"
        if name and sum(re.search(pattern, line) is not None for line in structure.example.lines) == len(heads):
            return pattern
    sentence = "no name of a column stands in the headers alone, so no pattern finds them. Write the layout by hand."
    raise DraftRefused(structure.example.name, sentence, structure.header_at + 1)


def block_lines(blocks: Blocks) -> str:
    """Return how blocks begin, and what their first lines say, as a layout writes it."""
    parts = []
    for name, pattern in blocks.heading.items():
        written = scalar(pattern)
        parts.append(
            f"{name}: {{pattern: {written}, optional: yes}}" if name in blocks.optional else f"{name}: {written}"
        )
    heading = f", heading: {{{', '.join(parts)}}}" if parts else ""
    return f"{{begin: {scalar('^' + literal(blocks.key))}{heading}}}"


def _cells(structure: Structure, line: str) -> list[str]:
    return sorted(map(fold, split(line, structure.character)))


def _start_of(structure: Structure, at: int) -> str:
    """Return a pattern of the beginning of a line that no other line has."""
    line, character = structure.example.lines[at], structure.character
    others = [text for number, text in enumerate(structure.example.lines) if number != at and text != line]
    end = 0
    for _ in range(line.count(character)):
        end = line.find(character, end) + 1
        if line[:end].strip(f"{character} ") and not any(text.startswith(line[:end]) for text in others):
            return f"^{literal(line[:end])}"
    return f"^{literal(line)}$"


def row_rules(structure: Structure) -> Iterable[str]:
    """Return what the rows are that hold statistics of others, by the column that says so."""
    said: dict[int, list[str]] = {}
    for at, column in structure.statistics.items():
        said.setdefault(column, []).append(split(structure.example.lines[at], structure.character)[column])
    for column, words in said.items():
        if by_name(structure, column):
            pattern = "|".join(map(literal, dict.fromkeys(words)))
            yield f"{{where: {{{scalar(structure.headers[column])}: {scalar(f'^(?:{pattern})$')}}}, are: left out}}"


def by_name(structure: Structure, column: int) -> bool:
    """Tell whether a column has a name of its own."""
    name = structure.headers[column]
    return bool(name) and structure.headers.count(name) == 1


def skips(structure: Structure) -> list[str]:
    """Return patterns of the lines among the rows that are none, as far as they are surely none."""
    found = []
    if structure.units_at is not None:
        found.append(f"^{literal(structure.example.lines[structure.units_at])}$")
    separator = literal(structure.character)
    for at, column in structure.statistics.items():
        if by_name(structure, column):
            continue  # told by rows
        word = literal(structure.example.lines[at].split(structure.character)[column].strip())
        before = f"(?:[^{separator}]*{separator}){{{column}}}" if column else ""
        found.append(rf"^{before}\s*{word}\s*(?:{separator}|$)")
    found += [_words_of(structure.example.lines[at]) for at in structure.stray if _is_text(structure, at)]
    return list(dict.fromkeys(found))


def _is_text(structure: Structure, at: int) -> bool:
    """Tell whether a line is words only, a statistic, or like one above the table, and so no broken row."""
    alike = re.compile(general(structure.example.lines[at]))
    if any(alike.match(line) for line in structure.example.lines[: structure.header_at] if line.strip()):
        return True
    if begins_with_statistic(structure.example.lines[at]):
        return True
    cells = [cell for cell in structure.example.lines[at].split(structure.character) if cell.strip()]
    return len(cells) == 1


def odd_lines(structure: Structure) -> Iterable[str]:
    """Say which lines among the rows are neither rows nor surely something else."""
    """Say which lines among the rows are neither rows nor surely something else."""
    wrong = [at + 1 for at in structure.stray if not _is_text(structure, at)]
    if wrong:
        yield (
            f"line{'s' if len(wrong) > 1 else ''} {', '.join(map(str, wrong[:10]))} of {structure.example.name}: other "
            f"fields than the {len(structure.headers)} of the header, so the export is refused. Leave them out with "
            f"skip only if they are no readings"
        )


def until_line(structure: Structure) -> str:
    """Return a pattern of the first line behind the table, where one stands there."""
    if structure.tail is None:
        return ""
    line = structure.example.lines[structure.tail]
    before = structure.example.lines[: structure.tail]
    word = re.match(r"\W*[A-Za-zÄÖÜäöü]+(?: [A-Za-z]+)*", line)
    for text in ([word.group()] if word else []) + [line]:
        if text.strip() and not any(other.startswith(text) for other in before):
            return f"^{literal(text)}"
    return ""


def _words_of(line: str) -> str:
    if begins_with_statistic(line):
        word = re.match(r"[\W\d]*[^\W\d]+", line)
        return "^" + literal(word.group() if word else line) + r"\b"
    return general(line)
