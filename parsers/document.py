"""A YAML text as plain values with the line of every key, closed against YAML's surprises.

Every scalar loads as the text that was written (``no``, ``010``, ``1e5``, ``1:30``); a schema converts it later.
Repeated keys, anchors, aliases, tags, several documents, great depth and great size are faults. Nothing here opens a
file or knows what the keys mean.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, TypeAlias, TypeVar

import yaml
from pydantic import BaseModel, ValidationError

from parsers import traps, wording
from parsers.errors import DocumentFault, DocumentInvalid

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from pydantic_core import ErrorDetails

__all__ = ["Document", "DocumentFault", "DocumentInvalid", "Loc", "Value", "load", "validate"]

Value: TypeAlias = "str | list[Value] | dict[str, Value]"
Loc: TypeAlias = tuple[str | int, ...]
Model = TypeVar("Model", bound=BaseModel)

#: Largest document in characters, and deepest nesting: far beyond any settings file that a person writes.
MOST_CHARACTERS = 1_000_000
MOST_LEVELS = 20
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
        parts = [_sentence(what), consequence, _sentence(todo)]
        return DocumentFault(self.path, self.line(loc), dotted(loc), " ".join(part for part in parts if part))


def dotted(loc: Iterable[str | int]) -> str:
    """Write a key path as people do.

    >>> dotted(("labels", 0, "like"))
    'labels[1].like'
    """
    path = ""
    for part in loc:
        path += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if path else part
    return path


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
    builder = _Builder(text, path, consequence)
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


def _sentence(text: str) -> str:
    text = text.strip()
    return text if not text or text[-1] in ".?!" else f"{text}."


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
        if len(here) > 1 and len(wanted) == len(here):
            if any(len(other) > len(place) and other[: len(place)] == place for other in places):
                continue  # the value took another form of the union, whose own fault lies deeper
            what, todo = wording.either(wanted, here[0]["input"]), ""
            faults.append(document.fault(place, what, consequence, todo))
            continue
        faults += [document.fault(place, what, consequence, todo) for what, todo in _distinct(here, model)]
    return tuple(faults)


def _distinct(errors: list[ErrorDetails], model: type[BaseModel]) -> list[tuple[str, str]]:
    return list(dict.fromkeys(wording.explained(error, model) for error in errors))


def _place(document: Document, error: ErrorDetails) -> Loc:
    """Return where an error lies: names of union branches are no place, a missing key is one."""
    place = document.known(error["loc"])
    return (*place, error["loc"][-1]) if error["type"] == "missing" else place


@dataclass(slots=True)
class _Open:
    """A mapping or list that is being read."""

    value: list[Value] | dict[str, Value]
    loc: Loc
    flow: bool
    key: str | None = None
    ignored: bool = False  # the key now read stands a second time: its value goes nowhere


class _Stop(Exception):
    """Nothing sensible can be read after this fault."""


@dataclass(slots=True)
class _Builder:
    """Builds the values from the events of the YAML parser, which never recurses."""

    text: str
    path: str
    consequence: str
    root: Value = ""
    lines: dict[Loc, int] = field(default_factory=dict)
    faults: list[DocumentFault] = field(default_factory=list)
    stack: list[_Open] = field(default_factory=list)
    documents: int = 0

    def fault(self, line: int, loc: Loc, what: str, todo: str) -> None:
        sentence = f"{_sentence(what)} {self.consequence} {_sentence(todo)}"
        self.faults.append(DocumentFault(self.path, line, dotted(loc), sentence))

    def read(self) -> None:
        try:
            for event in yaml.parse(self.text, Loader=yaml.SafeLoader):
                self.take(event)
        except _Stop:
            return
        except yaml.reader.ReaderError as error:
            line = self.text.count("\n", 0, error.position) + 1
            self.fault(line, (), f"a character that no text file holds ({error.character!r})", "Take it out")
        except yaml.MarkedYAMLError as error:
            line, what, todo = traps.answer(self.text, error)
            self.fault(line, self.here(), what, todo)

    def here(self) -> Loc:
        """Return the path of the value that comes next."""
        if not self.stack:
            return ()
        top = self.stack[-1]
        if isinstance(top.value, list):
            return (*top.loc, len(top.value))
        return top.loc if top.key is None else (*top.loc, top.key)

    def take(self, event: yaml.Event) -> None:
        line = event.start_mark.line + 1 if event.start_mark else 0
        match event:
            case yaml.DocumentStartEvent():
                self.documents += 1
                if self.documents > 1:
                    self.fault(line, (), "a second document begins ('---')", "Keep one document in a file")
                    raise _Stop
            case yaml.AliasEvent() | yaml.ScalarEvent() | yaml.MappingStartEvent() | yaml.SequenceStartEvent():
                self.node(event, line)
            case yaml.MappingEndEvent() | yaml.SequenceEndEvent():
                self.stack.pop()

    def node(self, event: yaml.NodeEvent, line: int) -> None:
        is_key = bool(self.stack) and isinstance(self.stack[-1].value, dict) and self.stack[-1].key is None
        self.marks(event, line)
        if isinstance(event, yaml.ScalarEvent) and is_key:
            self.key(event.value, line)
        elif is_key:
            self.fault(line, self.here(), "expected a text as key", "Write 'key: value', and put keys in quotes")
            raise _Stop
        elif isinstance(event, yaml.ScalarEvent):
            self.scalar(event, line)
        elif isinstance(event, (yaml.MappingStartEvent, yaml.SequenceStartEvent)):
            self.open(event, line)
        else:
            self.place("", line)

    def marks(self, event: yaml.NodeEvent, line: int) -> None:
        """Refuse tags, anchors and aliases, which are nearly always values that were meant as text."""
        tag = getattr(event, "tag", None)
        what = {"!": "a tag", "*": "an alias", "&": "an anchor"}
        sign = "*" if isinstance(event, yaml.AliasEvent) else "!" if tag else "&" if event.anchor else ""
        if sign and event.start_mark is not None:
            value = traps.rest_of_value(self.text, event.start_mark.index)
            self.fault(line, self.here(), f"a value that begins with {sign} is {what[sign]}", traps.remedy(value))

    def key(self, key: str, line: int) -> None:
        top = self.stack[-1]
        if key in top.value:
            first = self.lines[(*top.loc, key)]
            self.fault(line, (*top.loc, key), f"the key stands here again, first in line {first}", "Keep one")
        top.ignored = key in top.value
        top.key = key
        self.lines.setdefault((*top.loc, key), line)

    def scalar(self, event: yaml.ScalarEvent, line: int) -> None:
        start, end = event.start_mark, event.end_mark
        if event.style is None and start is not None and end is not None:
            meant = traps.eaten_by_comment(self.text, start.index, end.index)
            if meant:
                todo = f"{traps.remedy(meant)}; or leave a blank behind # where a comment is meant"
                self.fault(line, self.here(), f"# begins a comment, so only {event.value!r} would be read", todo)
                if self.stack[-1].flow if self.stack else False:
                    raise _Stop  # the comment ate the closing bracket as well
        elif event.style in ("|", ">") and not event.value.strip():
            self.fault(
                line,
                self.here(),
                f"a lone {event.style} begins a text of several lines, and none follows",
                traps.remedy(event.style),
            )
        elif event.style == '"' and any(character < " " and character != "\t" for character in event.value):
            value = traps.rest_of_value(self.text, start.index if start else 0).strip('"')
            self.fault(line, self.here(), "a backslash in double quotes makes a control character", traps.remedy(value))
        self.place(event.value, line)

    def open(self, event: yaml.CollectionStartEvent, line: int) -> None:
        value: list[Value] | dict[str, Value] = {} if isinstance(event, yaml.MappingStartEvent) else []
        if len(self.stack) == MOST_LEVELS:
            self.fault(line, (), f"nested more than {MOST_LEVELS} levels deep", "Look for a bracket left open")
            raise _Stop
        loc = self.here()
        self.place(value, line)
        self.stack.append(_Open(value, loc, flow=bool(event.flow_style)))

    def place(self, value: Value, line: int) -> None:
        if not self.stack:
            self.root = value
            return
        top = self.stack[-1]
        if isinstance(top.value, list):
            self.lines.setdefault((*top.loc, len(top.value)), line)
            top.value.append(value)
            return
        if top.key is not None and not top.ignored:
            top.value[top.key] = value
        top.key = None
