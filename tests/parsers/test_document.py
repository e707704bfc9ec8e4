"""A YAML text loads as the texts that were written, with lines, or with every fault at once."""

from __future__ import annotations

from typing import Annotated, Literal

import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st
from pydantic import AfterValidator, BaseModel, ConfigDict, Field

from parsers.document import DocumentFault, DocumentInvalid, load, validate

CONSEQUENCE = "The settings stay as they were."
HINT = "Did you mean 'fixed'?"


def faults_of(text: str) -> list[str]:
    """Return every fault of a text, as people see it."""
    with pytest.raises(DocumentInvalid) as invalid:
        load(text, "layouts/flame.yaml")
    return str(invalid.value).splitlines()


@pytest.mark.parametrize(
    "written",
    ["no", "off", "on", "yes", "007", "010", "08", "1:30", "12:34:56", "1_000", "2026-01-02", "~", "null", "1e5", "=",
     "0x1F", "1.10", "NA", "true", ".inf"],
)  # fmt: skip
def test_every_scalar_is_the_text_that_was_written(written: str) -> None:
    """Nothing is taken for a number, a date, a truth value or nothing."""
    assert load(f"key: {written}\nlist: [{written}]\n", "x.yaml").values == {"key": written, "list": [written]}


def test_an_empty_value_is_an_empty_text() -> None:
    """A key without value, an empty quote and an empty list entry are empty texts."""
    assert load("a:\nb: ''\nc:\n -\n - x\n", "x.yaml").values == {"a": "", "b": "", "c": ["", "x"]}


def test_lines_are_found_for_keys_entries_and_what_is_missing() -> None:
    """A path leads to its line; an unknown end of a path leads to the line of what is known of it."""
    document = load("layout: bench\ncolumns:\n  label: Label\n  signal:\n    - R1\n    - R2\n", "x.yaml")

    assert document.line(("columns",)) == 2
    assert document.line(("columns", "signal", 1)) == 6
    assert document.line(("columns", "signal", "from", 1)) == 6
    assert document.line(("columns", "analyte")) == 2
    assert document.line(("bench", "aliquot")) == 1


def test_a_part_of_a_document_keeps_its_lines() -> None:
    """A selection of keys holds their values, and the same lines."""
    part = load("a: 1\nbench:\n  aliquot: 10 mL\nb: 2\n", "x.yaml").only(["bench", "stocks"])

    assert part.values == {"bench": {"aliquot": "10 mL"}}
    assert part.line(("bench", "aliquot")) == 3


