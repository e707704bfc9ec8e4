"""The command `draft`: a commented layout from example exports, and how they are read with it."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

from rich.console import Console

from parsers.draft import Draft, DraftRefused, draft
from parsers.errors import ExportRefused
from parsers.read import read
from watcher import explanation_text
from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.explanation import ReadingAccount
from watcher.terminal import COLUMNS, console, heading, lines

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

#: What makes the account a part of the layout that is not read.
_COMMENT = "# "


def run(exports: tuple[Path, ...], output: Path | None) -> int:
    """Draft a layout; return the exit code.

    Parameters
    ----------
    exports
        Examples of one kind of export.
    output
        Where the layout goes; None prints it, with the account of the examples as comments behind it.
    """
    err = console(error=True)
    examples = []
    for path in exports:
        try:
            examples.append((path.name, path.read_bytes()))
        except OSError as error:
            lines(err, [f"{path}: {(error.strerror or str(error)).lower()}. Nothing was drafted. Correct the path."])
            return NOT_DONE
    try:
        drafted = draft(examples)
    except DraftRefused as refused:
        lines(err, [f"refused: {refused}"])
        return NOT_DONE
    if output is None:
        print(drafted.text, end="")  # noqa: T201 - it may be redirected into a file: nothing may wrap it
        text = io.StringIO()
        plain = Console(file=text, width=COLUMNS - len(_COMMENT), highlight=False, emoji=False, markup=False)
        lines(plain, ["", _open(drafted)])
        code = _account(plain, drafted, examples)
        print("\n".join(f"{_COMMENT}{line}".rstrip() for line in text.getvalue().splitlines()))  # noqa: T201
        return code
    try:
        with output.open("x", encoding="utf-8") as file:
            file.write(drafted.text)
    except FileExistsError:
        lines(err, [f"{output}: is there already, and is never overwritten. Nothing was written. Name another file."])
        return NOT_DONE
    except OSError as error:
        lines(err, [f"{output}: {(error.strerror or str(error)).lower()}. Nothing was written. Name another file."])
        return NOT_DONE
    out = console()
    lines(out, [f"Wrote {output}. {_open(drafted)}"])
    return _account(out, drafted, examples)


def _open(drafted: Draft) -> str:
    """Say what is left to do."""
    unsure, fill_in = len(drafted.unsure), len(drafted.fill_in)
    if not unsure and not fill_in:
        return "Nothing in it is marked as unsure. Read it all the same."
    return f"Read it: {unsure} marked '# unsure:', {fill_in} marked '# FILL IN:'."


def _account(out: Console, drafted: Draft, examples: Iterable[tuple[str, bytes]]) -> int:
    """Print what `explain` makes of the examples with the layout; return the exit code."""
    code = ALL_PASS
    for name, data in examples:
        try:
            readings = read(data, drafted.layout, name)
        except ExportRefused as refused:
            heading(out, f"{name}: refused with this layout as it stands")
            lines(out, [str(refused)])
            code = NOT_DONE
            continue
        problems = tuple(map(str, readings.problems))
        explanation_text.read(out, ReadingAccount(name, data, drafted.layout, readings, problems), with_lines=False)
    return code
