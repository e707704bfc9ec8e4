"""The record of a verification as plain values: what was computed, by which program, on which machine.

Written as JSON as it stands, and shown from the same values. Writes nothing itself.
"""

from __future__ import annotations

import hashlib
import json
import platform
import sys
from importlib import metadata, resources
from math import isfinite
from typing import TYPE_CHECKING, Any

from watcher import VERSION
from watcher.verification.inputs import ORIGINS

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence
    from datetime import datetime
    from importlib.resources.abc import Traversable

    from watcher.verification.comparison import Comparison, Refutation

#: Libraries that a number passes through on its way from an export to a result.
LIBRARIES = ("numpy", "pandas", "scipy", "pint", "pydantic", "PyYAML")
PACKAGES = ("parsers", "rules", "watcher")


def record_of(
    comparisons: Sequence[Comparison], refutations: Sequence[Refutation], examples_sha256: str, when: datetime
) -> dict[str, Any]:
    """Return the record of one verification.

    Parameters
    ----------
    comparisons, refutations
        Every published value and every misprint with what was computed.
    examples_sha256
        Hash of the examples.
    when
        When they were computed.
    """
    values = [_value(one) for one in comparisons]
    misprints = [_misprint(one) for one in refutations]
    return {
        "format": 1,
        "verified_at": when.strftime("%Y-%m-%dT%H:%M:%SZ"),
        "agrees": all(one["agrees"] for one in (*values, *misprints)),
        "program": {"name": "spikewarden", "version": VERSION, "code_sha256": code_sha256()},
        "libraries": {name: metadata.version(name) for name in LIBRARIES},
        "platform": {
            "computer": platform.node(),
            "system": platform.platform(),
            "machine": platform.machine(),
            "python": f"{platform.python_implementation()} {platform.python_version()}",
            "double_precision_digits": sys.float_info.dig,
        },
        "examples_sha256": examples_sha256,
        "result_sha256": sha256_of({"values": values, "misprints": misprints}),
        "counts": _counts(values, misprints),
        "origins": dict(ORIGINS),
        "fewest_digits": _most(values, lambda one: -one["digits"]),
        "nearest_to_tolerance": _most(values, lambda one: one["share_of_tolerance"] or 0.0),
        "values": values,
        "misprints": misprints,
    }


def sha256_of(content: object) -> str:
    """Hash plain values, whatever the order of their keys."""
    text = json.dumps(content, sort_keys=True, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()


def code_sha256() -> str:
    """Hash of the program's own code: a version number does not show that a file was altered."""
    digest = hashlib.sha256()
    for package in PACKAGES:
        for name, file in sorted(_modules(resources.files(package), package)):
            # the ends of lines differ between systems and change nothing
            digest.update(f"{name}\n".encode() + file.read_bytes().replace(b"\r\n", b"\n"))
    return digest.hexdigest()


def _modules(folder: Traversable, name: str) -> Iterator[tuple[str, Traversable]]:
    for entry in folder.iterdir():
        path = f"{name}/{entry.name}"
        if entry.is_dir():
            yield from _modules(entry, path)
        elif entry.name.endswith(".py"):
            yield path, entry


def _value(one: Comparison) -> dict[str, Any]:
    value, computed = one.value, one.computed
    known = isfinite(computed)
    return {
        "example": value.example,
        "quantity": value.quantity,
        "published": value.printed,
        "computed": computed if known else None,
        "tolerance": value.tolerance,
        "digits": round(one.digits, 2),
        "share_of_tolerance": abs(computed - value.number) / value.tolerance if known else None,
        "agrees": one.agrees,
        "origin": value.origin,
        "source": value.source,
    }


def _misprint(one: Refutation) -> dict[str, Any]:
    correct = one.misprint.correct
    return {
        "example": correct.example,
        "quantity": correct.quantity,
        "printed": one.misprint.printed,
        "correct": correct.printed,
        "computed": one.computed if isfinite(one.computed) else None,
        "tolerance": correct.tolerance,
        "agrees": one.agrees,
        "origin": correct.origin,
        "source": correct.source,
        "reason": one.misprint.reason,
    }


def _counts(values: list[dict[str, Any]], misprints: list[dict[str, Any]]) -> dict[str, int]:
    derived = sum(one["origin"] == "derived" for one in values)
    return {
        "published": len(values) - derived,
        "derived": derived,
        "values_disagreeing": sum(not one["agrees"] for one in values),
        "misprints": len(misprints),
        "misprints_disagreeing": sum(not one["agrees"] for one in misprints),
    }


def _most(values: list[dict[str, Any]], key: Callable[[dict[str, Any]], float]) -> dict[str, Any] | None:
    found = max(values, key=key, default=None)
    if found is None:
        return None
    return {name: found[name] for name in ("example", "quantity", "digits", "share_of_tolerance")}
