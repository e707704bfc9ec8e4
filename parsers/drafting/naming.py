"""Label rules from the labels of an example: blanks, standards, check standards, spiked and unspiked samples.

A number in a label is a nominal concentration only where something proves it; a label that may be a spiked sample and
may be a name of its own is left out. Nothing here reads a number of the table but to prove a nominal.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from parsers.drafting.drawing import scalar
from parsers.drafting.vocabulary import (
    BLANK_LABEL,
    CHECK_LABEL,
    DOUBTFUL_LABEL,
    DUPLICATE_WORD,
    SERVICE_LABEL,
    SPIKE_WORD,
    STANDARD_LABEL,
    measure,
)
from parsers.spelling import fold, listed

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

#: Most shapes of sample names that become rules of their own.
MOST_SHAPES = 8
#: How far a check standard may lie off the standards' line and still prove that its number is its concentration.
NEAR = 0.2
_NUMBERED = re.compile(r"(?P<stem>.*?[^\d.,])(?P<number>\d+(?:[.,]\d+)?)(?P<unit>\s*[A-Za-zµμ%/]+)?")
_PLUS = re.compile(r"(?P<sample>.+?)(?P<sign>\s*\+\s*)(?P<word>\S.*)")
_SUFFIX = re.compile(r"(?P<sign>[\s_/+\-.]+)(?P<word>.+)")
_LAST = re.compile(r"(?P<sample>.+?)(?P<sign>[\s_/-]+)(?P<word>[A-Za-z]+)")
_PREFIX = re.compile(r"(?P<word>[A-Za-z]+)(?P<sign>[\s_/\-]+)")
_AMOUNT = re.compile(r"\d+(?:[.,]\d+)?\s*(?P<unit>[A-Za-zµμ/]+)")
_CODE = re.compile(r"(?P<letters>[A-Za-z]{0,6})\.?[ _-]?\d{1,2}")
_CODES = frozenset(
    {"a", "add", "s", "sp", "spiked", "addn", "spk", "spike", "aufst", "l", "lev", "level", "m", "ms", "sa"}
)
#: Labels that are standards as often as samples: a letter with a digit, a name with a decimal number, a mere number.
_UNSURE = re.compile(r"[A-Za-z][ _-]?\d|.*\d[.,]\d.*|\d+")
_RUN = re.compile(r"[A-Za-z]+|\d+|[^A-Za-z\d]+")


@dataclass(slots=True)
class Labels:
    """Rules for the labels of an example.

    Attributes
    ----------
    rules
        As a layout writes them, in order.
    set_aside
        Labels that no rule takes, on purpose.
    levels
        Words of levels whose amount a person must fill in.
    doubts, asks
        What is uncertain, and what only a person knows.
    spiked
        Whether spiked samples were recognised.
    """

    rules: list[str] = field(default_factory=list)
    set_aside: list[str] = field(default_factory=list)
    levels: list[str] = field(default_factory=list)
    doubts: list[str] = field(default_factory=list)
    asks: list[str] = field(default_factory=list)
    spiked: bool = False

    def add(self, rule: str) -> None:
        """Add a rule once."""
        if rule not in self.rules:
            self.rules.append(rule)


def find_labels(
    labels: Sequence[str],
    types: Mapping[str, str],
    signals: Mapping[str, float],
    *,
    additions: bool,
    nominals: bool,
    open_roles: bool = False,
    doses: Mapping[str, set[bool]] | None = None,
) -> Labels:
    """Cluster labels into rules.

    Parameters
    ----------
    labels
        The labels of all rows.
    types
        Label to the role that a type column says; empty without such a column.
    signals
        Label to the mean signal of one analyte.
    additions, nominals
        Whether columns say what was added, and the nominal concentrations.
    open_roles
        Whether a column may say what was added that cannot be read yet: then no sample is called unspiked.
    doses
        Label to whether something was added, in each of its rows, where a column says so.
    """
    distinct = [label for label in dict.fromkeys(map(fold, labels)) if label]
    return _Clusters(
        distinct, types, signals, doses or {}, additions=additions or open_roles, nominals=nominals,
        open_roles=open_roles,
    ).labels()  # fmt: skip


@dataclass(slots=True)
class _Clusters:
    distinct: list[str]
    types: Mapping[str, str]
    signals: Mapping[str, float]
    doses: Mapping[str, set[bool]]
    additions: bool
    nominals: bool
    open_roles: bool
    found: Labels = field(default_factory=Labels)
    spiked_names: set[str] = field(default_factory=set)
    bases: list[str] = field(default_factory=list)

    def labels(self) -> Labels:
        kinds = {label: self._kind(label) for label in self.distinct}
        groups = {kind: [label for label in self.distinct if kinds[label] == kind] for kind in set(kinds.values())}
        self._blanks(groups.get("blank", []))
        standards = self._numbered(groups.get("standard", []), "standard", {})
        self._numbered(groups.get("check_standard", []), "check_standard", standards)
        self._samples(groups.get("sample", []))
        self.found.set_aside += groups.get("service", [])
        if self.types and not self.found.set_aside:
            self.found.rules = [rule for rule in self.found.rules if "{" in rule[1:] or "(?P<" in rule]
        if not self.open_roles and (self.types or self.additions) and self.found.rules == ["{like: '{sample}'}"]:
            self.found.rules.clear()
        return self.found

    def _kind(self, label: str) -> str:
        typed = self.types.get(label)
        if typed:
            return "sample" if typed in ("unspiked", "spiked") else typed
        if SERVICE_LABEL.search(label) or (DOUBTFUL_LABEL.search(label) and not BLANK_LABEL.search(label)):
            return "service"
        for kind, pattern in (("blank", BLANK_LABEL), ("check_standard", CHECK_LABEL), ("standard", STANDARD_LABEL)):
            if pattern.search(label):
                return kind
        return "sample"

    def _role(self, role: str) -> str:
        return "" if self.types else f", role: {role}"

    def _blanks(self, labels: list[str]) -> None:
        for label in labels:
            if "+" in label or any(map(SPIKE_WORD.match, re.split(r"[\s_/-]+", label))):
                self.found.add(f"{{like: {scalar(label)}, role: spiked_blank}}")
        for label in labels:
            self.found.add(f"{{pattern: {scalar(f'^{_shape(label, literal=True)}$')}{self._role('blank')}}}")

    def _numbered(self, labels: list[str], role: str, proved: dict[str, float]) -> dict[str, float]:
        """Write the rules of standards or check standards; return the nominals that are certain."""
        families: dict[tuple[str, bool], list[tuple[str, str]]] = {}
        for label in labels:
            match = _NUMBERED.fullmatch(label)
            unit = (match["unit"] or "").strip() if match else ""
            if match is None or (unit and measure(unit) != "concentration"):
                self.found.add(f"{{pattern: {scalar(f'^{_shape(label, literal=True)}$')}{self._role(role)}}}")
                self._ask_nominal(role)
                continue
            families.setdefault((match["stem"], bool(unit)), []).append((label, match["number"]))
        nominals: dict[str, float] = {}
        for (stem, with_unit), members in families.items():
            values = {label: float(number.replace(",", ".")) for label, number in members}
            if self.nominals:
                self._without_nominal(members, role)
            elif with_unit or _graded([number for _, number in members]) or self._on_line(values, proved):
                self.found.add(f"{{like: {scalar(stem + '{nominal}')}{self._role(role)}}}")
                nominals |= {} if with_unit else values
            else:
                self._without_nominal(members, role)
                self.found.doubts.append(
                    f"{listed(label for label, _ in members[:4])}: concentrations or mere numbers? Nothing here proves "
                    f"it, so their nominal is not taken. Write {{like: {scalar(stem + '{nominal}')}, role: {role}}} if "
                    f"they are concentrations"
                )
        return nominals

    def _without_nominal(self, members: list[tuple[str, str]], role: str) -> None:
        for label, _ in members:
            self.found.add(f"{{pattern: {scalar(f'^{_shape(label, literal=True)}$')}{self._role(role)}}}")
        self._ask_nominal(role)

    def _ask_nominal(self, role: str) -> None:
        if not self.nominals:
            ask = (
                f"the nominal concentration of every {role.replace('_', ' ')}, by {{nominal}} in its label or a column"
            )
            if ask not in self.found.asks:
                self.found.asks.append(ask)

    def _on_line(self, values: Mapping[str, float], proved: Mapping[str, float]) -> bool:
        """Tell whether the numbers lie on the line through standards whose nominal is certain."""
        known = [(nominal, self.signals[label]) for label, nominal in proved.items() if label in self.signals]
        if len({nominal for nominal, _ in known}) < 2 or not all(label in self.signals for label in values):
            return False
        nominals, measured = np.array(known).T
        slope, intercept = np.polyfit(nominals, measured, 1)
        if slope == 0:
            return False
        return all(
            value > 0 and abs((self.signals[label] - intercept) / slope - value) < NEAR * value
            for label, value in values.items()
        )

    def _samples(self, labels: list[str]) -> None:
        among = set(labels)
        names = [label for label in labels if not self._is_spiked(label, among)]
        names = names or self.bases  # of a spiked vial alone: the unspiked one has the name before the sign
        by_column = bool(self.types) or self.additions
        if not self.types:
            unsure = [name for name in names if self._is_unsure(name)]
            names = [name for name in names if name not in unsure]
            self.found.set_aside += unsure
        role = "" if by_column else ", role: unspiked"
        shapes = list(dict.fromkeys(_shape(name) for name in names))
        if by_column and not self.found.set_aside:
            self.found.add("{like: '{sample}'}")
        elif len(shapes) <= MOST_SHAPES:
            for shape in shapes:
                self.found.add(f"{{pattern: {scalar(f'^(?P<sample>{shape})$')}{role}}}")
        else:
            self.found.add(f"{{like: '{{sample}}'{role}}}")
            self.found.doubts.append("sample names have many shapes, so every label that is left counts as a sample")

    def _is_unsure(self, name: str) -> bool:
        """Tell whether a name may be no sample: by its look, or because no row of it is without an addition."""
        doses = self.doses.get(name, set())
        if name in self.spiked_names or len(doses) == 2:
            return False
        return doses == {True} or _UNSURE.fullmatch(name) is not None

    def _is_spiked(self, label: str, among: set[str]) -> bool:
        """Write the rule of a label that is another one with an addition; tell whether it is dealt with."""
        parted = [at for at in range(1, len(label)) if not label[at].isalnum()]
        base = next((label[:at] for at in reversed(parted) if label[:at] in among), "")
        plus = _PLUS.fullmatch(label)
        if base:
            match = _SUFFIX.fullmatch(label[len(base) :])
            if match is not None:
                dealt_with = self._suffix(label, match["sign"], match["word"])
                if dealt_with and label not in self.found.set_aside:
                    self.spiked_names.add(base)
                return dealt_with
        if plus is not None:
            self.bases.append(plus["sample"])
            return self._suffix(label, plus["sign"], plus["word"])
        last = _LAST.fullmatch(label)
        if last is not None and SPIKE_WORD.match(last["word"]):
            return self._suffix(label, last["sign"], last["word"])
        prefix = _PREFIX.match(label)
        if prefix is not None and SPIKE_WORD.match(prefix["word"]):
            self._spiked(f"^(?P<level>{prefix['word']}){_literal(prefix['sign'])}(?P<sample>.+)$", prefix["word"])
            self.spiked_names.add(label[prefix.end() :])
            return True
        owner = next((label[at + 1 :] for at in parted if label[at + 1 :] in among), "")
        if owner:
            self.found.set_aside.append(label)
            return True
        return False

    def _suffix(self, label: str, sign: str, word: str) -> bool:
        """Write the rule of a label's ending; tell whether the label is dealt with."""
        if DUPLICATE_WORD.match(word) and "+" not in sign:
            return False
        amount = _AMOUNT.fullmatch(word)
        if amount is not None and measure(amount["unit"]) in ("volume", "concentration"):
            if "+" not in sign:
                self.found.set_aside.append(label)
            else:
                self._added(sign, "spike_volume" if measure(amount["unit"]) == "volume" else "added")
            return True
        code = _CODE.fullmatch(word)
        known = code is not None and code["letters"].casefold() in _CODES
        if "+" in sign:
            self._added(sign, "level")
            self._level(word)
        elif known or SPIKE_WORD.match(word):
            general = re.sub(r"\d+", lambda _: r"\d+", _literal(word))
            self._spiked(f"^(?P<sample>.+?){_literal(sign)}(?P<level>{general})$", word)
        else:
            self.found.set_aside.append(label)
        return True

    def _added(self, sign: str, word: str) -> None:
        """Write the rule of an addition behind a plus sign."""
        self.found.spiked = True
        if self.additions:
            self.found.add("{like: '{sample}" + _gap(sign) + "*'}")
        else:
            self.found.add("{like: '{sample}" + _gap(sign) + "{" + word + "}', role: spiked}")

    def _spiked(self, pattern: str, level: str) -> None:
        self.found.spiked = True
        if self.additions:
            self.found.add(f"{{pattern: {scalar(pattern.replace('?P<level>', '?:'))}}}")
            return
        self.found.add(f"{{pattern: {scalar(pattern)}, role: spiked}}")
        self._level(level)

    def _level(self, word: str) -> None:
        if word not in self.found.levels and not self.additions:
            self.found.levels.append(word)


