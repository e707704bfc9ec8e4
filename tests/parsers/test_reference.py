"""The reference of the layout language is whole: each key is described, and stands in a layout that the tests run."""

from __future__ import annotations

import re
from pathlib import Path
from typing import TYPE_CHECKING, Any

import fuzzing
import pytest
from pydantic import BaseModel

from parsers import fields
from parsers.labels import LabelRule
from parsers.layout import (
    SETTINGS_KEYS,
    Blocks,
    Captured,
    Cells,
    Claims,
    Columns,
    Example,
    Layout,
    Marks,
    RowRule,
    Unfold,
)
from parsers.readings import ROLE_WORDS
from parsers.sidetable import Lookup
from parsers.source import Source, UnitPlace

if TYPE_CHECKING:
    from collections.abc import Iterator

README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")
REFERENCE = README[README.index("## Layouts") : README.index("## Mails")]
PARTS = (
    Layout, Claims, Columns, Unfold, Cells, Marks, Captured, Blocks, RowRule, Example, LabelRule, Lookup, Source,
    UnitPlace,
)  # fmt: skip
KEYS = sorted(
    {
        (part.__name__, field.alias or name)
        for part in PARTS
        for name, field in part.model_fields.items()
        if name not in (*SETTINGS_KEYS, "choices")
    }
)


def _written(part: Any) -> Iterator[tuple[str, str]]:
    """Yield the keys that a layout writes, each with the part that it belongs to."""
    if isinstance(part, BaseModel):
        for name in part.model_fields_set:
            yield type(part).__name__, type(part).model_fields[name].alias or name
            yield from _written(getattr(part, name))
    elif isinstance(part, dict):
        for value in part.values():
            yield from _written(value)
    elif isinstance(part, (list, tuple)):
        for value in part:
            yield from _written(value)


@pytest.fixture(scope="module")
def written() -> set[tuple[str, str]]:
    """Every key of every layout among the invented exports."""
    return {key for case in fuzzing.cases() for key in _written(case.layout)}


@pytest.mark.parametrize(("part", "key"), KEYS)
def test_every_key_is_described_and_run(written: set[tuple[str, str]], part: str, key: str) -> None:
    """A key stands in the README, and in the layout of an export that the tests read as expected."""
    assert re.search(rf"\b{key}\b", REFERENCE)
    assert (part, key) in written


@pytest.mark.parametrize("word", [*fields.ALL, *ROLE_WORDS, *fields.UNFOLD_GROUPS, *fields.UNFOLD_FIELDS])
def test_every_word_of_the_language_is_described(word: str) -> None:
    """Fields, roles and groups stand in the README."""
    assert re.search(rf"\b{word}\b", REFERENCE)
