"""Atomic weights and molar masses: printed masses of salts as an outside source, intervals, formulas that are none."""

from __future__ import annotations

from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.atomic_weights import WEIGHTS, FormulaUnusable, composition, molar_mass

#: By atomic number.
ORDER = [
    "H", "He", "Li", "Be", "B", "C", "N", "O", "F", "Ne", "Na", "Mg", "Al", "Si", "P", "S", "Cl", "Ar", "K",
    "Ca", "Sc", "Ti", "V", "Cr", "Mn", "Fe", "Co", "Ni", "Cu", "Zn", "Ga", "Ge", "As", "Se", "Br", "Kr", "Rb",
    "Sr", "Y", "Zr", "Nb", "Mo", "Ru", "Rh", "Pd", "Ag", "Cd", "In", "Sn", "Sb", "Te", "I", "Xe", "Cs", "Ba",
    "La", "Ce", "Pr", "Nd", "Sm", "Eu", "Gd", "Tb", "Dy", "Ho", "Er", "Tm", "Yb", "Lu", "Hf", "Ta", "W", "Re",
    "Os", "Ir", "Pt", "Au", "Hg", "Tl", "Pb", "Bi", "Th", "Pa", "U",
]  # fmt: skip


@pytest.mark.parametrize(
    ("compound", "element", "atoms", "printed"),
    # U.S. EPA SW-846 method 6010D, section 7.9, read: grams of a compound that hold 1.000 g of the element
    [
        ("As2O3", "As", 2, 1.3203),
        ("BaCl2", "Ba", 1, 1.5163),
        ("CdO", "Cd", 1, 1.1423),
        ("CaCO3", "Ca", 1, 2.4969),
        ("CrO3", "Cr", 1, 1.9231),
        ("Fe2O3", "Fe", 2, 1.4298),
        ("Pb(NO3)2", "Pb", 1, 1.5985),
        ("Li2CO3", "Li", 2, 5.3248),
        ("MgO", "Mg", 1, 1.6584),
        ("HgCl2", "Hg", 1, 1.3540),
        ("KCl", "K", 1, 1.9069),
        ("AgNO3", "Ag", 1, 1.5748),
        ("NaCl", "Na", 1, 2.5419),
        ("Sr(NO3)2", "Sr", 1, 2.4154),
        ("TlNO3", "Tl", 1, 1.3034),
        ("NH4VO3", "V", 1, 2.2957),
        ("ZnO", "Zn", 1, 1.2447),
    ],
)
def test_salts_hold_what_a_public_method_prints(compound, element, atoms, printed):
    """The mass of a salt for one gram of its element is the printed one within 5e-4."""
    assert molar_mass(compound) / (atoms * molar_mass(element)) == pytest.approx(printed, rel=5e-4)


def test_copper_oxide_is_what_stoichiometry_says():
    """The printed 1.2564 g of CuO for a gram of copper is a misprint: stoichiometry gives 1.2518."""
    factor = molar_mass("CuO") / molar_mass("Cu")

    assert factor == pytest.approx(1.2518, abs=5e-5)
    assert factor != pytest.approx(1.2564, rel=5e-4)


def test_conventional_values_lie_in_their_intervals():
    """Each interval element uses a value inside its interval, to within half its last digit."""
    varying = {symbol: weight for symbol, weight in WEIGHTS.items() if weight.interval}

    assert set(varying) == {"H", "Li", "B", "C", "N", "O", "Mg", "Si", "S", "Cl", "Ar", "Br", "Tl", "Pb"}
    for symbol, weight in varying.items():
        low, high = weight.interval
        half = 0.5 * 10.0 ** -len(f"{weight.value}".partition(".")[2])
        assert low - half <= weight.value <= high + half, symbol


def test_weights_grow_with_the_place_in_the_periodic_table():
    """The table holds 84 elements, and its weights rise with atomic number but for the known inversions."""
    falls = {(a, b) for a, b in pairwise(ORDER) if WEIGHTS[a].value > WEIGHTS[b].value}

    assert sorted(ORDER) == sorted(WEIGHTS)
    assert falls == {("Ar", "K"), ("Co", "Ni"), ("Te", "I"), ("Th", "Pa")}


@given(
    st.lists(st.tuples(st.sampled_from(sorted(WEIGHTS)), st.integers(1, 40)), min_size=1, max_size=5),
    st.integers(2, 9),
)
def test_brackets_multiply_and_dots_add(parts, times):
    """A group in brackets weighs its count of times, and what follows a dot is added with its own count."""
    inner = "".join(f"{symbol}{count}" for symbol, count in parts)
    weight = sum(WEIGHTS[symbol].value * count for symbol, count in parts)

    assert molar_mass(f"({inner}){times}") == pytest.approx(times * weight, rel=1e-12)
    assert molar_mass(f"Zn·{times}({inner})") == pytest.approx(65.38 + times * weight, rel=1e-12)


def test_crystal_water_counts():
    """CuSO4·5H2O holds ten hydrogen and nine oxygen atoms."""
    assert composition("CuSO4·5H2O") == composition("CuSO4.5H2O") == {"Cu": 1, "S": 1, "O": 9, "H": 10}


@pytest.mark.parametrize(
    ("formula", "sentence"),
    [
        ("", r"formula '', character 1: expected the symbol of an element, got the end\. No molar mass"),
        ("zn", r"character 1: expected the symbol of an element, got 'z'"),
        ("ZnX2", r"character 3: expected an element with a standard atomic weight, got 'X'"),
        ("TcO2", r"character 1: expected an element with a standard atomic weight, got 'Tc'"),
        ("Pb(NO3", r"character 7: expected a closing bracket, got the end"),
        ("Pb()2", r"character 4: expected the symbol of an element, got '\)'"),
        ("PbO)2", r"character 4: expected a symbol, a count, a bracket or a dot, got '\)'"),
        ("Zn0", r"character 3: expected a symbol, a count, a bracket or a dot, got '0'"),
        ("Zn2+", r"character 4: expected a symbol, a count, a bracket or a dot, got '\+'. .* Write it as in Pb"),
        ("CuSO4·", r"character 7: expected the symbol of an element, got the end"),
        ("Zn Cl2", r"character 3: expected a symbol, a count, a bracket or a dot, got ' '"),
    ],
)
def test_what_is_no_formula_is_refused(formula, sentence):
    """A text that is no formula is refused with the place, what was expected, what follows and what to do."""
    with pytest.raises(FormulaUnusable, match=sentence):
        molar_mass(formula)
