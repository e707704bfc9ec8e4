"""Whether the parts of a layout fit together: required fields, one source for each, units, constants, times.

Each check yields the place, what is wrong, and what to do. Nothing here looks at an export.
"""

from __future__ import annotations

import re
from datetime import datetime
from typing import TYPE_CHECKING, TypeAlias

from parsers import fields
from parsers.cells import Grammar, Kind
from parsers.readings import ROLE_WORDS
from parsers.spelling import listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterator

    from parsers.document import Loc
    from parsers.layout import Blocks, Captured, Layout
    from parsers.source import Source

Finding: TypeAlias = "tuple[Loc, str, str]"

#: What to do about two sources of one field.
_PRECEDENCE = "Keep one source, or list both under columns in the order in which they count"
#: A moment whose parts are all different, to try the form of a time.
_TRIAL = datetime(2023, 11, 27, 13, 45, 58)  # noqa: DTZ001 (exports write local time)


def faults(layout: Layout) -> list[Finding]:
    """Return every contradiction of a layout."""
    found = [finding for check in (_claims, _marks, _form, _headings, _unfold) for finding in check(layout)]
    singles = layout.singles()
    for number, single in enumerate(singles):
        for check in (_required, _one_source, _sources, _labels):
            for place, what, todo in check(single):
                listed_there = len(singles) > 1 and place[0] == "columns"
                found.append((("columns", number, *place[1:]) if listed_there else place, what, todo))
    return list(dict.fromkeys(found))


def _form(layout: Layout) -> Iterator[Finding]:
    """Check how the table lies in the export."""
    if not layout.separator and not layout.widths:
        yield ("separator",), "the key 'separator' is missing", "Add it, or the widths of the columns"
    if layout.table == "pairs" and layout.widths:
        yield ("widths",), "lines of name and value are parted by a separator", "Write for instance separator: '='"
    if layout.separator and layout.widths:
        yield ("widths",), "separator says already where the columns end", "Keep one of the two"
    for number, line in enumerate(layout.repeat_right):
        if not 1 <= line <= layout.header_lines:
            what = f"expected a header line from 1 to {layout.header_lines}, got {line}"
            yield ("repeat_right", number), what, "Correct it, or header_lines"
    if layout.header == "none" and (layout.header_lines > 1 or layout.repeat_right or layout.unnamed):
        yield ("header",), "there is no header, but its lines are described", "Take out header_lines and repeat_right"
    for number, rule in enumerate(layout.rows):
        if not rule.where and rule.line is None and number < len(layout.rows) - 1:
            what = "a rule without condition takes every row, so the rules behind it never count"
            yield ("rows", number), what, "Add 'where' or 'line', or put it last"
    if layout.file_name is not None and not layout.file_name.groupindex:
        todo = "Write for instance '^(?P<sample>[A-Z]+-[0-9]+)'"
        yield ("file_name",), "the pattern has no named group, so nothing comes from the name", todo
    for key, blocks in _all_blocks(layout):
        if blocks.end is not None and blocks.end.pattern == blocks.begin.pattern:
            yield (*key, "end"), "the same pattern begins a block", "Take it out: a block ends where the next begins"


def _all_blocks(layout: Layout) -> Iterator[tuple[Loc, Blocks]]:
    key: Loc = ("blocks",)
    blocks = layout.blocks
    while blocks is not None:
        yield key, blocks
        key, blocks = (*key, "blocks"), blocks.blocks


def _claims(layout: Layout) -> Iterator[Finding]:
    if not layout.claims.file and layout.claims.text is None:
        yield ("claims",), "expected 'file', 'text' or both, got neither", "Write for instance file: 'FL-*.csv'"


def _marks(layout: Layout) -> Iterator[Finding]:
    if layout.thousands == layout.decimal:
        yield ("thousands",), f"{layout.thousands!r} is the decimal mark as well", "Give each mark its own character"
    for key, mark in (("decimal", layout.decimal), ("thousands", layout.thousands)):
        if mark and mark == layout.separator == " ":
            yield (key,), "a blank parts the columns already", "Take it out"