def test_several_faults_are_reported_at_once_in_order() -> None:
    """Repeated keys, tags, anchors and aliases of one text are all named, with their lines."""
    found = faults_of("a: !mean\nb: &x 1\nc: *x\nd: 1\nd: 2\ne: {f: 1, f: 2}\n")

    assert [fault.split(":")[0] for fault in found] == [
        "layouts/flame.yaml, line 1, a",
        "layouts/flame.yaml, line 2, b",
        "layouts/flame.yaml, line 3, c",
        "layouts/flame.yaml, line 5, d",
        "layouts/flame.yaml, line 6, e.f",
    ]
    assert "the key stands here again, first in line 4" in found[3]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("label: Sample #\n", "line 1, label: # begins a comment, so only 'Sample' would be read.*'Sample #'"),
        ("label: #1\n", "line 1, label: # begins a comment, so only '' would be read.*'#1'"),
        ("signal: [R #1, R #2]\n", r"line 1, signal\[1\]: # begins a comment.*'R #1'"),
        ("a: 1\nseparator: |\nb: 2\n", r"line 2, separator: a lone \| begins a text of several lines.*'\|'"),
        ("separator: >\n", "line 1, separator: a lone > begins"),
        ("separator: |;\n", r"line 1, separator: YAML does not read \|; as text.*'\|;'"),
        ("kind: !mean\n", "a value that begins with ! is a tag.*'!mean'"),
        ("claims: {file: *.csv}\n", r"line 1, claims.file: YAML does not read \*.csv as text.*'\*.csv'"),
        ("file: *.csv\n", r"'\*.csv'"),
        ("file: *all\n", r"a value that begins with \* is an alias.*'\*all'"),
        ("flags: [*!]\n", r"'\[\*!\]'"),
        ('skip: "^Page \\d+"\n', r"a backslash in double quotes has a meaning of its own.*'\^Page \\d\+'"),
        ('skip: "\\bPage"\n', r"a backslash in double quotes makes a control character.*'\\bPage'"),
        ("labels:\n - {like: STD {nominal}, role: standard}\n", r"line 2, labels\[1\].*'STD \{nominal\}'"),
        ("until: Total: sum\n", "line 1: YAML does not read Total: sum as text.*'Total: sum'"),
        ("until: @end\n", "line 1, until: .*'@end'"),
        ("until: %end\n", "line 1, until: .*'%end'"),
        ("label: it's\nuntil: 'x\n", "line 2, until: a quote is opened here and never closed"),
        ("a:\n\tb: 1\n", "line 2, a: a tab stands where YAML wants blanks.*Indent with blanks"),
        ("a: x\n b: y\n", "line 2: the key is indented by 1 blanks, the one above by 0.*Indent both alike"),
        ("a: 1\n---\nb: 2\n", r"line 2: a second document begins \('---'\)"),
        ("- a\n", "line 1: expected keys and values, got a list"),
        ("", "line 1: expected keys and values, got nothing"),
        ("a: \x00\n", "line 1: a character that no text file holds"),
        ("? [a]\n: b\n", "line 1: expected a text as key"),
        ("[" * 3000, "line 1: nested more than 20 levels deep"),
        ("a: " + "x" * 1_000_001, "expected at most 1000000 characters, got 1000004"),
    ],
)
def test_what_yaml_would_misread_is_answered_in_plain_words(text: str, expected: str) -> None:
    """Each trap of YAML is named with its line, and with the value in single quotes where that helps."""
    with pytest.raises(DocumentInvalid, match=expected):
        load(text, "layouts/flame.yaml")


def test_ordinary_comments_are_left_alone() -> None:
    """A # with a blank behind it, or a line of its own, begins a comment."""
    text = "# head\na: ';'  # a character\nb: R 1 # note\n#c: 2\nd: 'x' #note\n"

    assert load(text, "x.yaml").values == {"a": ";", "b": "R 1", "d": "x"}


def test_a_nest_of_aliases_is_refused_before_it_grows() -> None:
    """A short text that would grow without end through aliases is refused at its first anchor."""
    bomb = "a: &a [x, x]\n" + "".join(
        f"{name}: &{name} [*{last}, *{last}]\n" for last, name in zip("abcdefgh", "bcdefghi", strict=True)
    )

    assert "line 1, a: a value that begins with & is an anchor" in faults_of(bomb)[0]


texts = st.text(alphabet=st.characters(codec="utf-8", exclude_categories=["C", "Z"]), min_size=1, max_size=12)
values = st.recursive(
    texts, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(texts, inner, max_size=3), max_leaves=8
)


@given(st.dictionaries(texts, values, max_size=4))
def test_what_is_written_in_quotes_loads_as_it_was(tree: dict[str, object]) -> None:
    """Any nest of texts that a YAML writer puts in quotes loads unchanged."""
    written = yaml.safe_dump(tree, default_style="'", allow_unicode=True, width=10_000)

    if tree:
        assert load(written, "x.yaml").values == tree


class Pipette(BaseModel):
    """A part of the settings."""

    model_config = ConfigDict(extra="forbid")
    volume: float = Field(gt=0)
    kind: Literal["fixed", "variable"] = "fixed"


def _no_comma(value: str) -> str:
    if "," in value:
        raise ValueError(f"expected a name without comma, got {value!r}\nLeave the comma out")
    return value


