"""A YAML text as plain values with the line of every key, closed against YAML's surprises.

Every scalar loads as the text that was written (``no``, ``010``, ``1e5``, ``1:30``); a schema converts it later.
Repeated keys, anchors, aliases, tags, several documents, great depth and great size are faults. Nothing here opens a
file or knows what the keys mean.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeVar

from pydantic import BaseModel, ValidationError

from parsers import wording
from parsers.errors import DocumentFault, DocumentInvalid
from parsers.nodes import Builder, Loc, Value, dotted, sentence_of

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pydantic_core import ErrorDetails

__all__ = ["Document", "DocumentFault", "DocumentInvalid", "Loc", "Value", "load", "validate"]

Model = TypeVar("Model", bound=BaseModel)

#: Largest document in characters: far beyond any settings file that a person writes.
MOST_CHARACTERS = 1_000_000
#: What follows from a fault of the text itself.
UNUSABLE = "The file cannot be used like this."


@dataclass(frozen=True, slots=True)
class Document:
    """The values of a document and where they stand.

    Attributes
    ----------
    path
        The file as the reader knows it.
    values
        Nested dict, list and str; an empty value is ``''``.
    lines
        Line (from 1) of every key and list entry, by its path.
    """

    path: str
    values: dict[str, Value]
    lines: Mapping[Loc, int]

    def line(self, loc: Iterable[str | int]) -> int:
        """Return the line of a key path, or of its nearest known ancestor."""
        return self.lines.get(self.known(loc), 1)

    def known(self, loc: Iterable[str | int]) -> Loc:
        """Return a path without the parts that the document does not have."""
        place: Loc = ()
        for part in loc:
            if (*place, part) in self.lines:
                place = (*place, part)
        return place

    def only(self, keys: Iterable[str]) -> Document:
        """Return the same document with a selection of its first-level keys; lines stay what they are."""
        wanted = set(keys)
        return Document(self.path, {key: value for key, value in self.values.items() if key in wanted}, self.lines)

    def fault(self, loc: Loc, what: str, consequence: str, todo: str = "") -> DocumentFault:
        """Make a fault of this document: what is wrong, what follows, what to do."""
        parts = [sentence_of(what), consequence, sentence_of(todo)]
        return DocumentFault(self.path, self.line(loc), dotted(loc), " ".join(part for part in parts if part))


def load(text: str, path: str, consequence: str = UNUSABLE) -> Document:
    """Read a YAML text.

    Parameters
    ----------
    text
        The whole document.
    path
        How to name the file in faults.
    consequence
        The sentence that says what follows from a fault.

    Raises
    ------
    DocumentInvalid
        With every fault that can be seen at once; a syntax error ends the search.
    """
    builder = Builder(text, path, consequence)
    if len(text) > MOST_CHARACTERS:
        builder.fault(0, (), f"expected at most {MOST_CHARACTERS} characters, got {len(text)}", "Shorten it")
    else:
        builder.read()
    if not builder.faults and not isinstance(builder.root, dict):
        builder.fault(1, (), f"expected keys and values, got {wording.got(builder.root)}", "Write 'key: value' lines")
    if builder.faults or not isinstance(builder.root, dict):
        raise DocumentInvalid(tuple(builder.faults))
    return Document(path, builder.root, builder.lines)


def validate(document: Document, model: type[Model], consequence: str) -> Model:
    """Turn the values of a document into a schema's instance.

    Parameters
    ----------
    document
        What `load` returned, or a part of it.
    model
        A pydantic model. The text of a validator's ValueError is kept; a line break in it parts what is wrong from
        what to do.
    consequence
        The sentence that says what follows from a fault.

    Raises
    ------
    DocumentInvalid
        With every fault: unknown keys with a suggestion, missing keys, values of another kind.
    """
    try:
        return model.model_validate(document.values)
    except ValidationError as error:
        faults = _faults(document, error.errors(include_url=False), model, consequence)
        raise DocumentInvalid(faults) from error


def _faults(
    document: Document, errors: list[ErrorDetails], model: type[BaseModel], consequence: str
) -> tuple[DocumentFault, ...]:
    """Turn schema errors into faults; the branches of a union become one fault for each place."""
    places: dict[Loc, list[ErrorDetails]] = {}
    for error in errors:
        places.setdefault(_place(document, error), []).append(error)
    faults = []
    for place, here in places.items():
        wanted = [expected for error in here if (expected := wording.expectation(error))]
        if len(wanted) == len(here) and any(_is_below(other, place) for other in places):
            continue  # the value took another form of a union, whose own fault lies deeper
        if len(here) > 1 and len(wanted) == len(here):
            faults.append(document.fault(place, wording.either(wanted, here[0]["input"]), consequence))
            continue
        faults += [document.fault(place, what, consequence, todo) for what, todo in _distinct(here, model)]
    return tuple(faults)


def _is_below(one: Loc, other: Loc) -> bool:
    return len(one) > len(other) and one[: len(other)] == other


def _distinct(errors: list[ErrorDetails], model: type[BaseModel]) -> list[tuple[str, str]]:
    return list(dict.fromkeys(wording.explained(error, model) for error in errors))


def _place(document: Document, error: ErrorDetails) -> Loc:
    """Return where an error lies: names of union branches are no place, a missing key is one."""
    place = document.known(error["loc"])
    return (*place, error["loc"][-1]) if error["type"] == "missing" else place
