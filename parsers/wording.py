"""Schema errors in plain words: what was expected, what was found, which key was probably meant.

Nothing here validates, and nothing knows lines or files.
"""

from __future__ import annotations

import types
from typing import TYPE_CHECKING, Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel

from parsers.spelling import suggestion

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pydantic_core import ErrorDetails

#: What each kind of mismatch expected.
EXPECTED = {
    "string_type": "a text",
    "int_type": "a whole number",
    "int_parsing": "a whole number",
    "int_from_float": "a whole number",
    "float_type": "a number",
    "float_parsing": "a number",
    "finite_number": "a finite number",
    "bool_type": "true or false",
    "bool_parsing": "true or false",
    "list_type": "a list",
    "tuple_type": "a list",
    "set_type": "a list",
    "frozen_set_type": "a list",
    "dict_type": "keys and values",
    "mapping_type": "keys and values",
    "model_type": "keys and values",
    "model_attributes_type": "keys and values",
    "dataclass_type": "keys and values",
    "too_short": "at least {min_length} entries",
    "too_long": "at most {max_length} entries",
    "string_too_short": "at least {min_length} characters",
    "string_too_long": "at most {max_length} characters",
    "greater_than": "more than {gt}",
    "greater_than_equal": "at least {ge}",
    "less_than": "less than {lt}",
    "less_than_equal": "at most {le}",
}


def got(value: object) -> str:
    """Say what was found.

    >>> got("ten"), got(""), got([])
    ("'ten'", 'nothing', 'a list')
    """
    if isinstance(value, str):
        return repr(value) if value else "nothing"
    if isinstance(value, (list, tuple)):
        return "a list"
    if isinstance(value, dict):
        return "keys and values"
    return repr(value)


def expectation(error: ErrorDetails) -> str | None:
    """Return what a mismatch expected, or None where the error is of another kind."""
    context = error.get("ctx", {})
    if error["type"] in ("literal_error", "enum"):
        return f"one of {str(context['expected']).replace(' or ', ', ')}"
    wanted = EXPECTED.get(error["type"])
    written = {name: f"{value:g}" if isinstance(value, float) else value for name, value in context.items()}
    return None if wanted is None else wanted.format_map(written)


def explained(error: ErrorDetails, model: type[BaseModel]) -> tuple[str, str]:
    """Return what is wrong and what to do about it (empty where nothing is to be added).

    The message of a validator's own ValueError is kept; a line break in it parts the two.
    """
    kind = error["type"]
    key = str(error["loc"][-1]) if error["loc"] else ""
    if kind == "extra_forbidden":
        known = list(_keys_at(model, error["loc"][:-1]))
        hint = suggestion(key, known).strip()
        return f"unknown key {key!r}", hint or (f"Known here: {', '.join(sorted(known))}" if known else "Take it out")
    if kind == "missing":
        return f"the key {key!r} is missing", "Add it"
    if kind == "value_error":
        what, _, todo = str(error["ctx"]["error"]).partition("\n")
        return what, todo
    wanted = expectation(error)
    if wanted is None:
        return f"{error['msg']}, got {got(error['input'])}", ""
    hint = suggestion(error["input"], _words(wanted)).strip() if isinstance(error["input"], str) else ""
    return f"expected {wanted}, got {got(error['input'])}", hint or ("Write one of these" if _words(wanted) else "")


def either(wanted: list[str], value: object) -> str:
    """Say what was expected where several forms are allowed."""
    return f"expected {' or '.join(dict.fromkeys(wanted))}, got {got(value)}"


def _words(wanted: str) -> list[str]:
    return [word.strip("'") for word in wanted.removeprefix("one of ").split(", ")] if "'" in wanted else []


def _keys_at(model: type[BaseModel], loc: tuple[int | str, ...]) -> Iterator[str]:
    """Yield the keys that a schema knows at a place; a place in a list or a union leads through it."""
    annotations: list[Any] = [model]
    for part in loc:
        annotations = [below for annotation in annotations for below in _below(annotation, part)] or annotations
    for annotation in annotations:
        for schema in _schemas(annotation):
            for name, field in schema.model_fields.items():
                yield field.alias or name


def _below(annotation: Any, part: int | str) -> Iterator[Any]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        for name, field in annotation.model_fields.items():
            if part in (name, field.alias):
                yield field.annotation
        return
    origin, arguments = get_origin(annotation), get_args(annotation)
    if origin is Annotated:
        yield from _below(arguments[0], part)
    elif origin in (Union, types.UnionType):
        for argument in arguments:
            yield from _below(argument, part)
    elif origin is dict:
        yield arguments[1]
    elif origin in (list, tuple):
        yield arguments[0]


def _schemas(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    elif get_origin(annotation) in (Union, types.UnionType, Annotated):
        for argument in get_args(annotation):
            yield from _schemas(argument)
