"""What the vessels hold: dilution and addition by hand for every bench practice, and every guard's sentence."""

from __future__ import annotations

import numpy as np
import pytest

from rules.method import Bench, Measure, Stock
from rules.solutions import gather
from rules.vessels import fill

ZN = Stock("ZN-5", {"Zn": Measure(5, "mg/L")})
FLASKS = Bench(aliquot=Measure(10, "mL"), made_up_to=Measure(50, "mL"))
ON_TOP = Bench(aliquot=Measure(10, "mL"))


@pytest.fixture(scope="session")
def vessels(make_readings, make_method):
    """Rows, each a dict of what differs from a spiked solution, to what the vessels hold."""

    def made(rows, accepted_at=0.0, **method):
        rows = [{"sample": "RIV-17", "role": "spiked", "signal": 0.3} | row for row in rows]
        readings = make_readings(rows)
        return fill(readings, gather(readings), make_method(**method), accepted_at)

    return made


def sentences(filled):
    """All faults of all solutions."""
    return [sentence for of_one in filled.faults.values() for sentence in of_one]


def test_flasks_made_up_to_a_volume(vessels):
    """10 mL and 5 mL of 5 mg/L in 50 mL: f = 0.2, A = 2.5 mg/L, c = 0.5 mg/L; the unspiked one holds none."""
    filled = vessels([{"role": "unspiked"}, {"spike_volume": 5.0}], bench=FLASKS, stocks=(ZN,))

    assert filled.dilution.tolist() == [0.2, 0.2]
    assert filled.addition.tolist() == [0.0, 2.5]
    assert filled.added.tolist() == [0.0, 0.5]
    assert filled.faults == {}


def test_standard_on_top_of_the_aliquot(vessels):
    """10 mL and 5 mL on top: f = 2/3, A = 2.5 mg/L, c = 5/3 mg/L."""
    filled = vessels([{"role": "unspiked"}, {"spike_volume": 5.0}], bench=ON_TOP, stocks=(ZN,))

    assert filled.dilution.tolist() == pytest.approx([1.0, 2 / 3])
    assert filled.added.tolist() == pytest.approx([0.0, 5 / 3])


def test_volumes_of_a_row_go_before_those_of_the_bench(vessels):
    """The bench's volumes are defaults, not a second source; units are converted."""
    row = {"spike_volume": (500.0, "µL"), "aliquot": 5.0, "made_up_to": (0.02, "L")}

    filled = vessels([row], bench=FLASKS, stocks=(ZN,))

    assert filled.dilution[0] == pytest.approx(0.25)
    assert filled.addition[0] == pytest.approx(0.5)


def test_concentration_alone_is_the_addition_where_nothing_is_diluted(vessels):
    """Without volumes f is 1 and A what the export says, in the unit of results."""
    filled = vessels([{"added": (250.0, "µg/L")}])

    assert (filled.dilution[0], filled.addition[0]) == (1.0, 0.25)
    assert not filled.by_volume[0]


@pytest.mark.parametrize(("refers", "addition"), [("vessel", 10.0), ("aliquot", 2.0), ("nominal", 10.0)])
def test_declared_reference_of_a_concentration_in_flasks(vessels, refers, addition):
    """2 mg/L added in flasks of 10 in 50 mL is 10 mg/L of aliquot if it refers to the vessel, 2 if to the aliquot."""
    filled = vessels([{"added": 2.0}], bench=FLASKS, added_refers_to=refers)

    assert filled.addition[0] == pytest.approx(addition)


@pytest.mark.parametrize(("refers", "addition"), [("vessel", 3.0), ("aliquot", 2.0), ("nominal", 2.0)])
def test_declared_reference_of_a_concentration_on_top(vessels, refers, addition):
    """5 mL on top of 10 mL: of 2 mg/L in the vessel 3 in the aliquot; nominal means the volume without the standard."""
    filled = vessels(
        [{"added": 2.0, "spike_volume": 5.0}],
        bench=ON_TOP,
        added_refers_to=refers,
        stocks=(Stock("ZN-X", {"Zn": Measure(2 * addition, "mg/L")}),),
    )

    assert filled.addition[0] == pytest.approx(addition)
    assert filled.faults == {}


def test_undeclared_reference_is_refused(vessels):
    """Where aliquot and vessel differ nothing is guessed."""
    filled = vessels([{"added": 2.0}], bench=FLASKS)

    assert np.isnan(filled.addition[0])
    assert sentences(filled) == [
        (
            "line 2: aliquot and vessel differ in volume, and nothing says what the added concentration refers "
            "to: state "
            "added_refers_to: vessel, aliquot or nominal"
        )
    ]


def test_levels_stand_for_volumes_or_concentrations(vessels):
    """A level is a volume of stock or a concentration; a row's own addition goes before it without a quarrel."""
    bench = Bench(aliquot=Measure(10, "mL"), levels={"A1": Measure(500, "µL"), "C1": Measure(400, "µg/L")})
    rows = [{"level": "A1"}, {"level": "A1", "spike_volume": 2.0}, {"level": "C1"}]

    filled = vessels(rows, bench=bench, stocks=(ZN,))

    assert filled.addition.tolist() == pytest.approx([0.25, 1.0, 0.4])
    assert filled.faults == {}


