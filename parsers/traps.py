"""What YAML does with a value that was meant otherwise, answered in plain words.

Most of these values are search patterns, file patterns and header names. Single quotes are the remedy for nearly all
of them. Nothing here decides whether a document is valid.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import yaml

#: A value that YAML would not take for plain text.
_SPECIAL = re.compile(r"""^[!&*%@`|>{}\[\],?"']|: |:$| #|[{}\[\]]""")
#: The part of a line before its value: list marks and a key.
_PREFIX = re.compile(r"""\s*(?:- +)*(?:[^\s'"{\[#][^:]*:\s+)?""")
#: A comment directly behind a value that does not look like a comment.
_EATEN = re.compile(r"[ \t]+#(?=[^\s#!]|[ \t]*$)[^\n]*", re.MULTILINE)


def quoted(value: str) -> str:
    """Write a value in single quotes as YAML wants it.

    >>> quoted("Sample #")
    "'Sample #'"
    """
    return "'" + value.replace("'", "''") + "'"


def remedy(value: str) -> str:
    """Tell how to write a value so that YAML leaves it alone."""
    return f"Put it in single quotes: {quoted(value)}"


def eaten_by_comment(text: str, start: int, end: int) -> str:
    """Return the value that was probably meant where a ``#`` behind a plain value cuts it, else nothing.

    A ``#`` followed by a blank and words is a comment, and left alone.
    """
    return rest_of_value(text, start) if _EATEN.match(text, end) else ""


def rest_of_value(text: str, start: int) -> str:
    """Return a value as it stands in the text from `start` on."""
    line_start = text.rfind("\n", 0, start) + 1
    line_end = text.find("\n", start)
    line = text[line_start : len(text) if line_end < 0 else line_end]
    return _piece(line, start - line_start)


def answer(text: str, error: yaml.MarkedYAMLError) -> tuple[int, str, str]:
    """Explain a syntax error.

    Returns
    -------
    tuple
        The line from 1, what is wrong, and what to do.
    """
    problem = error.problem or "unreadable"
    mark = error.problem_mark or error.context_mark
    if mark is None:
        return 0, f"this is no YAML: {problem}", "Correct it"
    lines = text.split("\n")
    line = lines[mark.line] if mark.line < len(lines) else ""
    start = error.context_mark or mark
    if "unknown escape character" in problem or "expected escape sequence" in problem:
        value = _double_quoted(lines[start.line], start.column)
        return start.line + 1, f"a backslash in double quotes has a meaning of its own in {value}", remedy(value[1:-1])
    if "'\\t'" in problem:
        return mark.line + 1, "a tab stands where YAML wants blanks", "Indent with blanks"
    if "end of stream" in problem and error.context and "quoted" in error.context:
        return start.line + 1, "a quote is opened here and never closed", "Close it, or double it where it is meant"
    return mark.line + 1, *(_indentation(lines, mark.line, problem) or _unreadable(line, mark.column, problem))


def _unreadable(line: str, column: int, problem: str) -> tuple[str, str]:
    value = _piece(line, column)
    if value and _SPECIAL.search(value):
        return f"YAML does not read {value} as text", remedy(value)
    return (
        f"this is no valid YAML ({problem})",
        "Look at the indentation, at brackets and quotes, and for a missing ': ' here or in the line before",
    )


def _indentation(lines: list[str], at: int, problem: str) -> tuple[str, str] | None:
    """Explain a key that stands further right, or further left, than those it belongs to; None where this is not it."""
    if at >= len(lines) or not re.match(r" *[\w'\"-]+ *:(?: |$)", lines[at]):
        return None
    before = next((number for number in range(at - 1, -1, -1) if lines[number].strip()), None)
    if before is None:
        return None
    here, above = (len(lines[number]) - len(lines[number].lstrip(" ")) for number in (at, before))
    if "mapping values" in problem and here > above and re.search(r":\s+\S", lines[before]):
        what = f"the key is indented by {here} blanks, the one above by {above}, which has a value already"
        return what, f"Indent both alike, or take the value of line {before + 1} away if this key belongs to it"
    if "expected <block end>" in problem or "could not find expected" in problem:
        what = f"the key is indented by {here} blanks, which fits none of the keys above"
        return what, "Indent keys that belong together alike"
    return None


def _double_quoted(line: str, column: int) -> str:
    match = re.compile(r'"(?:[^"\\]|\\.)*"').match(line, column)
    return match.group() if match else line[column:].strip() + '"'


def _piece(line: str, column: int) -> str:
    """Return the unquoted value in which `column` lies: the whole of a line's value, or one item in brackets."""
    prefix = _PREFIX.match(line)
    begin = prefix.end() if prefix else 0
    value = line[begin:].strip()
    if not value or value[0] not in "{[" or column <= begin or (value[0] == "[" and ", " not in value):
        return value  # in brackets, one item alone is rather a pattern such as [*!] than a list
    before = line[begin + 1 : column]
    cut = max(before.rfind(": ") + 2 if ": " in before else 0, before.rfind(", ") + 2 if ", " in before else 0)
    rest = line[begin + 1 + cut :]
    end = rest.find(", ")
    return (rest if end < 0 else rest[:end]).strip().removesuffix(value[-1] if end < 0 else "").strip()
