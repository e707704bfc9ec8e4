"""How two sets of settings differ, key by key, in words: for the record of an adoption and the mail about it.

Runs where YAML may be read, in the worker or in a command.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from parsers.document import load
from parsers.errors import DocumentInvalid

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

#: Characters of a value that are shown.
SHOWN = 80


def difference(old: Mapping[str, Any], new: Mapping[str, Any]) -> list[str]:
    """Say what differs between the bodies of two snapshots, one sentence a key.

    A value that looks like a secret has no place in settings, so none is masked here.
    """
    before, after = _texts(old), _texts(new)
    lines = []
    for path in sorted(before.keys() | after.keys()):
        if path not in before:
            lines.append(f"{path}: added")
        elif path not in after:
            lines.append(f"{path}: removed")
        elif before[path] != after[path]:
            lines += _keys(path, before[path], after[path]) or [f"{path}: comments or order only"]
    return lines


def _texts(body: Mapping[str, Any]) -> dict[str, str]:
    files = [body["config"], *body.get("layouts", ()), *body.get("tables", ())]
    return {each["path"]: each["text"] for each in files}


def _keys(path: str, old: str, new: str) -> list[str]:
    try:
        before, after = (dict(_leaves(load(text, path, "").values, "")) for text in (old, new))
    except DocumentInvalid:  # a side table is no YAML
        return [f"{path}: changed"]
    return [
        f"{path}: {key}: {_shown(before.get(key))} -> {_shown(after.get(key))}"
        for key in sorted(before.keys() | after.keys())
        if before.get(key) != after.get(key)
    ]


def _leaves(value: Any, key: str) -> Iterator[tuple[str, str]]:
    if isinstance(value, dict):
        for name, inner in value.items():
            yield from _leaves(inner, f"{key}.{name}" if key else str(name))
    elif isinstance(value, list):
        for place, inner in enumerate(value, 1):
            yield from _leaves(inner, f"{key}[{place}]")
    else:
        yield key, str(value)


def _shown(value: str | None) -> str:
    if value is None:
        return "(absent)"
    return value if len(value) <= SHOWN else f"{value[: SHOWN - 1]}…"
