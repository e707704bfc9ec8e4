"""Labels are understood by ordered rules, each distinct label once."""

from __future__ import annotations

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from parsers.labels import LabelRule, like_pattern, understand
from parsers.readings import Role


def said(labels: list[str], rules: list[LabelRule]) -> list[dict[str, str]]:
    """Return what each label says."""
    found = understand(labels, rules)
    return [
        {word: text for word, texts in found.said.items() if (text := texts[at]) is not None}
        for at in range(len(labels))
    ]


@pytest.mark.parametrize(
    ("like", "label", "expected"),
    [
        ("{sample} +{level}", "SED-12 +A1", {"sample": "SED-12", "level": "A1"}),
        ("{sample} +{level}", "RIV 17 b +A 2", {"sample": "RIV 17 b", "level": "A 2"}),
        ("{sample} +{level}", "A +B +C", {"sample": "A", "level": "B +C"}),
        ("{sample}  SPK", "BRN-3 SPK", {"sample": "BRN-3"}),
        ("LSP-{sample}", "LSP-ROOF-7", {"sample": "ROOF-7"}),
        ("STD {nominal}", "STD 0.5", {"nominal": "0.5"}),
        ("{sample}_add{level}", "ROOF-7_add3", {"sample": "ROOF-7", "level": "3"}),
        ("BLK*", "BLK 1", {}),
        ("*BLK*", "day BLK", {}),
        ("a.c", "a.c", {}),
        ("{sample}*", "RIV-17", {"sample": "R"}),
    ],
)
def test_a_plain_rule_takes_the_shortest_texts(like: str, label: str, expected: dict[str, str]) -> None:
    """A word takes the shortest text that lets the whole label match; a star takes anything; the rest is literal."""
    match = like_pattern(like).fullmatch(label)

    assert match is not None
    assert match.groupdict() == expected


@pytest.mark.parametrize(
    ("like", "label"),
    [
        ("a.c", "abc"),
        ("{sample} +{level}", "SED-12 + "),
        ("{sample} +{level}", " +A1"),
        ("BLK*", "xBLK"),
        ("STD {nominal}", "STD "),
    ],
)
def test_a_plain_rule_matches_whole_labels_only(like: str, label: str) -> None:
    """A dot is a dot, a word is never empty, and nothing may be left over."""
    assert like_pattern(like).fullmatch(label) is None


@pytest.mark.parametrize(
    ("like", "expected"),
    [
        ("{sample +A1", "a brace without its partner"),
        ("{sample} {sample}", "stands twice"),
        ("{smple}", "'smple' is no field that a label can say\nDid you mean 'sample'"),
        ("{signal}", "'signal' is no field that a label can say"),
        ("{}", "'' is no field"),
    ],
)
def test_a_plain_rule_that_cannot_be_meant_is_refused(like: str, expected: str) -> None:
    """Braces and words are checked when the layout is read."""
    with pytest.raises(ValueError, match=re.escape(expected)):
        like_pattern(like)


def test_a_rule_has_exactly_one_form() -> None:
    """Neither no form nor both are accepted, and groups of patterns are checked as well."""
    for keys in ({}, {"like": "a", "pattern": "a"}):
        with pytest.raises(ValueError, match="expected either 'like' or 'pattern'"):
            LabelRule.model_validate(keys)
    with pytest.raises(ValueError, match="'smaple' is no field"):
        LabelRule.model_validate({"pattern": "(?P<smaple>.)"})


def test_the_first_rule_that_matches_wins() -> None:
    """A calibration label that looks like a sample is what the earlier rule says."""
    rules = [LabelRule(like="IS-{nominal}", role="standard"), LabelRule(like="{sample}-{level}", role="spiked")]

    found = understand(["IS-5", "SED-2", "what"], rules)

    assert found.rule.tolist() == [0, 1, -1]
    assert found.role.tolist() == [Role.STANDARD, Role.SPIKED, -1]
    assert said(["IS-5", "SED-2"], rules) == [{"nominal": "5"}, {"sample": "SED", "level": "2"}]


def test_a_pattern_is_searched_and_its_groups_are_trimmed() -> None:
    """A pattern may match a part of the label; a group that took part in nothing says nothing."""
    rule = LabelRule.model_validate({"pattern": r"(?P<sample>[A-Z]+-\d+ ?)(?P<level>A\d)?", "role": "spiked"})

    assert said(["x SED-12 A1", "SED-12 "], [rule]) == [{"sample": "SED-12", "level": "A1"}, {"sample": "SED-12"}]


names = (
    st.text(alphabet="ABab +-7.", min_size=1, max_size=6)
    .map(str.strip)
    .filter(bool)
    .map(lambda name: " ".join(name.split()))
)


@given(st.lists(st.tuples(names, names), min_size=1, max_size=1500))
def test_every_label_that_was_put_together_is_taken_apart_again(parts: list[tuple[str, str]]) -> None:
    """A rule cuts a label at the first place that leaves two texts without blanks at their ends."""
    labels = list(dict.fromkeys(f"{sample} +{level}" for sample, level in parts))

    for label, found in zip(labels, said(labels, [LabelRule(like="{sample} +{level}")]), strict=True):
        cuts = [(label[:at], label[at + 2 :]) for at in range(len(label)) if label[at : at + 2] == " +"]
        fitting = [cut for cut in cuts if all(part and part == part.strip() for part in cut)]
        assert (found["sample"], found["level"]) == fitting[0]