@pytest.mark.parametrize(
    ("row", "method", "sentence"),
    [
        ({"spike_volume": 5.0, "aliquot": 0.0}, {"bench": FLASKS}, "aliquot is 0, which cannot be: correct the export"),
        (
            {"spike_volume": 5.0, "made_up_to": -50.0},
            {"bench": FLASKS},
            "made_up_to is -50, which cannot be: correct the export",
        ),
        ({"spike_volume": -1.0}, {"bench": FLASKS}, "spike_volume is -1, which cannot be: correct the export"),
        ({"added": -2.0}, {}, "added is -2, which cannot be: correct the export"),
        ({"added": 2.0, "predilution": 0.0}, {}, "predilution is 0, which cannot be: correct the export"),
        (
            {"spike_volume": 0.0},
            {"bench": FLASKS},
            "a spiked solution to which 0 was added: correct the label or the addition",
        ),
        ({"added": 0.0}, {}, "a spiked solution to which 0 was added: correct the label or the addition"),
        (
            {"spike_volume": 41.0},
            {"bench": FLASKS},
            "51 mL of aliquot and standard do not fit into made_up_to 50 mL: correct the volumes",
        ),
        (
            {"spike_volume": 5.0},
            {},
            "a volume of standard is stated and the aliquot is not: state bench.aliquot or map aliquot",
        ),
        (
            {"added": 2.0, "made_up_to": 50.0},
            {},
            "made_up_to is stated and the aliquot is not: state bench.aliquot or map aliquot",
        ),
        ({}, {}, "a spiked solution without addition: map added, spike_volume or level, or correct the export"),
        (
            {"level": "A9"},
            {"bench": Bench(aliquot=Measure(10, "mL"), levels={"A1": Measure(1, "mL"), "A2": Measure(2, "mL")})},
            "level 'A9' is not among bench.levels (A1, A2): add it there, or correct the label",
        ),
        ({"level": "A9"}, {}, "level 'A9' is not among bench.levels (none): add it there, or correct the label"),
        (
            {"added": 2.0, "spike_volume": 5.0},
            {"bench": FLASKS, "added_refers_to": "aliquot"},
            (
                "the volumes give an addition of 2.5 mg/L and the stated concentration gives 2 mg/L: they must agree "
                "within "
                "1 %; correct the one that is wrong"
            ),
        ),
        (
            {"spike_volume": 5.0, "stock": "ZN-7"},
            {"bench": FLASKS},
            "stock 'ZN-7' is not among the stocks (ZN-5): correct the name in the export or the stocks in the settings",
        ),
        (
            {"spike_volume": (5.0, "mg/L")},
            {"bench": FLASKS},
            "spike_volume: 'mg/L' cannot be converted to 'mL': they measure different things",
        ),
        (
            {"added": (5.0, "ppm")},
            {},
            "added: 'ppm' does not say per what: write mg/L, µg/L or ng/L, or declare units: {ppm: mg/L}",
        ),
        (
            {"spike_volume": (5.0, None)},
            {"bench": FLASKS},
            "spike_volume: a number without unit where a volume such as mL or µL is needed",
        ),
    ],
)
def test_what_cannot_be_is_a_fault_with_place_and_remedy(vessels, row, method, sentence):
    """Every impossible or unknown input names the line, what was found and what to do."""
    filled = vessels([row], **({"stocks": (ZN,)} | method))

    assert f"line 2: {sentence}" in sentences(filled)


def test_full_vessels_fit(vessels):
    """Aliquot and standard that fill the vessel exactly are no fault, rounding included."""
    bench = Bench(aliquot=Measure(0.1, "mL"), made_up_to=Measure(0.3, "mL"))

    assert vessels([{"spike_volume": 0.2}], bench=bench, stocks=(ZN,)).faults == {}


@pytest.mark.parametrize(("stated", "apart"), [(2.5, False), (2.524, False), (2.53, True), (2.47, True)])
def test_volumes_and_concentration_must_agree_within_one_percent(vessels, stated, apart):
    """2.5 mg/L by volume agrees with 2.524, and with 2.53 or 2.47 no more."""
    filled = vessels([{"added": stated, "spike_volume": 5.0}], bench=FLASKS, stocks=(ZN,), added_refers_to="aliquot")

    assert bool(filled.faults) is apart


def test_a_level_is_no_second_source(vessels):
    """A configured level that differs from the row's own addition is no disagreement."""
    bench = Bench(aliquot=Measure(10, "mL"), levels={"A1": Measure(1, "mL")})

    assert vessels([{"level": "A1", "spike_volume": 3.0}], bench=bench, stocks=(ZN,)).faults == {}


OLD = Stock("ZN-5", {"Zn": Measure(5, "mg/L")}, valid_from=0.0, valid_until=100.0)
NEW = Stock("ZN-5", {"Zn": Measure(6, "mg/L")}, valid_from=101.0)


