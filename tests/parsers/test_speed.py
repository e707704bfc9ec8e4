"""How long reading takes, against pandas on the same bytes in the same run; run with ``-m benchmark -s``."""

from __future__ import annotations

import statistics
import time
from io import BytesIO
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from parsers.read import read

if TYPE_CHECKING:
    from collections.abc import Callable

    from parsers.layout import Layout

ROWS, SAMPLES = 200_000, 6_500
ELEMENTS = ["Zn", "Cu", "Pb", "Cd", "Ni", "Cr", "Co", "Mn", "Fe", "As"]


@pytest.fixture(scope="module")
def long_export() -> bytes:
    """Return an export of 200,000 rows and ten columns with 19,500 distinct labels."""
    signals = np.random.default_rng(5).normal(1000, 100, (ROWS, 6))
    labels = [f"SED-{sample}{level}" for sample in range(SAMPLES) for level in ("", " +A1", " +A2")]
    lines = ["Label,Element,R1,R2,R3,Mean,SD,RSD,Date,Comment"]
    for row, (a, b, c, mean, sd, rsd) in enumerate(signals.tolist()):
        element = ELEMENTS[row // len(labels) % 10]
        numbers = f"{a:.4f},{b:.4f},{c:.4f},{mean:.4f},{sd:.4f},{rsd:.2f}"
        lines.append(f"{labels[row % len(labels)]},{element},{numbers},2026-02-01,run ok")
    return ("\n".join(lines) + "\n").encode()


def median_seconds(work: Callable[[], object], baseline: Callable[[], object], rounds: int) -> tuple[float, float]:
    """Return the median times of two pieces of work that take turns."""
    times: tuple[list[float], list[float]] = ([], [])
    for _ in range(rounds):
        for taken, piece in zip(times, (work, baseline), strict=True):
            begin = time.perf_counter()
            piece()
            taken.append(time.perf_counter() - begin)
    return statistics.median(times[0]), statistics.median(times[1])


@pytest.mark.benchmark
@pytest.mark.parametrize("kind", ["clean", "line ends of two characters", "one row in a hundred below the range"])
def test_reading_a_long_export(make_layout: Callable[..., Layout], long_export: bytes, kind: str) -> None:
    """A long export is read in a small multiple of the time of `read_csv`: columns, labels and roles included."""
    layout = make_layout(
        separator="','", header="'^Label,'", columns="{label: Label, analyte: Element, signal: [R1, R2, R3]}"
    )
    data = long_export
    if kind.startswith("line ends"):
        data = data.replace(b"\n", b"\r\n")
    if kind.startswith("one row"):
        lines = data.split(b"\n")
        lines[100:-1:100] = [line.replace(line.split(b",")[2], b"<0.02", 1) for line in lines[100:-1:100]]
        data = b"\n".join(lines)

    ours, pandas = median_seconds(lambda: read(data, layout, "x"), lambda: pd.read_csv(BytesIO(data)), rounds=9)

    print(f"\n{kind}: {ours * 1e3:.0f} ms, read_csv {pandas * 1e3:.0f} ms, ratio {ours / pandas:.2f}")
    assert ours / pandas < 5


@pytest.mark.benchmark
def test_reading_a_short_export(make_layout: Callable[..., Layout]) -> None:
    """An export of sixty rows is read in a small multiple of the time of `read_csv`."""
    layout = make_layout()
    rows = [f"SED-{row // 3}{('', ' +A1', ' +A2')[row % 3]};Zn;{row}.5;{row}.25" for row in range(60)]
    data = "\n".join(["Label;Element;R1;R2", *rows, ""]).encode()

    ours, pandas = median_seconds(
        lambda: read(data, layout, "x"), lambda: pd.read_csv(BytesIO(data), sep=";"), rounds=99
    )

    print(f"\nsixty rows: {ours * 1e3:.2f} ms, read_csv {pandas * 1e3:.2f} ms, ratio {ours / pandas:.2f}")
    assert ours / pandas < 3
