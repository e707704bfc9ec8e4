"""Whether the parts of a layout fit together: required fields, one source for each, units, constants, times.

Each check yields the place, what is wrong, and what to do. Nothing here looks at an export.
"""

from __future__ import annotations

from datetime import datetime
from typing import TYPE_CHECKING, TypeAlias

from parsers import fields
from parsers.cells import Grammar, Kind
from parsers.readings import ROLE_WORDS
from parsers.spelling import listed, suggestion

if TYPE_CHECKING:
    from collections.abc import Iterator

    from parsers.document import Loc
    from parsers.layout import Layout
    from parsers.source import Source

Finding: TypeAlias = "tuple[Loc, str, str]"

#: A moment whose parts are all different, to try the form of a time.
_TRIAL = datetime(2023, 11, 27, 13, 45, 58)  # noqa: DTZ001 (exports write local time)


def faults(layout: Layout) -> list[Finding]:
    """Return every contradiction of a layout."""
    return [
        finding
        for check in (_claims, _marks, _required, _one_source, _sources, _headings, _unfold, _labels)
        for finding in check(layout)
    ]


def _claims(layout: Layout) -> Iterator[Finding]:
    if not layout.claims.file and layout.claims.text is None:
        yield ("claims",), "expected 'file', 'text' or both, got neither", "Write for instance file: 'FL-*.csv'"


def _marks(layout: Layout) -> Iterator[Finding]:
    if layout.thousands == layout.decimal:
        yield ("thousands",), f"{layout.thousands!r} is the decimal mark as well", "Give each mark its own character"
    for key, mark in (("decimal", layout.decimal), ("thousands", layout.thousands)):
        if mark and mark == layout.separator == " ":
            yield (key,), "a blank parts the columns already", "Take it out"


def _required(layout: Layout) -> Iterator[Finding]:
    columns = layout.columns
    if columns.label is None and columns.sample is None and "sample" not in layout.heading:
        yield ("columns",), "expected a source for 'label' or 'sample', got none", "Map the column that names the vials"
    if layout.labels and columns.label is None:
        yield ("labels",), "label rules stand here, but no column is the label", "Map columns.label"
    unfolded = layout.unfold is not None and "analyte" in layout.unfold.pattern.groupindex
    said = bool(layout.labels) and all("analyte" in rule.words for rule in layout.labels)
    if columns.analyte is None and "analyte" not in layout.heading and not unfolded and not said:
        todo = "Map a column, a heading or a group, or write analyte: {constant: Zn}"
        yield ("columns",), "expected a source for 'analyte', got none", todo
    if columns.signal is None and layout.unfold is None:
        yield ("columns",), "expected a source for 'signal', got none", "Map the column of the readings, or use unfold"


def _one_source(layout: Layout) -> Iterator[Finding]:
    """Two sources of one field could disagree, and one would win in silence."""
    mapped = {field for field, _ in layout.columns.given()}
    unfolded = _unfolded(layout)
    captured = {word for rule in layout.labels for word in rule.words}
    for field in sorted(mapped & unfolded):
        yield ("columns", field), f"{field!r} comes from unfold as well", "Keep one source"
    for field in layout.heading:
        if field in mapped | unfolded | captured and field in fields.FROM_HEADING:
            yield ("heading", field), f"{field!r} has another source as well", "Keep one source"
    for number, rule in enumerate(layout.labels):
        for field in sorted(rule.words & (mapped | unfolded)):
            yield ("labels", number), f"{{{field}}} has a column as well", "Keep one source"
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
    for field, source in layout.columns.given():
        place = ("columns", field)
        if source.constant is not None and (source.names or source.optional or source.map):
            yield place, "a constant needs no 'from', 'optional' or 'map'", "Keep the constant or the column"
        if field in (*fields.VOLUMES, *fields.MASSES) and not source.unit:
            name = source.names[0] if source.names else ""
            todo = f"Write {field}: {{from: {name!r}, unit: mL}}" if name else "Add for instance unit: mL"
            yield place, "a volume without unit", todo
        if source.unit and field not in fields.QUANTITIES:
            yield (*place, "unit"), f"{field!r} has no unit", "Take it out"
        if source.map and field not in fields.TEXTS:
            yield (*place, "map"), f"{field!r} is no text, so words cannot be mapped", "Take it out"
        if field == "role":
            yield from _role_words(source)
        if field == "measured_at":
            yield from _time(source)
        elif source.format:
            yield (*place, "format"), f"{field!r} is no time", "Take it out"
        if source.constant is not None:
            yield from _constant(field, source.constant)


def _role_words(source: Source) -> Iterator[Finding]:
    for code, word in source.map.items():
        if word not in ROLE_WORDS:
            hint = suggestion(word, ROLE_WORDS).strip()
            yield ("columns", "role", "map", code), f"expected a role ({listed(ROLE_WORDS)}), got {word!r}", hint


def _time(source: Source) -> Iterator[Finding]:
    place = ("columns", "measured_at")
    if source.constant is not None:
        yield place, "a time cannot be the same for every row", "Map the column of the time"
    elif not source.format:
        yield place, "expected the form of the time under 'format', got none", "Write format: '%d.%m.%Y %H:%M:%S'"
    for form in source.format:
        try:
            understood = datetime.strptime(_TRIAL.strftime(form), form)  # noqa: DTZ007 (exports write local time)
        except ValueError:
            understood = None
        if understood is None or understood.date() != _TRIAL.date():
            what = f"expected a form with day, month and year, got {form!r}"
            yield (*place, "format"), what, "Use %d, %m, %Y (or %y), %H, %M, %S"


def _constant(field: str, constant: str) -> Iterator[Finding]:
    place, grammar = ("columns", field, "constant"), Grammar()
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
    for name, pattern in layout.heading.items():
        if pattern.groups != 1:
            what = f"expected one group in brackets around the value, got {pattern.groups} in {pattern.pattern!r}"
            yield ("heading", name), what, r"Write for instance '^Batch:\s*(.+)$'"
        if name in fields.ALL and name not in fields.FROM_HEADING:
            yield ("heading", name), f"{name!r} cannot be the same for every row", "Map its column"


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
    if {"signal_sd", "signal_rsd"} <= set(given):
        yield ("unfold", "fields"), "signal_sd and signal_rsd say the same", "Keep one source"


def _labels(layout: Layout) -> Iterator[Finding]:
    if layout.labels:
        if layout.columns.sample is None and "sample" not in layout.heading:
            yield from _sampleless_rules(layout)
    elif layout.document.values.get("unmatched"):
        yield ("unmatched",), "no label rules stand in this layout", "Take it out, or add labels"
    known = {field for field, _ in layout.columns.given()} & {"role", "added", "spike_volume", "level", "nominal"}
    if not layout.labels and not known:
        todo = "Add labels, or map role, added or spike_volume"
        yield ("columns",), "nothing says which vials are unspiked, spiked or standards", todo


def _sampleless_rules(layout: Layout) -> Iterator[Finding]:
    for number, rule in enumerate(layout.labels):
        if "sample" not in rule.words and rule.role in ("unspiked", "spiked"):
            what = f"the rule {rule.written!r} says {rule.role}, but not which sample"
            yield ("labels", number), what, "Use {sample} (or a group named sample), or map columns.sample"