def _looked_up(layout: Layout) -> set[str]:
    return set().union(*(lookup.fields for lookup in layout.lookup))


def _required(layout: Layout) -> Iterator[Finding]:
    columns, headings = layout.columns, layout.headings
    elsewhere = headings | _looked_up(layout)
    if columns.label is None and columns.sample is None and not elsewhere & {"label", "sample"}:
        yield ("columns",), "expected a source for 'label' or 'sample', got none", "Map the column that names the vials"
    if layout.labels and columns.label is None and "label" not in headings:
        yield ("labels",), "label rules stand here, but no column is the label", "Map columns.label"
    unfolded = layout.unfold is not None and "analyte" in layout.unfold.pattern.groupindex
    said = bool(layout.labels) and all("analyte" in rule.words for rule in layout.labels)
    if columns.analyte is None and "analyte" not in elsewhere and not unfolded and not said:
        todo = "Map a column, a heading or a group, or write analyte: {constant: Zn}"
        yield ("columns",), "expected a source for 'analyte', got none", todo
    if columns.signal is None and layout.unfold is None and "signal" not in headings:
        yield ("columns",), "expected a source for 'signal', got none", "Map the column of the readings, or use unfold"


def _one_source(layout: Layout) -> Iterator[Finding]:
    """Two sources of one field could disagree, and one would win in silence."""
    given = dict(layout.columns.given())
    mapped = set(given)
    named = {field for field, source in given.items() for one in source.sources if one.group or one.heading}
    unfolded = _unfolded(layout)
    captured = {word for rule in layout.labels for word in rule.words}
    for field in sorted(mapped & unfolded):
        yield ("columns", field), f"{field!r} comes from unfold as well", "Keep one source"
    for field in layout.heading:
        if field in (mapped - named) | unfolded | captured and field in fields.FROM_BLOCK:
            yield ("heading", field), f"{field!r} has another source as well", _PRECEDENCE
    for number, rule in enumerate(layout.labels):
        for field in sorted(rule.words & ((mapped - named) | unfolded)):
            yield ("labels", number), f"{{{field}}} has a column as well", _PRECEDENCE
    columns = layout.columns
    statistics = [field for field in ("signal_sd", "signal_rsd") if field in mapped]
    if len(statistics) == 2:
        yield ("columns", "signal_rsd"), "signal_sd and signal_rsd say the same", "Keep one source"
    if columns.signal is not None and len(columns.signal.names) > 1:
        for field in [*statistics, *(["readings"] if columns.readings else [])]:
            what = f"{field!r} belongs to a mean, but signal maps {len(columns.signal.names)} readings"
            yield ("columns", field), what, "Map the readings or the mean with its statistics"


def _unfolded(layout: Layout) -> set[str]:
    if layout.unfold is None:
        return set()
    groups = set(layout.unfold.pattern.groupindex) & {"analyte", "channel"}
    return groups | (set(layout.unfold.fields.values()) or {"signal"})


def _sources(layout: Layout) -> Iterator[Finding]:
    for field, whole in layout.columns.given():
        for number, source in enumerate(whole.sources):
            place: Loc = ("columns", field, number) if whole.choices else ("columns", field)
            yield from _source(layout, field, source, place)


def _source(layout: Layout, field: str, source: Source, place: Loc) -> Iterator[Finding]:
    if source.choices:
        yield place, "a list of sources stands in a list of sources", "Write them as one list"
    if source.constant is not None and (source.in_columns or source.optional or source.map):
        yield place, "a constant needs no 'from', 'optional' or 'map'", "Keep the constant or the column"
    if field in (*fields.VOLUMES, *fields.MASSES) and not source.unit and not source.group and not source.heading:
        name = source.names[0] if source.names else ""
        todo = f"Write {field}: {{from: {name!r}, unit: mL}}" if name else "Add for instance unit: mL"
        yield place, "a volume without unit", todo
    if source.unit and field not in fields.QUANTITIES:
        yield (*place, "unit"), f"{field!r} has no unit", "Take it out"
    if source.unit and not isinstance(source.unit, str) and not source.in_columns:
        yield (*place, "unit"), "a unit of the export belongs to a column", "Write the unit itself"
    if source.map and field not in fields.TEXTS:
        yield (*place, "map"), f"{field!r} is no text, so words cannot be mapped", "Take it out"
    yield from _numbers(field, source, place)
    yield from _names(layout, field, source, place)
    if field == "role":
        yield from _role_words(source, place)
    if field == "measured_at":
        yield from _time(source, place)
    elif source.format:
        yield (*place, "format"), f"{field!r} is no time", "Take it out"
    if source.constant is not None:
        yield from _constant(field, source.constant, place)


