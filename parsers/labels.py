"""What the label of a vial says: role, sample, level, nominal, by rules tried in order.

Distinct labels are matched once, with blanks folded; their raw form is kept by the caller. Nothing here knows the other
columns of a row: see `parsers.roles`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

from pydantic import BaseModel, ConfigDict, model_validator

from parsers.fields import FROM_LABEL
from parsers.patterns import Pattern
from parsers.readings import ROLE_WORDS, Role
from parsers.spelling import fold, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

_WORD = re.compile(r"\{([^{}]*)\}")


def like_pattern(like: str) -> re.Pattern[str]:
    r"""Compile the plain form of a label rule.

    A word in braces takes the shortest text without blanks at its ends that lets the whole label match, ``*`` takes
    anything, the rest stands for itself.

    >>> like_pattern("{sample} +{level}").fullmatch("SED-12 +A1").groupdict()
    {'sample': 'SED-12', 'level': 'A1'}

    Raises
    ------
    ValueError
        If a brace stands alone, a word is no field, or a word stands twice.
    """
    pattern, seen = "", set()
    for index, piece in enumerate(_WORD.split(fold(like))):
        if index % 2 == 0:
            if "{" in piece or "}" in piece:
                raise ValueError(f"a brace without its partner in {like!r}\nWrite a pattern instead")
            pattern += ".*".join(re.escape(part) for part in piece.split("*"))
            continue
        check_word(piece)
        if piece in seen:
            raise ValueError(f"the word {{{piece}}} stands twice in {like!r}\nWrite a pattern instead")
        seen.add(piece)
        pattern += rf"(?P<{piece}>\S(?:.*?\S)??)"
    return re.compile(pattern)


def check_word(word: str) -> None:
    """Refuse a word that is no field of a label."""
    if word not in FROM_LABEL:
        hint = suggestion(word, FROM_LABEL).strip()
        raise ValueError(f"{word!r} is no field that a label can say\n{hint or 'Known: ' + ', '.join(FROM_LABEL)}")


class LabelRule(BaseModel):
    """One entry of ``labels``: how a label looks and what it means."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    like: str | None = None
    pattern: Pattern | None = None
    role: Literal["unspiked", "spiked", "standard", "blank", "check_standard", "spiked_blank"] | None = None

    @model_validator(mode="after")
    def _one_form(self) -> LabelRule:
        if (self.like is None) == (self.pattern is None):
            raise ValueError("expected either 'like' or 'pattern'\nKeep one of the two")
        for word in self.regex.groupindex:
            check_word(word)
        return self

    @cached_property
    def regex(self) -> re.Pattern[str]:
        """The compiled rule."""
        return self.pattern if self.pattern is not None else like_pattern(self.like or "")

    @property
    def words(self) -> frozenset[str]:
        """The fields that the rule takes from a label."""
        return frozenset(self.regex.groupindex)

    @property
    def written(self) -> str:
        """The rule as it stands in the layout."""
        return self.like if self.like is not None else self.regex.pattern

    def match(self, label: str) -> dict[str, str] | None:
        """Return what a folded label says under this rule, None where it does not match."""
        found = self.regex.search(label) if self.like is None else self.regex.fullmatch(label)
        if found is None:
            return None
        return {word: fold(text) for word, text in found.groupdict().items() if text}


@dataclass(frozen=True, slots=True)
class Understood:
    """A label that a rule matched.

    Attributes
    ----------
    rule
        Index of the rule.
    role
        What the rule says, or None.
    said
        Field to text, as captured.
    """

    rule: int
    role: Role | None
    said: dict[str, str]


def understand(labels: Iterable[str], rules: Sequence[LabelRule]) -> list[Understood | None]:
    """Match each distinct label; None where no rule matches.

    Parameters
    ----------
    labels
        Distinct labels, in any spelling of blanks.
    rules
        The rules of the layout, the first match wins.
    """
    tried = [(number, rule.match, ROLE_WORDS.get(rule.role or "")) for number, rule in enumerate(rules)]
    results: list[Understood | None] = []
    for label in labels:
        folded = fold(label)
        result = None
        for number, match, role in tried:
            said = match(folded)
            if said is not None:
                result = Understood(number, role, said)
                break
        results.append(result)
    return results