def test_the_stock_valid_when_measured_is_used(vessels):
    """Of two lots the one within its dates at the time of measurement counts; both ends belong to it."""
    rows = [{"spike_volume": 1.0, "measured_at": t, "stock": name} for t, name in ((100.0, None), (101.0, "ZN-5"))]

    filled = vessels(rows, accepted_at=1e9, bench=ON_TOP, stocks=(OLD, NEW))

    assert filled.addition.tolist() == pytest.approx([0.5, 0.6])
    assert filled.stock.tolist() == [0, 1]


def test_without_times_acceptance_decides(vessels):
    """Where the export has no times the date of acceptance chooses the lot."""
    filled = vessels([{"spike_volume": 1.0}], accepted_at=200.0, bench=ON_TOP, stocks=(OLD, NEW))

    assert filled.addition[0] == pytest.approx(0.6)


@pytest.mark.parametrize("name", [None, "ZN-5"])
def test_a_stock_out_of_date_is_used_and_marked(vessels, name):
    """Where only one lot can have been used its concentration is known, and a check of its own judges its dates."""
    filled = vessels([{"spike_volume": 1.0, "stock": name}], accepted_at=150.0, bench=ON_TOP, stocks=(OLD,))

    assert sentences(filled) == []
    assert filled.addition[0] == pytest.approx(0.5)
    assert filled.out_of_date.tolist() == [True]


def test_of_several_lots_out_of_date_none_is_chosen(vessels):
    """Without a valid lot nothing says which of two was used, so the addition is unknown."""
    filled = vessels([{"spike_volume": 1.0}], accepted_at=100.5, bench=ON_TOP, stocks=(OLD, NEW))

    assert sentences(filled) == [
        "line 2: none of the stocks that contain Zn was valid when measured: correct their dates"
    ]
    assert np.isnan(filled.addition[0])


def test_two_stocks_that_could_have_been_used_are_a_fault(vessels):
    """Nothing chooses between two valid stocks of the analyte."""
    stocks = (ZN, Stock("MIX-1", {"Zn": Measure(10, "mg/L"), "Pb": Measure(10, "mg/L")}))

    filled = vessels([{"spike_volume": 1.0}], bench=ON_TOP, stocks=stocks)

    assert sentences(filled) == [
        "line 2: 2 stocks contain Zn, and nothing says which was used: map stock, or give the stocks dates"
    ]


def test_an_analyte_in_no_stock_was_not_added(vessels):
    """A vessel spiked with a stock that lacks the analyte is a further vessel and no fault."""
    mapped = vessels([{"spike_volume": 1.0, "analyte": "Pb", "stock": "ZN-5"}], bench=ON_TOP, stocks=(ZN,))
    silent = vessels([{"spike_volume": 1.0, "analyte": "Pb"}], bench=ON_TOP, stocks=(ZN,))

    for filled in (mapped, silent):
        assert filled.not_added.tolist() == [True]
        assert filled.addition.tolist() == [0.0]
        assert filled.faults == {}


def test_standards_and_blanks_hold_no_addition_and_are_undiluted(vessels):
    """The bench's volumes do not concern what is no sample."""
    rows = [{"role": role, "nominal": 1.0} for role in ("standard", "blank", "check_standard")]

    filled = vessels(rows, bench=FLASKS, stocks=(ZN,))

    assert filled.dilution.tolist() == [1.0] * 3
    assert filled.addition.tolist() == [0.0] * 3
    assert filled.faults == {}


def test_an_unspiked_solution_with_an_addition_is_a_contradiction(vessels):
    """A row that says unspiked and states an addition is refused: one of both is wrong."""
    filled = vessels(
        [{"role": "unspiked", "spike_volume": 5.0}, {"role": "unspiked", "spike_volume": 0.0}],
        bench=FLASKS,
        stocks=(ZN,),
    )

    assert filled.faults == {
        0: ["line 2: an unspiked solution to which 5 mL of standard was added: correct the label or the addition"]
    }


def test_an_unspiked_solution_with_a_concentration_added_is_a_contradiction(vessels):
    """The same where a concentration is stated."""
    filled = vessels([{"role": "unspiked", "added": 2.0}])

    assert sentences(filled) == [
        "line 2: an unspiked solution to which 2 mg/L was added: correct the label or the addition"
    ]


def test_predilution_of_the_row_goes_before_the_bench(vessels):
    """A row's own predilution counts; others take the bench's."""
    filled = vessels([{"added": 1.0, "predilution": 4.0}, {"added": 1.0}], bench=Bench(predilution=10), stocks=(ZN,))

    assert filled.predilution.tolist() == [4.0, 10.0]


def test_predilutions_that_differ_fail_the_series(outcomes, make_additions):
    """One line needs one predilution."""
    rows = make_additions([0.2, 0.3, 0.41], [0, 1.0, 2.0])
    rows[1]["predilution"] = 10.0

    out = outcomes(rows)

    assert out.reasons(0)[0] == "the predilution differs within the series: one line needs one predilution"
