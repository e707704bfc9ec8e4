"""Published examples as exports of many shapes: through their layouts and the real program to the result files."""

from __future__ import annotations

import math
import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import statsmodels.api as sm

if TYPE_CHECKING:
    from collections.abc import Callable

CASES = Path(__file__).parents[2] / "exports"

#: Case and export; sample and analyte; where in the series; expected; tolerance (half a unit of the last digit that
#: was printed or derived); where the value comes from, and how it was come by.
MILLER = "Miller & Miller, Statistics and Chemometrics for Analytical Chemistry, ch. 5"
SKOOG = "Skoog et al., Fundamentals of Analytical Chemistry, standard additions"
HARRIS = "Harris, Quantitative Chemical Analysis, ch. 5"
HARVEY = "Harvey, Modern Analytical Chemistry (2000), ex. 5.10 to 5.12"
MANUAL = "Harvey, Solutions Manual for Analytical Chemistry 2.1, ch. 5, no. 9"
TEXTBOOK = "Harvey, Analytical Chemistry 2.0, single standard addition"
PUBLISHED: list[tuple[str, str, str, str, float, float, str]] = [
    ("silver/AG-0001.csv", "BRN-3 Ag", "result.value", 17.3, 0.05, f"{MILLER}; from memory"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "result.value", 17.260536398467426, 1e-9, f"{MILLER}; recomputed"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "result.expanded_uncertainty", 1.9, 0.05, f"{MILLER}; from memory"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.slope", 0.0186, 5e-5, f"{MILLER}; from memory"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.intercept", 0.3218, 5e-5, f"{MILLER}; from memory"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.residual_sd", 0.01094, 3e-5, f"{MILLER}; from memory, rounded inputs"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.u_line", 0.749, 1.5e-3, f"{MILLER}; from memory, rounded inputs"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.u_line", 0.7478706360498606, 1e-9, f"{MILLER}; recomputed"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "result.low", 15.4369587058635, 1e-8, f"{MILLER}; derived"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "result.high", 19.2938337994116, 1e-8, f"{MILLER}; derived"),
    ("silver/AG-0001.csv", "BRN-3 Ag", "fit.n", 7, 0, MILLER),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "result.value", 7.01, 5e-3, f"{SKOOG}; data read, from memory"),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "result.value", 7.008691099476438, 1e-9, f"{SKOOG}; recomputed"),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "fit.u_line", 0.1587423914745542, 1e-9, f"{SKOOG}; derived"),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "result.low", 6.51506935874169, 1e-8, f"{SKOOG}; derived"),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "result.high", 7.52605767396424, 1e-8, f"{SKOOG}; derived"),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "fit.n", 5, 0, SKOOG),
    ("iron_flasks/FE-0301.txt", "RIV-17 Fe", "fit.dof", 3, 0, SKOOG),
    ("strontium/SR-0042.csv", "SED-12 Sr", "fit.slope", 3.136, 5e-4, f"{HARRIS}; read"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "fit.intercept", 27.36, 5e-3, f"{HARRIS}; read"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "fit.correlation", math.sqrt(0.9973), 3e-5, f"{HARRIS}; R² 0.9973 read"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "result.value", 8.72, 5e-3, f"{HARRIS}; data read, from memory"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "fit.u_line", 0.43, 6e-3, f"{HARRIS}; from memory"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "result.value", 8.724489795918366, 1e-9, f"{HARRIS}; recomputed"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "fit.u_line", 0.4272762937069086, 1e-9, f"{HARRIS}; recomputed"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "result.low", 7.47997871189199, 1e-8, f"{HARRIS}; derived"),
    ("strontium/SR-0042.csv", "SED-12 Sr", "result.high", 10.2240274198921, 1e-8, f"{HARRIS}; derived"),
    ("variable_volume/VV-0009.log", "ROOF-7 Cu", "result.value", 12.3, 0.05, f"{MANUAL}; read"),
    ("variable_volume/VV-0009.log", "ROOF-7 Cu", "result.value", 12.2612, 5e-5, f"{MANUAL}; weighted, derived"),
    ("variable_volume/VV-0009.log", "ROOF-7 Cu", "result.low", 12.0970, 5e-5, f"{MANUAL}; weighted, derived"),
    ("variable_volume/VV-0009.log", "ROOF-7 Cu", "result.high", 12.4270, 5e-5, f"{MANUAL}; weighted, derived"),
    ("lead_single_addition/PB-0001.csv", "RIV-16 Pb", "result.value", 1.33, 6e-3, f"{TEXTBOOK}; answer read"),
    (
        "lead_single_addition/PB-0001.csv",
        "RIV-16 Pb",
        "result.value",
        1.332212389380531,
        1e-9,
        f"{TEXTBOOK}; recomputed",
    ),
    ("lead_single_addition/PBI-0001.csv", "RIV-16 Pb", "result.value", 1.33, 6e-3, f"{TEXTBOOK}; from memory"),
    (
        "lead_single_addition/PBI-0001.csv",
        "RIV-16 Pb",
        "result.value",
        1.3293343514300828,
        1e-9,
        f"{TEXTBOOK}; recomputed",
    ),
    ("six_standards/SX-0001.csv", "RIV-17 Cd", "result.value", 0.241, 5e-4, f"{HARVEY}; read, signals from memory"),
    ("six_standards/SX-0001.csv", "RIV-17 Cd", "result.standard_uncertainty", 0.0024, 5e-5, f"{HARVEY}; read"),
    ("six_standards/SX-0001.csv", "RIV-17 Cd", "result.value", 0.241259734419012, 1e-9, f"{HARVEY}; recomputed"),
    (
        "six_standards/SX-0001.csv",
        "RIV-17 Cd",
        "result.standard_uncertainty",
        0.0023635881120727714,
        1e-9,
        f"{HARVEY}; recomputed",
    ),
    ("six_standards/SX-0001.csv", "RIV-17 Cd", "result.expanded_uncertainty", 0.007, 5e-4, f"{HARVEY}; read"),
]


