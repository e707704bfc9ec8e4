"""Why no layout can be drafted."""

from __future__ import annotations

from dataclasses import dataclass

from parsers.errors import ParsersError


@dataclass(eq=False)
class DraftRefused(ParsersError):
    """The shape of an example is beyond drafting.

    Attributes
    ----------
    name
        The example.
    sentence
        What was looked for, what was found, and what to do.
    line
        Line from 1, or None where the whole example is meant.
    """

    name: str
    sentence: str
    line: int | None = None

    def __str__(self) -> str:
        """Say where and what."""
        place = f"{self.name}, line {self.line}" if self.line else self.name
        return f"{place}: {self.sentence} No layout was drafted."
