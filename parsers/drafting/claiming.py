"""Which exports a drafted layout claims: by the part of the file names that does not change.

Nothing here looks into an export, except for the first line above its table.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from parsers.drafting.drawing import scalar

if TYPE_CHECKING:
    from collections.abc import Sequence

    from parsers.drafting.structure import Structure

_LETTERS = re.compile(r"[^\W\d_]{3,}")


def claim(structures: Sequence[Structure]) -> tuple[str, str]:
    """Return the value of ``claims`` and what is uncertain about it."""
    names = [structure.example.name for structure in structures]
    stems = [_unnamed(structure) for structure in structures]
    globs = {re.sub(r"\d+(?:[-_.]?\d+)*", "*", stem) for stem in stems}
    endings = {name.rpartition(".")[2] for name in names if "." in name}
    glob, doubt = "", ""
    if len(globs) == 1 and len(endings) <= 1:
        glob = globs.pop() + "".join(f".{ending}" for ending in endings)
    else:
        glob = f"*.{endings.pop()}" if len(endings) == 1 else "*"
        doubt = "the names of the examples have little in common, so it claims by their ending. Narrow it"
    if glob == names[0]:
        doubt = "the name has no number, so only exports of exactly this name are claimed. Put * where it changes"
    elif not _LETTERS.search(glob.rpartition(".")[0]) and len(glob.rpartition(".")[0].strip("*-_ ")) < 2:
        doubt = "hardly any letter of the name stays the same. Narrow it if other exports land in the same folder"
    text = _first_line(structures)
    return f"{{file: {scalar(glob)}{text}}}", doubt


def _unnamed(structure: Structure) -> str:
    """Return the stem of a file's name, without the label of a vial where the name says it."""
    name = structure.example.name
    stem = name.rpartition(".")[0] or name
    return stem.replace(structure.names[0], "*") if structure.file_name else stem


def _first_line(structures: Sequence[Structure]) -> str:
    """Return a pattern of the first line where it stands above the table and has the same words everywhere."""
    firsts = {
        structure.example.lines[0]
        for structure in structures
        if structure.example.lines and (structure.header_at > 0 or structure.table == "pairs")
    }
    if len(firsts) != 1:
        return ""
    match = re.match(r"[A-Za-z]{3,}(?: [A-Za-z]+)*", firsts.pop())
    return f", text: {scalar(f'^{match.group()}')}" if match else ""