def _numbers(field: str, source: Source, place: Loc) -> Iterator[Finding]:
    """Check what is said of how a number is written."""
    numeric = field in (*fields.NUMBERS, *fields.QUANTITIES, "predilution")
    if source.scale is not None and not numeric:
        yield (*place, "scale"), f"{field!r} is no number", "Take it out"
    if source.as_ != "factor" and field != "predilution":
        yield (*place, "as"), f"only a predilution is said as {source.as_}", "Take it out"
    if source.as_ == "ratio" and len(source.names) != 2:
        what = f"expected two columns for a ratio, got {len(source.names)}"
        yield place, what, "Write from: [volume taken, volume made up to]"


def _names(layout: Layout, field: str, source: Source, place: Loc) -> Iterator[Finding]:
    """Check the names of headings and groups that a source refers to."""
    if source.heading and source.heading not in layout.headings:
        hint = suggestion(source.heading, layout.headings).strip()
        yield (*place, "heading"), f"no heading is named {source.heading!r}", hint or "Add it under heading or blocks"
    words = {word for rule in layout.labels for word in rule.words}
    if source.group and source.group not in words:
        hint = suggestion(source.group, words).strip() or "Add it to a rule of labels"
        yield (*place, "group"), f"no label rule has a word {source.group!r}", hint
    if source.pattern is not None and source.pattern.groups > 1 and field not in source.pattern.groupindex:
        what = f"expected one group around what is meant, got {source.pattern.groups}"
        yield (*place, "pattern"), what, f"Name one of them: (?P<{field}>…)"


def _role_words(source: Source, place: Loc) -> Iterator[Finding]:
    for code, word in source.map.items():
        if word not in ROLE_WORDS:
            hint = suggestion(word, ROLE_WORDS).strip()
            yield (*place, "map", code), f"expected a role ({listed(ROLE_WORDS)}), got {word!r}", hint


def _time(source: Source, place: Loc) -> Iterator[Finding]:
    if source.constant is not None:
        yield place, "a time cannot be the same for every row", "Map the column of the time"
    elif not source.format:
        yield place, "expected the form of the time under 'format', got none", "Write format: '%d.%m.%Y %H:%M:%S'"
    for form in source.format:
        try:
            understood = datetime.strptime(_TRIAL.strftime(form), form)  # noqa: DTZ007 (exports write local time)
        except (ValueError, re.error):  # a code that stands twice breaks the pattern that Python makes of it
            understood = None
        if understood is None or understood.date() != _TRIAL.date():
            what = f"expected a form with day, month and year, got {form!r}"
            yield (*place, "format"), what, "Use %d, %m, %Y (or %y), %H, %M, %S"


def _constant(field: str, constant: str, place: Loc) -> Iterator[Finding]:
    place, grammar = (*place, "constant"), Grammar()
    if field in ("label", "signal"):
        yield place, f"{field!r} cannot be the same for every row", "Map its column"
    elif field in fields.NUMBERS or field in fields.QUANTITIES:
        if grammar.cell(constant).kind is not Kind.NUMBER:
            yield place, f"expected a number with decimal point, got {constant!r}", ""
    elif field == "predilution":
        if grammar.predilution(constant) is None:
            yield place, f"expected a predilution such as 10, 1 in 10 or 1+9, got {constant!r}", ""
    elif field == "role" and constant not in ROLE_WORDS:
        hint = suggestion(constant, ROLE_WORDS).strip()
        yield place, f"expected a role ({listed(ROLE_WORDS)}), got {constant!r}", hint
    elif not constant.strip():
        yield place, "expected a text, got nothing", ""


