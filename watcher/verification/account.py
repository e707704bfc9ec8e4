"""A record of verification as people read it: 80 columns, on a terminal and in the text beside the JSON."""

from __future__ import annotations

from itertools import groupby
from typing import TYPE_CHECKING, Any

from watcher.terminal import heading, lines

if TYPE_CHECKING:
    from collections.abc import Iterator

    from rich.console import Console

    Record = dict[str, Any]

_ROW = "{:<30} {:>14} {:>14} {:>6}  {:<7}"
#: Widest number in a row; longer ones stand in full in the record.
_WIDEST = 14
_SIGNIFICANT = 9


def show(out: Console, record: Record) -> None:
    """Print a record."""
    lines(out, _opening(record))
    heading(out, "Published and computed")
    lines(out, _legend(record))
    for (example, source), rows in groupby(record["values"], key=lambda one: (one["example"], one["source"])):
        heading(out, f"{example}: {source}")
        lines(out, [_ROW.format("", "published", "computed", "digits", "origin").rstrip()])
        for row in rows:
            lines(out, _rows(row))
    heading(out, "Known misprints")
    for misprint in record["misprints"]:
        lines(out, _of_misprint(misprint))
    heading(out, "Conclusion")
    lines(out, _conclusion(record))


def _opening(record: Record) -> Iterator[str]:
    program, where = record["program"], record["platform"]
    yield f"Verification of {program['name']} {program['version']} by published examples, {record['verified_at']}"
    yield ""
    yield f"computer   {where['computer']}: {where['system']}, {where['machine']}"
    yield f"python     {where['python']}, {where['double_precision_digits']} decimal digits"
    yield f"libraries  {', '.join(f'{name} {version}' for name, version in record['libraries'].items())}"
    yield f"code       {program['code_sha256']}"
    yield f"examples   {record['examples_sha256']}"
    yield f"result     {record['result_sha256']}"


def _legend(record: Record) -> Iterator[str]:
    yield "digits: -log10 of the relative difference. Long numbers are shortened here. Origin:"
    yield from (f"{word:<8} {meaning}" for word, meaning in record["origins"].items())


def _rows(row: Record) -> Iterator[str]:
    published = row["published"] if len(row["published"]) <= _WIDEST else _short(float(row["published"]), _SIGNIFICANT)
    computed = "none" if row["computed"] is None else _short(row["computed"], _places(row["published"]))
    yield _ROW.format(row["quantity"], published, computed, f"{row['digits']:.1f}", row["origin"]).rstrip()
    if not row["agrees"]:
        yield (
            f"  DISAGREES: published {row['published']}, computed {_full(row['computed'])}, "
            f"tolerance {row['tolerance']:.3g}"
        )


def _places(printed: str) -> int:
    """Two digits more than printed, so that rounding can be seen, within what a row holds."""
    printed_digits = len(printed.partition("e")[0].lstrip("-0.").replace(".", ""))
    return min(max(printed_digits + 2, 4), _SIGNIFICANT)


def _short(number: float, places: int) -> str:
    return f"{number:.{places}g}"


def _full(number: float | None) -> str:
    return "nothing" if number is None else f"{number:.15g}"


def _of_misprint(one: Record) -> Iterator[str]:
    yield f"{one['example']}: {one['quantity']} ({one['source']}, {one['origin']})"
    computed = "nothing" if one["computed"] is None else _short(one["computed"], 6)
    yield f"  misprint: printed {one['printed']}, correct {one['correct']}, computed {computed}"
    yield f"  {one['reason']}"
    if not one["agrees"]:
        yield f"  DISAGREES: computed {_full(one['computed'])}, tolerance {one['tolerance']:.3g}"


def _conclusion(record: Record) -> Iterator[str]:
    counts = record["counts"]
    wrong = counts["values_disagreeing"]
    yield (
        f"{counts['published']} published values and {counts['derived']} derived ones: "
        + ("all agree within their tolerance." if not wrong else f"{wrong} DISAGREE.")
    )
    reproduced = counts["misprints_disagreeing"]
    yield (
        f"{counts['misprints']} known misprints: "
        + ("the correct value each time." if not reproduced else f"{reproduced} DISAGREE with the correct value.")
    )
    for key, words in (
        ("fewest_digits", "Fewest digits (printed with few): {digits:.1f}"),
        ("nearest_to_tolerance", "Nearest to its tolerance: {share_of_tolerance:.0%} of it"),
    ):
        if (most := record[key]) and most["share_of_tolerance"] is not None:
            yield f"{words.format(**most)}, {most['example']}, {most['quantity']}."
    if not record["agrees"]:
        yield (
            "Do not report results computed on this machine: compare program, libraries and hashes with an earlier "
            "record, install the program again, and run prove once more."
        )
    yield (
        "This shows that the program computes on this machine as published. It validates no method and no sample of "
        "the laboratory."
    )
