"""Limits as laboratories write them, and the defaults."""

from __future__ import annotations

from math import inf

import pytest

from rules.exceptions import limits_of
from rules.limits import DEFAULTS, CheckLimits, Limit, LimitUnreadable, parse_check_limits
from rules.method import AnalyteRules


@pytest.mark.parametrize(
    ("text", "low", "high", "closed", "unit"),
    [
        ("75 to 125 %", 75, 125, True, "%"),
        ("75 % to 125 %", 75, 125, True, "%"),
        ("  75   to 125%", 75, 125, True, "%"),
        ("-20 to 20 %", -20, 20, True, "%"),
        ("−20 to +20 %", -20, 20, True, "%"),
        ("0.5 to 10", 0.5, 10, True, ""),
        ("at least 0.995", 0.995, inf, True, ""),
        ("at most 10 %", -inf, 10, True, "%"),
        ("below 0.5 LOQ", -inf, 0.5, False, "LOQ"),
        ("above 1e-3", 1e-3, inf, False, ""),
        ("1 to 1", 1, 1, True, ""),
    ],
)
def test_limits_are_read_as_written(text, low, high, closed, unit):
    """Range, one-sided, open and closed limits, with sign, exponent, unit and any blanks."""
    limit = Limit.parse(text)

    assert (limit.low, limit.high, limit.closed, limit.unit) == (low, high, closed, unit)
    assert limit.text == " ".join(text.split())


@pytest.mark.parametrize(
    "text", ["", "75", "75-125 %", "75..125", "at least", "at least 0,995", "> 5", "off 5", "1 to 2 mg/L", "nan to 5"]
)
def test_other_forms_are_refused_with_the_known_ones(text):
    """What is written differently is an error that shows how limits are written, and what was found."""
    with pytest.raises(LimitUnreadable, match=r"expected a limit such as '75 to 125 %'.*or 'off', got '"):
        Limit.parse(text)


def test_a_range_the_wrong_way_round_is_refused():
    """125 to 75 is an error that says which number comes first."""
    with pytest.raises(LimitUnreadable, match="expected the smaller number first, got '125 to 75 %'"):
        Limit.parse("125 to 75 %")


def test_a_bare_limit_is_a_fail_limit():
    """Without the word warn a limit fails, and the default's warning does not stay behind."""
    limits = parse_check_limits("at most 8 %")

    assert limits.fail is not None
    assert limits.warn is None
    assert limits.stated
    assert limits.text == "fail unless at most 8 %"


def test_warn_and_fail_are_stated_by_name():
    """Both words may stand, one may be off, and both off is off."""
    both = parse_check_limits({"warn": "at most 5 %", "fail": "at most 10 %"})
    half = parse_check_limits({"warn": "at most 5 %", "fail": "off"})

    assert both.text == "fail unless at most 10 %; warn unless at most 5 %"
    assert half.fail is None
    assert not half.off
    assert parse_check_limits({"warn": "off", "fail": "off"}).off
    assert parse_check_limits("off").text == "off"


def test_other_words_than_warn_and_fail_are_refused():
    """An unknown key is named."""
    with pytest.raises(LimitUnreadable, match="expected the keys 'warn' and 'fail', got 'alarm'"):
        parse_check_limits({"alarm": "at most 5 %"})


@pytest.mark.parametrize(
    ("check", "text"),
    [
        ("levels", "fail unless at least 1; warn unless at least 3"),
        ("slope_certainty", "fail unless below 1; warn unless below 0.1"),
        ("correlation", "warn unless at least 0.995"),
        ("curvature", "fail unless at least 0.01"),
        ("residual", "fail unless at most 10 %"),
        ("addition_size", "fail unless 0.5 to 10"),
        ("recovery", "fail unless 75 to 125 %"),
        ("spike_size", "warn unless at least 25 %"),
        ("matrix_effect", "warn unless -20 to 20 %"),
        ("repeatability", "fail unless at most 10 %; warn unless at most 5 %"),
        ("check_standard", "fail unless 90 to 110 %"),
        ("blank", "fail unless below 0.5 LOQ"),
    ],
)
def test_defaults_are_those_of_the_method(check, text):
    """Each default as published or common, and marked as not stated by the laboratory."""
    assert DEFAULTS[check].text == text
    assert not DEFAULTS[check].stated


def test_analyte_goes_before_laboratory_goes_before_default(make_method):
    """An analyte's own limit, else the laboratory's, else the default, analyte by analyte."""
    method = make_method(
        limits={"recovery": parse_check_limits("80 to 120 %")},
        analytes={"Hg": AnalyteRules(limits={"recovery": parse_check_limits("60 to 140 %")})},
    )

    texts = [limit.text for limit in limits_of(method, ("Hg", "Zn"), "recovery")]
    assert texts == ["fail unless 60 to 140 %", "fail unless 80 to 120 %"]
    assert limits_of(method, ("Zn",), "residual") == (DEFAULTS["residual"],)


def test_spikes_after_preparation_are_judged_more_narrowly(make_method):
    """80 to 120 % by default after preparation (EPA SW-846 7000B, 9.8.1); a stated limit goes before."""
    after = make_method(spiked_at="after preparation")
    stated = make_method(spiked_at="after preparation", limits={"recovery": parse_check_limits("70 to 130 %")})

    assert limits_of(after, ("Zn",), "recovery")[0].text == "fail unless 80 to 120 %"
    assert limits_of(stated, ("Zn",), "recovery")[0].text == "fail unless 70 to 130 %"


def test_limits_without_either_bound_are_off():
    """Off means neither warn nor fail."""
    assert CheckLimits(None, None, stated=True).off
