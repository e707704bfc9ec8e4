"""Search patterns of a layout: checked when the layout is read, searched in many lines at little cost.

Nothing here knows what a pattern is for.
"""

from __future__ import annotations

import re
import warnings
from typing import Annotated

from pydantic import PlainValidator

#: Characters that stand for themselves in a pattern.
_LITERAL = re.compile(r"\^((?:[A-Za-z0-9 _;,:=<>~%#@!\"'/&-]|\\[.;,:*+?()\[\]|/^$-])+)")


def compiled(value: object) -> re.Pattern[str]:
    """Compile a pattern of a layout.

    Raises
    ------
    ValueError
        If it is no text, empty, or no valid pattern; the message says where it breaks.
    """
    if isinstance(value, re.Pattern):
        return value
    if not isinstance(value, str) or not value:
        found = "nothing" if value == "" else "a list" if isinstance(value, list) else "keys and values"
        raise ValueError(f"expected a search pattern, got {found}\nWrite it in single quotes: '^Label;'")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")  # what Python warns of today will mean something else one day
            return re.compile(value)
    except re.error as error:
        place = "" if error.pos is None else f" at character {error.pos + 1}"
        reason = f"{place}: {error.msg}"
        cause: Exception = error
    except (Warning, OverflowError, RecursionError) as error:
        reason, cause = f": {str(error).lower()}", error
    raise ValueError(
        f"expected a search pattern, got {value!r}, which breaks{reason}\n"
        "Put a backslash before a character that is meant as itself"
    ) from cause


Pattern = Annotated[re.Pattern[str], PlainValidator(compiled)]


def literal_start(pattern: re.Pattern[str]) -> str:
    r"""Return a text with which every line that the pattern matches begins, or nothing where none is certain.

    >>> literal_start(re.compile(r"^Page \d+")), literal_start(re.compile("^Page|^Seite"))
    ('Page ', '')
    """
    match = None if "|" in pattern.pattern.replace(r"\|", "") else _LITERAL.match(pattern.pattern)
    if match is None or pattern.flags & (re.IGNORECASE | re.VERBOSE | re.MULTILINE):
        return ""
    units = re.findall(r"\\?.", match.group(1))
    if pattern.pattern[match.end() : match.end() + 1] in ("*", "+", "?", "{"):
        units.pop()  # the repetition belongs to the last character
    return "".join(unit[-1] for unit in units)
