"""START HERE for drafting: one or several example exports become a commented layout that works at once.

    open_example     bytes → lines                          drafting.example
    find_structure   lines → separator, header, rows        drafting.structure
    find_columns     headers and cells → fields             drafting.mapping, drafting.wide
    find_labels      labels → rules                         drafting.naming
    find_marks       cells → decimal and thousands mark     drafting.numerals

What is uncertain is marked ``# unsure:``, what only a person knows ``# FILL IN:``. Where two readings are possible the
layout takes the one that ends in an error, never in a number that may be wrong. Pure: nothing here opens a file.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from parsers.drafting.beside import find_beside
from parsers.drafting.claiming import claim
from parsers.drafting.drawing import Drawing, scalar
from parsers.drafting.errors import DraftRefused
from parsers.drafting.example import USUAL, open_example
from parsers.drafting.fixed import find_fixed
from parsers.drafting.headers import take_apart
from parsers.drafting.lines import block_lines, by_name, header_line, odd_lines, row_rules, skips, until_line
from parsers.drafting.mapping import element_in, find_columns
from parsers.drafting.naming import Labels, find_labels
from parsers.drafting.numerals import find_marks, numberish
from parsers.drafting.oddities import find_oddities
from parsers.drafting.pairs import find_pairs
from parsers.drafting.patterns import literal
from parsers.drafting.plate import find_plate
from parsers.drafting.preamble import find_heading
from parsers.drafting.structure import find_structure
from parsers.drafting.turned import find_turned
from parsers.drafting.vocabulary import measure, role_of
from parsers.errors import DocumentInvalid
from parsers.layout import Layout, parse_layout
from parsers.spelling import fold, listed

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from parsers.drafting.beside import Beside
    from parsers.drafting.example import Example
    from parsers.drafting.mapping import Mapping
    from parsers.drafting.numerals import Marks
    from parsers.drafting.structure import Structure
    from parsers.labels import LabelRule

__all__ = ["Draft", "DraftRefused", "draft"]

#: How a draft is named in faults; it never has any when it is handed out.
DRAFTED = "the drafted layout"
_FINISHED = re.compile(r"\b(?:end|ende|fin|complete|completed|finished)\b", re.IGNORECASE)
#: Fields that a person reads in the layout beside the others, although the program does without them.
_UNREAD = "concentration"


@dataclass(frozen=True, slots=True)
class Draft:
    """A drafted layout.

    Attributes
    ----------
    text
        The YAML.
    layout
        The same, checked.
    unsure, fill_in
        What its comments say.
    """

    text: str
    layout: Layout
    unsure: tuple[str, ...]
    fill_in: tuple[str, ...]


def draft(examples: Sequence[tuple[str, bytes]]) -> Draft:
    """Draft a layout from examples of one kind.

    Parameters
    ----------
    examples
        Name and bytes of each export; the first decides the form, all of them the labels, numbers and odd cells.
        A text of which one column holds labels or positions of the first is a side table.

    Raises
    ------
    DraftRefused
        If their shape is beyond drafting, or they are not of one kind.
    """
    opened = [open_example(name, data) for name, data in examples]
    first = _structure(opened[0])
    keys = _keys(first) if len(opened) > 1 else {}
    sides = {example.name: side for example in opened[1:] if (side := find_beside(example, keys)) is not None}
    structures = [first, *(_structure(example) for example in opened[1:] if example.name not in sides)]
    for other in structures[1:]:
        if (other.separator, other.headers) != (first.separator, first.headers):
            sentence = f"its columns are not those of {first.example.name}. Draft each kind of export by itself."
            raise DraftRefused(other.example.name, sentence, other.header_at + 1)
    return _Draughtsman(structures, list(sides.values())).draw()


def _keys(structure: Structure) -> dict[str, list[str]]:
    """Return what a side table may say more of: the labels and the positions of an export, if they can be told."""
    try:
        mapping = find_columns(replace(structure, fill_down=[]))
    except DraftRefused:
        return {}
    columns = {name: mapping.at(name) for name in ("label", "position")}
    keys = {name: [fold(cell) for cell in structure.column(at)] for name, at in columns.items() if at is not None}
    return {"label": structure.names, **keys} if structure.names else keys


def _structure(example: Example) -> Structure:
    """Find the table, the more particular forms first."""
    found = find_pairs(example) or find_plate(example) or find_turned(example) or find_fixed(example)
    return found or find_structure(example)


class _Draughtsman:
    """Writes the layout, key by key."""

    def __init__(self, structures: Sequence[Structure], sides: Sequence[Beside]) -> None:
        self.structures = structures
        self.sides = sides
        self.first = structures[0]
        self.together = _joined(structures)
        self.mapping: Mapping = find_columns(self.together)
        self.marks: Marks = find_marks(self._numbers())
        self.drawing = Drawing()
        self.set_aside: list[str] = []
        self.left_out: list[str] = []

    def draw(self) -> Draft:
        """Write everything and check it.

        Raises
        ------
        DraftRefused
            If what was made out is no valid layout.
        """
        layout = self._drawn()
        self.left_out = [label for label in self.set_aside if any(_matches(rule, label) for rule in layout.labels)]
        if self.left_out:  # a rule of other labels would take them
            layout = self._drawn()
        return Draft(self.drawing.text, layout, tuple(self.drawing.unsure), tuple(self.drawing.fill_in))

    def _drawn(self) -> Layout:
        """Write every key; return the layout."""
        self.drawing = Drawing()
        self._top()
        self._lines()
        self._values()
        self._columns()
        self._lookup()
        self._labels()
        self._cells()
        try:
            return parse_layout(self.drawing.text, DRAFTED, {side.name: side.text for side in self.sides})
        except DocumentInvalid as invalid:
            sentence = f"its columns do not make a layout ({invalid.faults[0].sentence}) Write it by hand."
            raise DraftRefused(self.first.example.name, sentence) from invalid

    def _numbers(self) -> Iterable[str]:
        """Return the cells of every column that is read as numbers."""
        wide = self.mapping.wide.columns if self.mapping.wide else []
        texts = ("label", "role", "analyte", "channel", "measured_at", "batch", "analyst", "instrument", "comment",
                 "position", "predilution", "replicate")  # fmt: skip
        named = [at for name, columns in self.mapping.columns.items() if name not in texts for at in columns]
        cells = (cell for at in dict.fromkeys([*named, *wide]) for cell in self.together.column(at))
        return [bare for cell in cells if numberish(bare := cell.strip("[] "))]

    def _top(self) -> None:
        drawing, example = self.drawing, self.first.example
        names = ", ".join(structure.example.name for structure in self.structures)
        drawing.note(f"Drafted from {names}. Read it, and compare it with what `explain` makes of your exports.")
        drawing.add(f"layout: {scalar(_title(example.name))}")
        claims, doubt = claim(self.structures)
        drawing.doubt(doubt)
        drawing.add(f"claims: {claims}")
        encodings = list(dict.fromkeys(one for structure in self.structures for one in structure.example.encodings))
        drawing.doubt({structure.example.doubt for structure in self.structures})
        if tuple(encodings) != USUAL:
            drawing.add(f"encodings: [{', '.join(encodings)}]")

    def _lines(self) -> None:
        """Write how lines are told apart."""
        self._form()
        drawing, first = self.drawing, self.first
        if first.blocks is not None:
            drawing.add(f"blocks: {block_lines(first.blocks)}")
        filled = [scalar(first.headers[at]) for at in self.together.fill_down]
        if filled:
            drawing.add(f"fill_down: [{', '.join(filled)}]")
        rules = self._rows()
        if rules:
            drawing.add("rows:", *(f"  - {rule}" for rule in rules))
        left_out = list(dict.fromkeys(skip for structure in self.structures for skip in skips(structure)))
        if left_out:
            drawing.add(f"skip: [{', '.join(map(scalar, left_out))}]")
        for structure in self.structures:
            drawing.doubt(odd_lines(structure))
        self._end()

    def _form(self) -> None:
        """Write how cells are parted, and where their names stand."""
        drawing, first = self.drawing, self.first
        word = first.separator
        if first.widths:
            drawing.doubt("no separator: the columns are parted where every line is blank. Are names ever longer?")
            drawing.add(f"widths: [{', '.join(map(str, first.widths))}]")
        else:
            drawing.add(f"separator: {word if word in ('tab', 'blanks') else scalar(word)}")
        if first.headless:
            drawing.add("header: none")
        elif any(structure.header_at != 0 for structure in self.structures):
            drawing.add(f"header: {scalar(header_line(first))}")
        if first.table:
            drawing.add(f"table: {first.table}")
        if first.header_lines > 1:
            drawing.add(f"header_lines: {first.header_lines}")
            if first.repeat_right:
                drawing.add(f"repeat_right: [{', '.join(map(str, first.repeat_right))}]")

    def _end(self) -> None:
        """Write where the table ends, and the export."""
        drawing, first = self.drawing, self.first
        untils = [] if first.blocks else [found for one in self.structures if (found := until_line(one))]
        if untils:
            drawing.add(f"until: {scalar(untils[0])}")
        last = first.example.lines[-1] if first.example.lines else ""
        if first.tail is not None and _FINISHED.search(last) and re.match(r"\W*[A-Za-z]", last):
            drawing.doubt(
                "this looks like the line that ends every complete export; an export without it is not evaluated"
            )
            drawing.add(f"finished: {scalar('^' + literal(last.strip()))}")

    def _rows(self) -> list[str]:
        """Return the rules of rows that are no readings."""
        rules = list(dict.fromkeys(rule for structure in self.structures for rule in row_rules(structure)))
        for at, words in self.mapping.excluded.items():
            name = self.first.headers[at]
            self.drawing.doubt(f"{listed(words)} in {name!r} is taken for: this reading does not count")
            pattern = "|".join(map(literal, words))
            rules.append(f"{{where: {{{scalar(name)}: {scalar(f'^(?:{pattern})$')}}}, are: excluded}}")
        if self.mapping.nameless is not None:
            name = self.first.headers[self.mapping.nameless]
            self.drawing.doubt(
                "rows without a label: further readings of the vial above, or statistics? Left out. If they are "
                f"readings, write fill_down: [{scalar(name)}] instead of this rule"
            )
            rules.append(f"{{where: {{{scalar(name)}: '^$'}}, are: left out}}")
        if self.left_out:
            rules.append(self._left_out_rule())
        return rules

    def _left_out_rule(self) -> str:
        """Return the rule of rows whose labels are in doubt, although a rule of labels would take them.

        Raises
        ------
        DraftRefused
            If no column holds the labels, so that no such rule can be written.
        """
        at = self.mapping.at("label")
        if at is None or not by_name(self.first, at):
            sentence = (
                f"{listed(self.left_out[:4])}: it cannot be told what these labels mean. Write the layout by hand."
            )
            raise DraftRefused(self.first.example.name, sentence)
        pattern = "|".join(map(literal, self.left_out))
        return f"{{where: {{{scalar(self.first.headers[at])}: {scalar(f'^(?:{pattern})$')}}}, are: left out}}"

    def _values(self) -> None:
        self.drawing.doubt(self.marks.doubt)
        if self.marks.decimal != ".":
            self.drawing.add(f"decimal: '{self.marks.decimal}'")
        if self.marks.thousands:
            self.drawing.add("thousands: " + scalar(self.marks.thousands))

    def _columns(self) -> None:
        drawing, mapping = self.drawing, self.mapping
        wide = mapping.wide
        mapped = set(mapping.columns) | ({"analyte", "channel", "signal"} if wide else set())
        mapped |= set(self.first.blocks.heading) if self.first.blocks else set()
        heading = find_heading(self.first, mapped)
        if heading:
            drawing.add("heading:")
            drawing.add(*(f"  {name}: {scalar(pattern)}" for name, pattern in heading.items()))
        if self.first.file_name:
            drawing.doubt("the name of the file says what no line does; every part of it must keep its place")
            drawing.add(f"file_name: {scalar(self.first.file_name)}")
        drawing.add("columns:")
        lines = mapping.lines(self.together)
        if "role" in lines:
            self._unknown_types()
        for name, value in lines.items():
            drawing.doubt(mapping.doubts.get(name, ""), "  ")
            drawing.add(f"  {name}: {value}")
        if wide is None and "analyte" not in mapped and "analyte" not in heading:
            self._analyte()
        self._open_additions()
        self._not_read()
        if wide is not None:
            drawing.doubt(wide.doubts)
            drawing.add("unfold:", f"  pattern: {scalar(wide.pattern)}")
            if wide.fields:
                words = ", ".join(f"{scalar(word)}: {name}" for word, name in wide.fields.items())
                drawing.add(f"  fields: {{{words}}}")

    def _open_additions(self) -> None:
        """Ask about columns that may say what was added."""
        drawing, mapping = self.drawing, self.mapping
        for at in mapping.additions:
            name = scalar(mapping.headers[at].written)
            drawing.ask(
                f"{name} may say what was added or which vials are spiked. "
                f"Until one of these is taken, no sample has a role:",
                "  ",
            )
            if not all(map(numberish, filter(None, self.together.column(at)))):
                drawing.add(f"  # role: {{from: {name}, map: {{…: spiked, …: unspiked}}}}")
                continue
            drawing.add(f"  # added: {{from: {name}, unit: … mg/L}}", f"  # spike_volume: {{from: {name}, unit: … mL}}")

    def _not_read(self) -> None:
        """Say which columns are not read."""
        drawing, mapping = self.drawing, self.mapping
        left = [header.written for at, header in enumerate(mapping.headers) if self._is_left(at) and header.written]
        amounts = [name for name in left if measure(take_apart(name).unit) in ("volume", "mass")]
        if amounts:
            drawing.doubt(
                f"{listed(amounts)}: amounts that are not read. Map them (aliquot, made_up_to, mass, digest_volume) if "
                f"results depend on them",
                "  ",
            )
        for sentence in mapping.left:
            drawing.doubt(sentence, "  ")
        if left:
            drawing.note(
                f"not read: {', '.join(left[:20])}{f' and {len(left) - 20} more' if len(left) > 20 else ''}", "  "
            )

    def _is_left(self, at: int) -> bool:
        read = {one for name, columns in self.mapping.columns.items() if name != _UNREAD for one in columns}
        return at not in read and (self.mapping.wide is None or at not in self.mapping.wide.columns)

    def _unknown_types(self) -> None:
        at = self.mapping.at("role")
        words = dict.fromkeys(self.together.column(at)) if at is not None else ()
        unknown = [word for word in words if word and not role_of(word)]
        if unknown:
            self.drawing.doubt(
                f"{listed(unknown)}: what does this mean? Its rows are errors until it stands in the map", "  "
            )

    def _analyte(self) -> None:
        """Write the one analyte of the export, where something names it."""
        words = {one.file_words["analyte"] for one in self.structures if "analyte" in one.file_words}
        if words:
            pairs = ", ".join(f"{word}: {word.capitalize()}" for word in sorted(words))
            self.drawing.add(f"  analyte: {{heading: analyte, map: {{{pairs}}}}}")
            return
        above = self.first.example.lines[: self.first.header_at]
        found = {element for text in [*self.first.headers, *above] if (element := element_in(text))}
        if len(found) == 1:
            element = found.pop()
            self.drawing.doubt(f"{element} stands in the export, but not where it is said to be the analyte", "  ")
            self.drawing.add(f"  analyte: {{constant: {element}}}")
            return
        self.drawing.ask("the analyte, such as Zn: nothing in the export names it", "  ")
        self.drawing.add("  analyte: {constant: '?'}")

    def _lookup(self) -> None:
        """Write what the side tables say."""
        if not self.sides:
            return
        self.drawing.note("Side tables lie beside the layout, or the names say where.")
        self.drawing.add("lookup:")
        for side in self.sides:
            self.drawing.add(f"  - {side.line(set(self._texts(side.by)))}")

    def _texts(self, name: str) -> list[str]:
        """Return the label or the position of each row."""
        at = self.mapping.at(name)
        return [fold(cell) for cell in (self.together.column(at) if at is not None else self.together.names)]

    def _beside(self, name: str) -> list[str]:
        """Return what the side tables say of a field, row by row; empty where they say nothing."""
        found = [""] * len(self.together.rows)
        for side in self.sides:
            said = side.said.get(name, {})
            found = [one or said.get(key, "") for one, key in zip(found, self._texts(side.by), strict=True)]
        return found

    def _says(self, name: str) -> bool:
        """Tell whether a column or a side table says a field."""
        return name in self.mapping.columns or any(name in side.columns for side in self.sides)

    def _doses(self, cells: Sequence[str]) -> dict[str, set[bool]]:
        """Return for each label whether something was added, as far as columns and side tables say it."""
        found: dict[str, set[bool]] = {}
        for name in ("added", "spike_volume"):
            at = self.mapping.at(name)
            written = self.together.column(at) if at is not None else [""] * len(cells)
            for label, cell, beside in zip(cells, written, self._beside(name), strict=True):
                if cell or beside:
                    found.setdefault(fold(label), set()).add(any(digit in "123456789" for digit in cell or beside))
        return found

    def _labels(self) -> None:
        drawing, columns = self.drawing, self.mapping.columns
        if all(any(name in side.columns for side in self.sides) for name in ("sample", "role")):
            dosed = self._says("added") or self._says("spike_volume")
            self._open_questions(Labels(), additions=dosed, typed=True)
            return
        cells = self.together.names or self.together.column(columns["label"][0])
        additions = self._says("added") or self._says("spike_volume")
        labels = find_labels(
            cells,
            self._types(cells),
            self._signals(cells),
            additions=additions,
            nominals=self._says("nominal"),
            open_roles=bool(self.mapping.additions),
            doses=self._doses(cells),
        )
        self.set_aside = labels.set_aside
        if labels.rules:
            drawing.doubt(labels.doubts)
            drawing.add("labels:", *(f"  - {rule}" for rule in labels.rules))
        if labels.set_aside:
            drawing.doubt(
                f"{listed(labels.set_aside[:12])}: a sample, an addition, or neither? They give no reading until a "
                f"rule takes them"
            )
            drawing.add("unmatched: set aside")
        self._open_questions(labels, additions=additions, typed="spiked" in self._types(cells).values())

    def _open_questions(self, labels: Labels, *, additions: bool, typed: bool) -> None:
        drawing = self.drawing
        for ask in labels.asks:
            drawing.ask(ask)
        if self.mapping.additions:
            return
        if not (labels.spiked or additions or typed):
            drawing.doubt("no spiked vials were recognised, so every sample counts as unspiked")
            return
        if labels.levels:
            levels = ", ".join(f"{scalar(level)}: … mL" for level in labels.levels[:12])
            drawing.ask("what each level adds, and aliquot and vessel, here or in the settings:")
            drawing.add("# bench: {aliquot: … mL, made_up_to: … mL, levels: {" + levels + "}}")
        elif typed and not (additions or labels.spiked):
            drawing.ask("what was added to the spiked vials: a column (columns.added or columns.spike_volume)")
        else:
            drawing.ask("aliquot and vessel, here or in the settings, where no column says them:")
            drawing.add("# bench: {aliquot: … mL, made_up_to: … mL}")
        if not self._says("added"):
            drawing.ask("what the spike contains, here or in the settings:")
            drawing.add("# stocks: [{name: …, contains: {…: … mg/L}}]")

    def _types(self, cells: Sequence[str]) -> dict[str, str]:
        at = self.mapping.at("role")
        words = self.together.column(at) if at is not None else self._beside("role")
        return {fold(label): role_of(word) for label, word in zip(cells, words, strict=True) if role_of(word)}

    def _signals(self, cells: Sequence[str]) -> dict[str, float]:
        """Return the mean signal of each label, of the first analyte."""
        mapping = self.mapping
        columns = mapping.wide.columns[:1] if mapping.wide else mapping.columns["signal"]
        analyte = mapping.at("analyte")
        of = self.together.column(analyte) if analyte is not None else [""] * len(cells)
        found: dict[str, list[float]] = {}
        for row, label in enumerate(cells):
            values = [self.marks.grammar.value(self.together.rows[row][1][at]) for at in columns]
            if of[row] == of[0]:
                found.setdefault(fold(label), []).extend(value for value in values if value is not None)
        return {label: float(np.mean(values)) for label, values in found.items() if values}

    def _cells(self) -> None:
        mapping = self.mapping
        columns = mapping.wide.columns if mapping.wide else mapping.columns["signal"]
        odd = find_oddities((cell for at in columns for cell in self.together.column(at)), self.marks.grammar)
        self.drawing.doubt(odd.doubt())
        if mapping.wide and mapping.wide.zero_is_none:
            odd.zero = True
            self.drawing.doubt("a signal of 0 has no concentration beside it, so it is taken for: no peak was found")
        if self.first.table == "pairs":
            odd.glued = sorted({self.first.units[at] for at in columns if self.first.units[at]})
        if odd.line():
            self.drawing.add(f"cells: {odd.line()}")


def _matches(rule: LabelRule, label: str) -> bool:
    return bool(rule.regex.fullmatch(label) if rule.like is not None else rule.regex.search(label))


def _joined(structures: Sequence[Structure]) -> Structure:
    """Return the first structure with the rows of all of them."""
    first = structures[0]
    rows = [row for structure in structures for row in structure.rows]
    names = [name for structure in structures for name in structure.names]
    return replace(first, rows=rows, names=names)


def _title(name: str) -> str:
    stem = re.sub(r"[\W\d_]+", " ", name.rpartition(".")[0] or name).strip()
    return f"{stem} exports" if stem else "exports"
