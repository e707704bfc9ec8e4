"""A YAML text as nested texts, built event by event, with the line of every key and every fault on the way.

Nothing here knows a schema. What YAML makes of a value that was meant otherwise is explained by `parsers.traps`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, TypeAlias

import yaml

from parsers import traps
from parsers.errors import DocumentFault

if TYPE_CHECKING:
    from collections.abc import Iterable

Value: TypeAlias = "str | list[Value] | dict[str, Value]"
Loc: TypeAlias = tuple[str | int, ...]

#: Deepest nesting: far beyond any settings file that a person writes.
MOST_LEVELS = 20


def dotted(loc: Iterable[str | int]) -> str:
    """Write a key path as people do; entries of a list count from 1.

    >>> dotted(("labels", 0, "like"))
    'labels[1].like'
    """
    path = ""
    for part in loc:
        path += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if path else part
    return path


def sentence_of(text: str) -> str:
    """Close a sentence with a full stop where it has no end yet; nothing stays nothing."""
    text = text.strip()
    return text if not text or text[-1] in ".?!" else f"{text}."


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
class Builder:
    """Builds the values from the events of the YAML parser, which never recurses.

    Attributes
    ----------
    text, path, consequence
        The document, its name in faults, and the sentence that says what follows from a fault.
    root
        The values; ``''`` until something is read.
    lines
        Line (from 1) of every key and list entry, by its path.
    faults
        What is wrong so far.
    """

    text: str
    path: str
    consequence: str
    root: Value = ""
    lines: dict[Loc, int] = field(default_factory=dict)
    faults: list[DocumentFault] = field(default_factory=list)
    stack: list[_Open] = field(default_factory=list)
    documents: int = 0

    def fault(self, line: int, loc: Loc, what: str, todo: str) -> None:
        """Note a fault."""
        sentence = f"{sentence_of(what)} {self.consequence} {sentence_of(todo)}"
        self.faults.append(DocumentFault(self.path, line, dotted(loc), sentence))

    def read(self) -> None:
        """Read the text as far as it goes."""
        try:
            for event in yaml.parse(self.text, Loader=yaml.SafeLoader):
                self._take(event)
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

    def _take(self, event: yaml.Event) -> None:
        line = event.start_mark.line + 1 if event.start_mark else 0
        match event:
            case yaml.DocumentStartEvent():
                self.documents += 1
                if self.documents > 1:
                    self.fault(line, (), "a second document begins ('---')", "Keep one document in a file")
                    raise _Stop
            case yaml.AliasEvent() | yaml.ScalarEvent() | yaml.MappingStartEvent() | yaml.SequenceStartEvent():
                self._node(event, line)
            case yaml.MappingEndEvent() | yaml.SequenceEndEvent():
                self.stack.pop()

    def _node(self, event: yaml.NodeEvent, line: int) -> None:
        is_key = bool(self.stack) and isinstance(self.stack[-1].value, dict) and self.stack[-1].key is None
        self._marks(event, line)
        if isinstance(event, yaml.ScalarEvent) and is_key:
            self._key(event.value, line)
        elif is_key:
            self.fault(line, self.here(), "expected a text as key", "Write 'key: value', and put keys in quotes")
            raise _Stop
        elif isinstance(event, yaml.ScalarEvent):
            self._scalar(event, line)
        elif isinstance(event, (yaml.MappingStartEvent, yaml.SequenceStartEvent)):
            self._open(event, line)
        else:
            self._place("", line)

    def _marks(self, event: yaml.NodeEvent, line: int) -> None:
        """Refuse tags, anchors and aliases, which are nearly always values that were meant as text."""
        tag = getattr(event, "tag", None)
        what = {"!": "a tag", "*": "an alias", "&": "an anchor"}
        sign = "*" if isinstance(event, yaml.AliasEvent) else "!" if tag else "&" if event.anchor else ""
        if sign and event.start_mark is not None:
            value = traps.rest_of_value(self.text, event.start_mark.index)
            self.fault(line, self.here(), f"a value that begins with {sign} is {what[sign]}", traps.remedy(value))

    def _key(self, key: str, line: int) -> None:
        top = self.stack[-1]
        if key in top.value:
            first = self.lines[(*top.loc, key)]
            self.fault(line, (*top.loc, key), f"the key stands here again, first in line {first}", "Keep one")
        top.ignored = key in top.value
        top.key = key
        self.lines.setdefault((*top.loc, key), line)

    def _scalar(self, event: yaml.ScalarEvent, line: int) -> None:
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
        self._place(event.value, line)

    def _open(self, event: yaml.CollectionStartEvent, line: int) -> None:
        value: list[Value] | dict[str, Value] = {} if isinstance(event, yaml.MappingStartEvent) else []
        if len(self.stack) == MOST_LEVELS:
            self.fault(line, (), f"nested more than {MOST_LEVELS} levels deep", "Look for a bracket left open")
            raise _Stop
        loc = self.here()
        self._place(value, line)
        self.stack.append(_Open(value, loc, flow=bool(event.flow_style)))

    def _place(self, value: Value, line: int) -> None:
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
