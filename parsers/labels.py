"""What the label of a vial says: role, sample, level, nominal, by rules tried in order.

Distinct labels are matched once, with blanks folded; their raw form is kept by the caller. Nothing here knows the other
columns of a row: see `parsers.roles`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np
from pydantic import BaseModel, ConfigDict, model_validator

from parsers.fields import FROM_LABEL
from parsers.patterns import Pattern  # noqa: TC001 (pydantic reads annotations)
from parsers.readings import ROLE_WORDS, Texts
from parsers.spelling import fold, renamed, suggestion

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

#: Labels matched at once: so few matches live at a time that the garbage collector has no reason to start.
_AT_ONCE = 500
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
        pattern += rf"(?P<{piece}>\S|\S.*?\S)"
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


@dataclass(frozen=True, slots=True)
class Understanding:
    """What distinct labels say.

    Attributes
    ----------
    rule
        int32[labels], index of the rule that matched, -1 where none did.
    role
        int8[labels], code of the role that the rule says, -1 where it says none.
    said
        Field to one text for each label, absent where it says nothing.
    """

    rule: NDArray[np.int32]
    role: NDArray[np.int8]
    said: dict[str, Texts]


def understand(labels: Sequence[str], rules: Sequence[LabelRule]) -> Understanding:
    """Match each distinct label; the first rule that matches wins.

    Parameters
    ----------
    labels
        Distinct labels, blanks folded.
    rules
        The rules of the layout.
    """
    matched = [-1] * len(labels)
    said: dict[str, list[str | None]] = {word: [None] * len(labels) for rule in rules for word in rule.words}
    for begin in range(0, len(labels), _AT_ONCE):
        _match(labels[begin : begin + _AT_ONCE], begin, rules, matched, said)
    roles = [*(ROLE_WORDS.get(rule.role or "", -1) for rule in rules), -1]  # the index -1 of no rule picks the last one
    role = np.array(roles, dtype=np.int8)[matched]
    return Understanding(np.array(matched, dtype=np.int32), role, {word: _trimmed(said[word]) for word in said})


def _match(
    labels: Sequence[str], begin: int, rules: Sequence[LabelRule], matched: list[int], said: dict[str, list[str | None]]
) -> None:
    """Note which rule each label matches and what it says, from the index `begin` on."""
    places: Sequence[int] = range(begin, begin + len(labels))
    for number, rule in enumerate(rules):
        found = list(map(rule.regex.fullmatch if rule.like is not None else rule.regex.search, labels))
        if not any(found):
            continue
        hits = [(at, match) for at, match in zip(places, found, strict=True) if match]
        for at, _ in hits:
            matched[at] = number
        for word in rule.words:
            column = said[word]
            for at, hit in hits:
                column[at] = hit[word]
        places = [at for at, match in zip(places, found, strict=True) if not match]
        labels = [label for label, match in zip(labels, found, strict=True) if not match]


def _trimmed(column: list[str | None]) -> Texts:
    texts = Texts.of(column)
    return renamed(texts, [name.strip() or None for name in texts.names])
