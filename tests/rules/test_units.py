"""Units of volumes and concentrations: what converts, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from parsers.readings import Quantities, Texts
from rules import units
from rules.method import Measure


@pytest.mark.parametrize(
    ("unit", "target", "factor"),
    [
        ("mg/L", "mg/L", 1.0),
        ("mg/L", "µg/L", 1000.0),
        ("ug/L", "µg/L", 1.0),
        ("µg/mL", "mg/L", 1.0),
        ("ng/mL", "µg/L", 1.0),
        ("g/L", "mg/L", 1000.0),
        ("mmol/L", "mol/L", 0.001),
        ("µL", "mL", 0.001),
        ("L", "mL", 1000.0),
        ("cm^3", "mL", 1.0),
    ],
)
def test_factors_between_units_are_exact(unit, target, factor):
    """Powers of ten come out without the noise of the conversion."""
    assert units.factor(unit, target) == factor


@pytest.mark.parametrize("unit", ["ppm", "ppb", "ppt", "PPM"])
def test_parts_per_million_mean_nothing(unit):
    """Parts per anything are refused with what to write instead."""
    with pytest.raises(units.UnitUnusable, match=f"'{unit}' does not say per what: write mg/L, µg/L or ng/L"):
        units.factor(unit, "mg/L")


@pytest.mark.parametrize("unit", ["zorks", "mg/", "1 2"])
def test_unknown_units_are_refused(unit):
    """What is no unit is named, with examples of what is."""
    with pytest.raises(units.UnitUnusable, match="is no known unit: write for example mg/L, µg/L, mL or µL"):
        units.factor(unit, "mg/L")


@pytest.mark.parametrize("unit", ["", "%"])
def test_a_number_without_dimension_is_no_concentration(unit):
    """Nothing, percent and mass per mass are units of neither volume nor concentration."""
    with pytest.raises(
        units.UnitUnusable, match=r"is no (known unit|unit of a volume, a mass, a concentration or a content)"
    ):
        units.factor(unit, "mg/L")


@pytest.mark.parametrize(("unit", "target"), [("mg/L", "mL"), ("mL", "mg/L"), ("mol/L", "mg/L")])
def test_different_kinds_do_not_convert(unit, target):
    """Mass per volume, amount per volume and volume are kept apart."""
    with pytest.raises(
        units.UnitUnusable, match=f"'{unit}' cannot be converted to '{target}': they measure different things"
    ):
        units.factor(unit, target)


def test_the_kind_of_a_unit_can_be_required():
    """A volume where a concentration is needed is refused by kind."""
    units.require("µg/L", units.CONCENTRATION)
    with pytest.raises(units.UnitUnusable, match="expected a concentration such as mg/L or µg/L, got 'mL'"):
        units.require("mL", units.CONCENTRATION)


def test_a_column_may_mix_units():
    """Each number is converted by its own unit, missing ones stay missing, silent ones take the default."""
    column = Quantities(np.array([1.0, 2.0, np.nan, 3.0]), Texts.of(["mg/L", "µg/L", "zorks", None]))

    assert units.of_column(column, "mg/L", "µg/L").tolist() == pytest.approx([1, 0.002, np.nan, 0.003], nan_ok=True)


def test_a_number_without_unit_is_refused_where_there_is_no_default():
    """A volume without unit is an error, not millilitres."""
    column = Quantities(np.array([1.0]), Texts.of([None]))

    with pytest.raises(units.UnitUnusable, match="a number without unit where a volume such as mL or µL is needed"):
        units.of_column(column, "mL", None)


def test_a_stated_measure_converts():
    """250 µL are 0.25 mL."""
    assert units.of_measure(Measure(250, "µL"), "mL") == pytest.approx(0.25)
    assert str(Measure(250, "µL")) == "250 µL"