def _gap(sign: str) -> str:
    """Write the sign between a name and its addition as the label has it."""
    before = " " if sign[:1].isspace() else ""
    after = " " if len(sign) > 1 and sign[-1:].isspace() and sign.strip() else ""
    return f"{before}{sign.strip()}{after}"


def _graded(numbers: Sequence[str]) -> bool:
    """Tell whether numbers in labels are concentrations and no mere counting: one has a decimal mark, or gaps show."""
    if any("." in number or "," in number for number in numbers):
        return True
    values = sorted({int(number) for number in numbers})
    return len(values) >= 3 and values[-1] - values[0] >= 2 * len(values) - 1


def _literal(text: str) -> str:
    return re.escape(text).replace(r"\ ", " ").replace(r"\-", "-")


def _shape(label: str, *, literal: bool = False) -> str:
    r"""Return a pattern of labels that look alike: numbers open, and the first letters too unless they are a word.

    >>> _shape("SED-12"), _shape("BLK 1", literal=True), _shape("Q17 dup")
    ('[A-Z]+-\\d+', 'BLK \\d+', '[A-Z]+\\d+ dup')
    """
    parts = []
    for index, run in enumerate(_RUN.findall(label)):
        if run.isdigit() and run.isascii():
            parts.append(r"\d+")
        elif index == 0 and not literal and run.isascii() and run.isalpha():
            parts.append("[A-Z]+" if run.isupper() else "[A-Za-z]+")
        elif len(run) == 1 and run.isascii() and run.isupper():
            parts.append("[A-Z]")
        else:
            parts.append(_literal(run))
    return "".join(parts)
