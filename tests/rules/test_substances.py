"""Amounts of substance and parts per million: converted where a molar mass or a declaration says how, else refused.

Molar masses: IUPAC 2021 standard atomic weights, abridged (from memory: verify before quoting): Zn 65.38; N 14.007 and
O 15.999 (conventional values of interval elements), so NO3 62.004 g/mol.
"""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.method import AnalyteRules, Bench, Measure, Method, Stock
from rules.substances import Substance
from rules.units import UnitUnusable

PLAIN = Method(report="additions", export_unit="mg/L", result_unit="mg/L")


@pytest.mark.parametrize(
    ("name", "unit", "target", "factor"),
    [
        ("Zn", "mmol/L", "mg/L", 65.38),
        ("Zn", "mg/L", "mmol/L", 1 / 65.38),
        ("Zn", "µmol/L", "µg/L", 65.38),
        ("NO3", "mmol/L", "mg/L", 62.004),
        ("Zn", "mmol/kg", "mg/kg", 65.38),
        ("Zn", "mg/L", "µg/L", 1000.0),
    ],
)
def test_amounts_and_masses_convert_by_the_molar_mass(name, unit, target, factor):
    """A millimole is its molar mass in milligrams."""
    assert Substance.of(PLAIN, name).factor(unit, target) == pytest.approx(factor, rel=1e-9)


def test_the_laboratorys_own_molar_mass_goes_first():
    """What the settings state is used instead of the table."""
    method = Method(
        report="additions", export_unit="mg/L", result_unit="mg/L", analytes={"Zn": AnalyteRules(molar_mass=65.4)}
    )

    assert Substance.of(method, "Zn").factor("mmol/L", "mg/L") == pytest.approx(65.4)
    assert Substance.of(method, "Zn").source == "the settings"


def test_a_name_that_is_no_formula_needs_a_molar_mass():
    """The error says which key to write."""
    with pytest.raises(UnitUnusable) as caught:
        Substance.of(PLAIN, "Iron").factor("mmol/L", "mg/L")

    assert str(caught.value) == (
        "'mmol/L' becomes 'mg/L' only with the molar mass of Iron, which nobody states: write analytes: {Iron: "
        "{molar_mass: … g/mol}}"
    )


def test_elements_that_vary_say_which_value_was_taken():
    """The weight of lithium is an interval: the conventional value is named."""
    assert Substance.of(PLAIN, "Li").source == "standard atomic weights, IUPAC 2021, conventional value for Li"
    assert Substance.of(PLAIN, "Zn").source == "standard atomic weights, IUPAC 2021"


def test_additions_in_amounts_give_a_result_in_masses(outcomes, make_additions, check):
    """1, 2 and 3 mmol/L of zinc are additions of 65.38, 130.76 and 196.14 mg/L, and `inputs` names the molar mass."""
    signals, amounts = [0.2, 0.31, 0.39, 0.5], [0, (1.0, "mmol/L"), (2.0, "mmol/L"), (3.0, "mmol/L")]

    by_amount = outcomes(make_additions(signals, amounts))
    by_mass = outcomes(make_additions(signals, [0, 65.38, 130.76, 196.14]))

    assert by_amount.case.faults == {}
    assert by_amount.reported(0).value[0] == pytest.approx(by_mass.reported(0).value[0])
    assert check(by_amount, "inputs").sentence(0) == (
        "all cells readable, volumes and concentrations possible; Zn counts 65.38 g/mol (standard atomic weights, "
        "IUPAC 2021)"
    )


def test_nitrate_counts_its_conventional_molar_mass(outcomes, make_additions, check):
    """14.007 + 3 x 15.999 = 62.004 g/mol serves additions of nitrate, and `inputs` says that N and O vary in nature."""
    signals = [0.2, 0.31, 0.39, 0.5]
    amounts = [0, (1.0, "mmol/L"), (2.0, "mmol/L"), (3.0, "mmol/L")]

    by_amount = outcomes(make_additions(signals, amounts, analyte="NO3"))
    by_mass = outcomes(make_additions(signals, [0, 62.004, 124.008, 186.012], analyte="NO3"))

    assert by_amount.reported(0).value[0] == pytest.approx(by_mass.reported(0).value[0], rel=1e-9)
    assert check(by_amount, "inputs").sentence(0) == (
        "all cells readable, volumes and concentrations possible; NO3 counts 62.004 g/mol (standard atomic weights, "
        "IUPAC 2021, conventional value for N, O)"
    )


@given(scale=st.floats(0.1, 10))
def test_a_result_in_amounts_is_the_one_in_masses_over_the_molar_mass(outcomes, make_additions, scale):
    """The same export in mmol/L and in mg/L, stock and interval included."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, 1.0, 2.0, 3.0], key="spike_volume")
    more = {
        "bench": Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL")),
        "stocks": (Stock("ZN-5", {"Zn": Measure(5 * scale, "mg/L")}),),
    }

    masses, amounts = outcomes(rows, **more), outcomes(rows, result_unit="mmol/L", **more)

    for part in ("value", "low", "high", "expanded_uncertainty"):
        first, second = (getattr(out.reported(0), part)[0] for out in (masses, amounts))
        assert second * 65.38 == pytest.approx(first, rel=1e-9)


def test_the_amount_content_of_a_solid(outcomes, make_additions):
    """0.5 g in 50 mL holds 10 g/L: the result in mmol/kg is the one in mg/kg over 65.38."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, 1.0, 2.0, 3.0], mass=(0.5, "g"), digest_volume=(50.0, "mL"))

    masses = outcomes(rows, result_unit="mg/kg", added_refers_to="vessel")
    amounts = outcomes(rows, result_unit="mmol/kg", added_refers_to="vessel")

    assert masses.case.faults == amounts.case.faults == {}
    assert amounts.reported(0).value[0] * 65.38 == pytest.approx(masses.reported(0).value[0])


def test_parts_per_million_mean_what_is_declared(outcomes, make_additions):
    """A bare ppm is a fault with its remedy; declared as mg/L it is that."""
    rows = make_additions([0.2, 0.31, 0.39, 0.5], [0, (1.0, "ppm"), (2.0, "ppm"), (3.0, "PPM")])

    undeclared, declared = outcomes(rows), outcomes(rows, unit_words={"ppm": "mg/L"})

    assert undeclared.case.faults[0][0] == (
        "line 3: added: 'ppm' does not say per what: write mg/L, µg/L or ng/L, or declare units: {ppm: mg/L}"
    )
    plain = outcomes(make_additions([0.2, 0.31, 0.39, 0.5], [0, 1.0, 2.0, 3.0]))
    assert declared.case.faults == {}
    assert declared.reported(0).value[0] == pytest.approx(plain.reported(0).value[0])