def _headings(layout: Layout) -> Iterator[Finding]:
    places: list[tuple[Loc, dict[str, Captured], tuple[str, ...]]] = [
        (("heading",), layout.heading, fields.FROM_HEADING)
    ]
    places += [((*key, "heading"), blocks.heading, fields.FROM_BLOCK) for key, blocks in _all_blocks(layout)]
    for key, headings, allowed in places:
        for name, captured in headings.items():
            pattern = captured.pattern
            if pattern.groups != 1:
                what = f"expected one group in brackets around the value, got {pattern.groups} in {pattern.pattern!r}"
                yield (*key, name), what, r"Write for instance '^Batch:\s*(.+)$'"
            if name == "measured_at":
                todo = "Give it another name and write columns: {measured_at: {heading: that name, format: …}}"
                yield (*key, name), "a time needs its form", todo
            elif name in fields.ALL and name not in allowed:
                yield (*key, name), f"{name!r} cannot be the same for every row", "Map its column"


def _unfold(layout: Layout) -> Iterator[Finding]:
    unfold = layout.unfold
    if unfold is None:
        return
    groups = set(unfold.pattern.groupindex)
    for group in sorted(groups - set(fields.UNFOLD_GROUPS)):
        hint = suggestion(group, fields.UNFOLD_GROUPS).strip() or f"Known: {', '.join(fields.UNFOLD_GROUPS)}"
        yield ("unfold", "pattern"), f"{group!r} is no group that a header can say", hint
    if "field" in groups and not unfold.fields:
        yield (
            ("unfold",),
            "the pattern has a group 'field', but no word of it is explained",
            "Add fields: {Mean: signal}",
        )
    if "field" not in groups and unfold.fields:
        yield (
            ("unfold", "fields"),
            "the pattern has no group 'field'",
            "Add (?P<field>…) to the pattern, or take fields out",
        )
    given = list(unfold.fields.values())
    if given and "signal" not in given:
        yield ("unfold", "fields"), "no word means signal", "Add the word of the readings, as in fields: {Mean: signal}"
    if unfold.nominal is not None and unfold.nominal.groups != 1:
        what = f"expected one group in brackets around the nominal value, got {unfold.nominal.groups}"
        yield ("unfold", "nominal"), what, r"Write for instance '^\[(.+)\]$'"
    if unfold.map and "analyte" not in groups:
        yield ("unfold", "map"), "the pattern has no group 'analyte', so no word is mapped", "Take map out"
    if {"signal_sd", "signal_rsd"} <= set(given):
        yield ("unfold", "fields"), "signal_sd and signal_rsd say the same", "Keep one source"


def _labels(layout: Layout) -> Iterator[Finding]:
    if layout.labels:
        if layout.columns.sample is None and "sample" not in layout.headings | _looked_up(layout):
            yield from _sampleless_rules(layout)
    elif layout.document.values.get("unmatched"):
        yield ("unmatched",), "no label rules stand in this layout", "Take it out, or add labels"
    said = {field for field, _ in layout.columns.given()} | layout.headings | _looked_up(layout)
    if layout.unfold is not None and (layout.unfold.nominal or "nominal" in layout.unfold.fields.values()):
        said.add("nominal")
    known = said & {"role", "added", "spike_volume", "level", "nominal"}
    if not layout.labels and not known:
        todo = "Add labels, or map role, added or spike_volume"
        yield ("columns",), "nothing says which vials are unspiked, spiked or standards", todo


def _sampleless_rules(layout: Layout) -> Iterator[Finding]:
    for number, rule in enumerate(layout.labels):
        if "sample" not in rule.words and rule.role in ("unspiked", "spiked"):
            what = f"the rule {rule.written!r} says {rule.role}, but not which sample"
            yield ("labels", number), what, "Use {sample} (or a group named sample), or map columns.sample"
