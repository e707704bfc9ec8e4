"""Texts as patterns, as a person reads them.

Nothing here knows what a text means.
"""

from __future__ import annotations

import re


def literal(text: str) -> str:
    r"""Escape a text for a pattern, readable: no backslash where none is needed.

    >>> literal("Rep. 1")
    'Rep\\. 1'
    """
    return re.sub(r"\\([ \-#;,:=%&~'\"<>/@!])", r"\1", re.escape(text)).replace("\\\t", r"\t").replace("\t", r"\t")


def general(line: str) -> str:
    r"""Return a pattern of lines that differ in their numbers and their blanks only.

    >>> general("page 12   of 30")
    '^page \\d+ +of \\d+\\s*$'
    """
    text = line.rstrip()
    feed = "\\x0c?" if text.startswith("\x0c") else ""
    escaped = literal(text.lstrip("\x0c"))
    escaped = re.sub(r" {2,}", " +", escaped)
    return "^" + feed + re.sub(r"\d+", lambda _: r"\d+", escaped) + r"\s*$"
