"""What the proofs share: simulated exports that go through the program's own calculation, and tables of what was found.

A simulated export holds one channel for each trial, so that a hundred thousand trials are evaluated at once exactly as
a hundred thousand series of the laboratory would be.
"""

from __future__ import annotations

import csv
import os
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from parsers.readings import Quantities, Readings, Role, Texts
from rules.evaluate import compute
from rules.interval import student_t
from rules.method import Method

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from numpy.typing import NDArray

    from rules.case import Case

    Floats = NDArray[np.float64]

REFERENCE = Path(__file__).parents[1] / "reference"
TEXTS = ("level", "stock", "batch", "analyst", "instrument", "comment", "duplicate_of", "origin")
NUMBERS = ("signal_sd", "signal_rsd", "readings", "replicate", "position", "measured_at", "predilution")
QUANTITIES = (
    "added", "nominal", "spike_volume", "aliquot", "made_up_to", "mass", "digest_volume",
    "concentration", "reported_result", "reference_signal",
)  # fmt: skip
VOLUMES = ("spike_volume", "aliquot", "made_up_to", "digest_volume")
BLANK_METHOD: dict[str, Any] = {"report": "additions", "export_unit": "mg/L", "result_unit": "mg/L"}


def trials(roles: list[Role], signal: Floats, columns: dict[str, Any] | None = None, **decisions: Any) -> Case:
    """Compute many trials of one design.

    Parameters
    ----------
    roles
        The role of each of the k solutions of a trial.
    signal
        float64[n, k], signals of n trials.
    columns
        Quantity to its k values, NaN where a solution has none; volumes in mL, concentrations in mg/L.
    decisions
        Of the method.
    """
    count, solutions = signal.shape
    rows = count * solutions
    given = columns or {}

    def quantity(name: str) -> Quantities:
        if name not in given:
            return Quantities.absent(rows)
        unit = Texts.constant("mL", rows) if name in VOLUMES else Texts.absent(rows)
        return Quantities(np.tile(np.asarray(given[name], dtype=float), count), unit)

    readings = Readings(
        line=np.arange(2, rows + 2, dtype=np.int64),
        label=Texts.constant("RIV-17", rows),
        sample=Texts.constant("RIV-17", rows),
        analyte=Texts.constant("Zn", rows),
        channel=Texts(np.repeat(np.arange(count, dtype=np.int32), solutions), tuple(map(str, range(count)))),
        role=np.tile(np.array(roles, dtype=np.int8), count),
        signals=np.ascontiguousarray(signal, dtype=float).reshape(-1, 1),
        faults=(),
        set_aside=(),
        problems=(),
        labels=(),
        columns=(),
        heading={},
        lines=rows + 1,
        **{name: Texts.absent(rows) for name in TEXTS},
        **{name: np.full(rows, np.nan) for name in NUMBERS},
        **{name: quantity(name) for name in QUANTITIES},
    )
    return compute(readings, Method(**(BLANK_METHOD | decisions)), 0.0)


def sample_roles(additions: Floats) -> list[Role]:
    """Roles of the solutions of one sample: unspiked where nothing is added."""
    return [Role.SPIKED if a > 0 else Role.UNSPIKED for a in additions]


def noisy(random: np.random.Generator, truth: Floats, noise: float, kind: str, count: int) -> Floats:
    """Draw signals around the true ones.

    `noise` is a fraction: of the highest signal (constant), of each signal (proportional), or that of the counts at
    the highest signal (counting, drawn from Poisson's distribution).
    """
    shape, top = (count, len(truth)), truth.max()
    if kind == "constant":
        return truth + random.normal(0, noise * top, shape)
    if kind == "proportional":
        return truth * (1 + random.normal(0, noise, shape))
    scale = 1 / noise**2 / top
    return random.poisson(scale * truth, shape) / scale


@dataclass(frozen=True, slots=True)
class Coverage:
    """How often intervals hold the truth.

    Attributes
    ----------
    exact
        Share of trials in which the truth fulfils the inequality that the interval solves.
    printed
        Share in which the printed interval holds it, one that is not finite counting as holding it.
    finite
        Share of trials with a finite interval.
    conditional
        Share of those that hold the truth; NaN where there are none.
    """

    exact: float
    printed: float
    finite: float
    conditional: float


def coverage(case: Case, native: float) -> Coverage:
    """Count how often the intervals of an additions result hold the native level, in the sample."""
    fits, results = case.fits, case.additions
    lines, v = fits.lines, fits.covariance
    t = student_t(case.method.confidence, fits.dof)
    away = (lines.intercept - native * lines.slope) ** 2
    allowed = t**2 * (v.intercept - 2 * native * v.both + native**2 * v.slope)
    finite = np.isfinite(results.low)
    inside = (results.low <= native) & (native <= results.high)
    return Coverage(
        exact=float(np.mean(away <= allowed)),
        printed=float(np.mean(inside | ~finite)),
        finite=float(np.mean(finite)),
        conditional=float(np.mean(inside[finite])) if finite.any() else np.nan,
    )


@dataclass(slots=True)
class Table:
    """A table of what a proof found, printed and written where the environment says."""

    title: str
    heads: tuple[str, ...]
    rows: list[tuple[str, ...]] = field(default_factory=list)

    def add(self, *cells: object) -> None:
        """Append a row; numbers are written with four significant digits."""
        self.rows.append(tuple(f"{cell:.4g}" if isinstance(cell, float) else str(cell) for cell in cells))

    def __str__(self) -> str:
        """Write it with bars between the columns."""
        lines = [self.heads, tuple("---" for _ in self.heads), *self.rows]
        return "\n".join([f"**{self.title}**", "", *("| " + " | ".join(cells) + " |" for cells in lines), ""])


@pytest.fixture
def tabulate(tmp_path_factory: pytest.TempPathFactory, capsys: pytest.CaptureFixture[str]):
    """Make a table that is shown and kept when the test ends, whether it passed or not."""
    made: list[Table] = []

    def make(title: str, *heads: str) -> Table:
        made.append(Table(title, heads))
        return made[-1]

    yield make
    place = os.environ.get("SPIKEWARDEN_PROOF_TABLES")
    path = Path(place) if place else tmp_path_factory.getbasetemp() / "proof-tables.md"
    with path.open("a", encoding="utf-8") as file, capsys.disabled():
        for table in made:
            print(f"\n{table}")
            file.write(f"{table}\n")


def columns_of(name: str) -> dict[str, Any]:
    """Columns of a file of published input: numbers where every cell is one, else texts."""
    with (REFERENCE / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    return {key: _numbers([row[key] for row in rows]) for key in rows[0]}


def _numbers(texts: Iterable[str]) -> Any:
    try:
        return np.array(list(texts), dtype=float)
    except ValueError:
        return np.array(list(texts))


def _shared(function: Callable[..., Any]) -> Any:
    """A function without state, given to tests as it is."""
    return pytest.fixture(scope="session", name=function.__name__)(lambda: function)


give_trials, give_roles, give_noise, give_coverage, give_columns = map(
    _shared, (trials, sample_roles, noisy, coverage, columns_of)
)
