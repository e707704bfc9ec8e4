"""Settings compared key by key."""

from __future__ import annotations

import pytest

from watcher.difference import difference


def _body(config: str, **others: str) -> dict[str, object]:
    layouts = [{"path": path, "text": text} for path, text in others.items()]
    return {"config": {"path": "config.yaml", "text": config}, "layouts": layouts}


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("a: 1\n", "a: 1\n", []),
        ("a: 1\n", "a: 2\n", ["config.yaml: a: 1 -> 2"]),
        ("a: {b: x}\n", "a: {b: x, c: y}\n", ["config.yaml: a.c: (absent) -> y"]),
        ("a: [x, y]\n", "a: [x]\n", ["config.yaml: a[2]: y -> (absent)"]),
        ("a: 1\nb: 2\n", "b: 2 # two\na: 1\n", ["config.yaml: comments or order only"]),
    ],
)
def test_each_key_that_differs_is_named(old: str, new: str, expected: list[str]) -> None:
    """Where, what it was and what it is now; what only looks different is said to."""
    assert difference(_body(old), _body(new)) == expected


def test_files_that_come_and_go_are_named() -> None:
    """A layout that is new, gone, or no YAML is told as a whole."""
    old = _body("a: 1\n", one="x: 1\n", three="x;y\n: : :\n")
    new = _body("a: 1\n", two="x: 1\n", three="x;z\n: : :\n")
    assert difference(old, new) == ["one: removed", "three: changed", "two: added"]
