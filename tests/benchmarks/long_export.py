"""A panel export of about 200,000 rows and 10 columns: reading, computing, judging, and all of it made durable.

Against pandas.read_csv of the same bytes, in turn with what is measured. The steps inside are timed where
`rules.evaluate` and `parsers.read` look them up, callees included.
"""

from __future__ import annotations

import gc
import io
from statistics import median
from typing import TYPE_CHECKING

import laboratory
import pandas as pd
from one_export import accept, deliver, evaluate, land
from process import memory_mb
from table import Figure
from timing import Stopwatch, in_turn, seconds

import parsers.read
import rules.evaluate as rules_evaluate
from watcher.opening import open_laboratory
from watcher.settings import compile_snapshot, read_files

if TYPE_CHECKING:
    from pathlib import Path

    from parsers.layout import Layout
    from rules.method import Method

REPEATS = 5
DURABLE_REPEATS = 3
NAME = "PN-0001.csv"
#: Seconds since 1970 at which the export counts as accepted: 2026-12-01.
ACCEPTED_AT = 1_796_083_200.0
READ_STEPS = ("decode", "find_table", "read_heading", "resolve", "read_block", "read_rows", "assemble")
COMPUTE_STEPS = (
    ("solutions", "gather"),
    ("vessels", "fill"),
    ("series", "group"),
    ("blanks", "collect"),
    ("calibration", "calibrate"),
    ("additions", "fit"),
    ("budget", "common"),
    ("additions", "evaluate"),
    ("reading_back", "evaluate"),
    ("recovery", "evaluate"),
    ("batch_checks", "collect_faults"),
)
BASELINE = "read_csv"


def measure(folder: Path) -> list[Figure]:
    """Measure on a laboratory in this folder."""
    data = laboratory.panel(1)
    config = laboratory.set_up(folder, mail_port=9)
    layout, method = compile_snapshot(read_files(config)).layouts[1]
    return _computing(data, layout, method) + _durable(folder, len(data), config)


def _computing(data: bytes, layout: Layout, method: Method) -> list[Figure]:
    readings = parsers.read.read(data, layout, NAME)
    case = rules_evaluate.compute(readings, method, ACCEPTED_AT)
    rows, series = len(readings.line), len(case)
    checks = rules_evaluate.check(case)

    def both() -> object:
        return rules_evaluate.compute(parsers.read.read(data, layout, NAME), method, ACCEPTED_AT)

    plain, whole, judging = in_turn(
        REPEATS,
        lambda: pd.read_csv(io.BytesIO(data), sep=";"),
        both,
        lambda: rules_evaluate.decide(case, rules_evaluate.check(case)),
    )
    watch = Stopwatch()
    places = [(parsers.read, name) for name in READ_STEPS]
    places += [(getattr(rules_evaluate, module), name) for module, name in COMPUTE_STEPS]
    with watch.on((parsers.read, "read"), (rules_evaluate, "compute"), *places):
        both()
    judged = rules_evaluate.decide(case, checks)
    failing = int((judged.verdict == 2).sum())
    figures = [
        Figure(
            f"{rows:,} rows, {series:,} series ({failing:,} fail): parse + fit", whole, "s", plain, BASELINE,
            "≤ 4 × now (≤ 1.6 ×)", whole <= 4 * plain,
        ),
        Figure("  then checks and verdicts", judging, "s", plain, BASELINE),
    ]  # fmt: skip
    return figures + [Figure(f"  of it {name}", spent, "s", plain, BASELINE) for name, spent in watch.seconds.items()]


def _durable(folder: Path, size: int, config: Path) -> list[Figure]:
    """Measure the same export from settled to delivered, in a fresh worker each time, and the worker's memory."""
    taken: dict[str, list[float]] = {"accept": [], "evaluate": [], "deliver": [], "plain": [], "peak": []}
    with open_laboratory(config, "benchmark") as opened, opened.service._open():
        worker = opened.service._worker
        for repeat in range(1, DURABLE_REPEATS + 1):
            content = laboratory.panel(repeat)
            candidate = land(folder / "exports" / f"PN-{repeat:04d}.csv", content)
            exports = []
            taken["plain"].append(seconds(lambda content=content: pd.read_csv(io.BytesIO(content), sep=";")))
            taken["accept"].append(seconds(lambda: exports.append(accept(opened, candidate))))  # noqa: B023
            taken["evaluate"].append(seconds(lambda: evaluate(opened, exports[0])))  # noqa: B023
            taken["deliver"].append(seconds(lambda: deliver(opened)))
            taken["peak"].append(memory_mb(worker.pid or 0, "VmHWM"))
            worker.restart()
            gc.collect()
    middle = {name: median(values) for name, values in taken.items()}
    durable, plain = middle["accept"] + middle["evaluate"], middle["plain"]
    limit = 12 * size / 1e6 + 150
    results = sum(path.stat().st_size for path in (folder / "results").rglob("PN-0001*")) / 1e6
    return [
        Figure("all results and ledger durable", durable, "s", plain, BASELINE, "≤ 4 ×", durable <= 4 * plain),
        Figure("  of it copy and accept", middle["accept"], "s", plain, BASELINE),
        Figure("  of it worker and finish", middle["evaluate"], "s", plain, BASELINE),
        Figure("  then delivery of both files", middle["deliver"], "s", plain, BASELINE),
        Figure("  size of the result files", results, "MB", size / 1e6, "the export"),
        Figure(
            "  peak memory of the worker", middle["peak"], "MB", size / 1e6, "the export",
            f"≤ 12 × + 150 = {limit:.0f} MB", middle["peak"] <= limit,
        ),
    ]  # fmt: skip