class Bench(BaseModel):
    """Settings to validate."""

    model_config = ConfigDict(extra="forbid")
    laboratory: Annotated[str, AfterValidator(_no_comma)]
    pipettes: list[Pipette] = []
    replicates: int = 3
    folders: str | list[str] = ""
    mail: Literal["none"] | Pipette = "none"
    by_name: dict[str, Pipette] = {}


def validated(text: str) -> list[DocumentFault]:
    """Return the faults of a settings text."""
    with pytest.raises(DocumentInvalid) as invalid:
        validate(load(text, "config.yaml"), Bench, CONSEQUENCE)
    return list(invalid.value.faults)


def test_a_valid_document_becomes_an_instance() -> None:
    """Texts become what the schema says."""
    bench = validate(load("laboratory: Skerry Point\nreplicates: 5\n", "config.yaml"), Bench, CONSEQUENCE)

    assert (bench.laboratory, bench.replicates) == ("Skerry Point", 5)


def test_wrong_kinds_and_unknown_keys_are_reported_together() -> None:
    """One key of the wrong kind does not hide another that is unknown; each has its line and its remedy."""
    text = "laboratory: [a]\nreplicats: 3\npipettes:\n  - volume: ten\n  - volum: 5\n    kind: fixd\nreplicates: 2.5\n"

    assert [str(fault) for fault in validated(text)] == [
        f"config.yaml, line 1, laboratory: expected a text, got a list. {CONSEQUENCE}",
        f"config.yaml, line 2, replicats: unknown key 'replicats'. {CONSEQUENCE} Did you mean 'replicates'?",
        f"config.yaml, line 4, pipettes[1].volume: expected a number, got 'ten'. {CONSEQUENCE}",
        f"config.yaml, line 5, pipettes[2].volum: unknown key 'volum'. {CONSEQUENCE} Did you mean 'volume'?",
        f"config.yaml, line 5, pipettes[2].volume: the key 'volume' is missing. {CONSEQUENCE} Add it.",
        f"config.yaml, line 6, pipettes[2].kind: expected one of 'fixed', 'variable', got 'fixd'. {CONSEQUENCE} {HINT}",
        f"config.yaml, line 7, replicates: expected a whole number, got '2.5'. {CONSEQUENCE}",
    ]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("laboratory: a,b\n", f"expected a name without comma, got 'a,b'. {CONSEQUENCE} Leave the comma out."),
        ("laboratory: a\npipettes: [{volume: -1}]\n", "volume: expected more than 0, got '-1'."),
        ("laboratory: a\npipettes: x\n", "pipettes: expected a list, got 'x'."),
        ("laboratory: a\npipettes: [x]\n", r"pipettes[1]: expected keys and values, got 'x'."),
        ("laboratory: a\nfolders: {x: y}\n", "folders: expected a text or a list, got keys and values."),
        ("laboratory: a\nmail: {volume: 1, knd: x}\n", "mail.knd: unknown key 'knd'."),
        ("laboratory: a\nby_name: {p: {volume: 1, knd: x}}\n", f"by_name.p.knd: unknown key 'knd'. {CONSEQUENCE} Did"),
        ("laboratory: a\nby_name: {p: {volume: 1, zzz: x}}\n", "Known here: kind, volume."),
        ("replicates: 1\n", "laboratory: the key 'laboratory' is missing."),
    ],
)  # fmt: skip
def test_each_kind_of_mismatch_is_said_in_plain_words(text: str, expected: str) -> None:
    """What was expected and what was found are said; messages of validators are kept."""
    assert expected in "\n".join(map(str, validated(text)))


def test_a_value_that_took_one_form_of_a_union_is_judged_by_it() -> None:
    """The other forms of a union are not reported where the value is of a later form with a fault inside."""
    faults = validated("laboratory: a\nmail: {volume: ten}\n")

    assert [fault.key for fault in faults] == ["mail.volume"]