@pytest.fixture(scope="module")
def evaluated(make_laboratory: Callable[[], Any]) -> dict[str, Any]:
    """Every case after one `once` with its own settings, by case."""
    laboratories = {}
    for case in sorted({export.partition("/")[0] for export, *_ in PUBLISHED}):
        laboratory = make_laboratory()
        for path in (CASES / case).iterdir():
            where = laboratory.folder if path.suffix == ".yaml" else laboratory.folder / "exports"
            if path.suffix != ".md":
                shutil.copy(path, where / path.name)
        laboratory.done = laboratory.start("once")
        laboratories[case] = laboratory
    for laboratory in laboratories.values():
        laboratory.told = laboratory.done.communicate(timeout=60)
    return laboratories


def at(values: Any, path: str) -> Any:
    """Return a value by its dotted path."""
    for key in path.split("."):
        values = values[key]
    return values


@pytest.mark.parametrize(
    ("export", "series", "path", "expected", "tolerance", "source"),
    PUBLISHED,
    ids=[f"{export} {path} {source}" for export, _, path, _, _, source in PUBLISHED],
)
def test_published_value(
    evaluated: dict[str, Any], export: str, series: str, path: str, expected: float, tolerance: float, source: str
) -> None:
    """A published value stands in the JSON record of its export, within the tolerance of its printed digits."""
    case, _, name = export.partition("/")

    found = at(evaluated[case].series(name)[series], path)

    assert found == pytest.approx(expected, abs=tolerance, rel=0), source


@pytest.mark.parametrize("export", sorted({export for export, *_ in PUBLISHED}))
def test_csv_says_what_the_record_says(evaluated: dict[str, Any], export: str) -> None:
    """The CSV gives the same digits as the JSON record, in full."""
    case, _, name = export.partition("/")
    (series,) = evaluated[case].record(name)["series"]
    (row,) = evaluated[case].csv_rows(name)
    result, fit = series["result"], series["fit"]

    assert float(row["result"]) == result["value"]
    assert row["unit"] == result["unit"]
    assert [row["low"], row["high"]] == ["" if x is None else repr(x) for x in (result["low"], result["high"])]
    assert [row["slope"], row["intercept"]] == (
        ["", ""] if fit is None else [repr(fit["slope"]), repr(fit["intercept"])]
    )


@pytest.mark.parametrize("export", sorted({export for export, *_ in PUBLISHED}))
def test_every_line_is_accounted_for(evaluated: dict[str, Any], export: str) -> None:
    """Each line of an export is a solution's, a standard's, or set aside with a reason."""
    case, _, name = export.partition("/")
    laboratory = evaluated[case]
    record = laboratory.record(name)
    lines = len((laboratory.folder / "exports" / name).read_bytes().splitlines())
    solutions = [one for series in record["series"] for one in series["solutions"]]
    standards = [one for calibration in record["calibrations"] for one in calibration["standards"]]

    used = [int(one["export_lines"]) for one in (*solutions, *standards)]
    aside = [one["line"] for one in record["set_aside"] if one["reason"]]

    assert sorted([*used, *aside]) == list(range(1, lines + 1))


@pytest.mark.parametrize("export", ["lead_single_addition/PB-0001.csv", "lead_single_addition/PBI-0001.csv"])
def test_a_single_addition_claims_no_uncertainty(evaluated: dict[str, Any], export: str) -> None:
    """A single addition gives a value, and says that its uncertainty is absent instead of showing one."""
    case, _, name = export.partition("/")

    result = evaluated[case].series(name)["RIV-16 Pb"]["result"]

    assert [result[key] for key in ("standard_uncertainty", "expanded_uncertainty", "low", "high")] == [None] * 4
    assert "uncertainty absent" in result["text"]


def test_variable_volume_against_another_library(evaluated: dict[str, Any]) -> None:
    """Value and interval with a growing vessel agree with statsmodels' weighted line and the inverted t test."""
    result = evaluated["variable_volume"].series("VV-0009.log")["ROOF-7 Cu"]["result"]
    v, y = np.array([0, 0.1, 0.2, 0.3]), np.array([0.119, 0.231, 0.339, 0.442])
    f, A = 5 / (5 + v), 600 * v / 5
    fit = sm.WLS(y / f, sm.add_constant(A), weights=f**2).fit()
    alpha, beta = fit.params

    def t(C: float) -> float:
        contrast = np.array([1.0, -C])
        return float((alpha - C * beta) / np.sqrt(contrast @ fit.cov_params() @ contrast))

    assert result["value"] == pytest.approx(alpha / beta, rel=1e-9)
    assert [t(result["low"]), t(result["high"])] == pytest.approx([4.302652729749462, -4.302652729749462], rel=1e-6)


def test_an_ordinary_sample_is_read_back(evaluated: dict[str, Any]) -> None:
    """The sample of the calibration example was not spiked, and rests on all three of its solutions."""
    series = evaluated["six_standards"].series("SX-0001.csv")["RIV-17 Cd"]

    assert series["verdict"] == "not spiked"
    assert series["result"]["by"] == "calibration"
    assert [one["signal"] for one in series["solutions"]] == [29.32, 29.16, 29.51]
    assert series["fit"] is None


def test_a_wide_table_leaves_the_internal_standard_out(evaluated: dict[str, Any]) -> None:
    """The column that the layout excepts makes no series, and channel and SD are read from the headers."""
    (series,) = evaluated["strontium"].record("SR-0042.csv")["series"]

    assert (series["analyte"], series["channel"]) == ("Sr", "407.771")
