"""A layout being drafted: its YAML, part by part, with comments that say what is uncertain.

Nothing here looks at an export.
"""

from __future__ import annotations

import re
import textwrap
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

#: Width of comments, so that a draft fits a terminal.
WIDTH = 78
#: A text that YAML reads as it stands, wherever it stands.
_BARE = re.compile(r"[A-Za-zÄÖÜäöüßéèµµ][A-Za-z0-9ÄÖÜäöüßéèµµ_./-]*(?: [A-Za-z0-9ÄÖÜäöüßéèµµ_./-]+)*")


def scalar(text: str) -> str:
    """Write a text for YAML, in single quotes where it needs them.

    >>> scalar("Label"), scalar("Sample #"), scalar("it's")
    ('Label', "'Sample #'", "'it''s'")
    """
    return text if _BARE.fullmatch(text) else "'" + text.replace("'", "''") + "'"


def comment(mark: str, text: str, indent: str = "") -> list[str]:
    """Write a comment, wrapped; the mark (``unsure`` or ``FILL IN``) stands before its first line."""
    head = f"{indent}# {mark}: " if mark else f"{indent}# "
    folded = " ".join(text.split())
    return textwrap.wrap(
        folded,
        WIDTH,
        initial_indent=head,
        subsequent_indent=f"{indent}#   " if mark else f"{indent}# ",
        break_long_words=False,
        break_on_hyphens=False,
    )


@dataclass(slots=True)
class Drawing:
    """Lines of a layout, and how much of it is uncertain.

    Attributes
    ----------
    lines
        What is written so far.
    unsure, fill_in
        What each of the comments says.
    """

    lines: list[str] = field(default_factory=list)
    unsure: list[str] = field(default_factory=list)
    fill_in: list[str] = field(default_factory=list)

    def add(self, *lines: str) -> None:
        """Add lines as they are."""
        self.lines += lines

    def note(self, text: str, indent: str = "") -> None:
        """Add a comment that explains."""
        self.lines += comment("", text, indent)

    def doubt(self, texts: str | Iterable[str], indent: str = "") -> None:
        """Add what is uncertain; an empty text adds nothing."""
        for text in [texts] if isinstance(texts, str) else texts:
            if text:
                self.unsure.append(text)
                self.lines += comment("unsure", text, indent)

    def ask(self, text: str, indent: str = "") -> None:
        """Add what only a person knows."""
        self.fill_in.append(text)
        self.lines += comment("FILL IN", text, indent)

    @property
    def text(self) -> str:
        """The layout."""
        return "\n".join(self.lines) + "\n"
