"""Measures the program as it stands: ``python tests/benchmarks [NAME…]``, all without a name.

Prints one table with every figure, its baseline of the same run, the ratio, and whether the target was met. Nothing
fails because of a time; a measurement that cannot be made says why and the others go on.
"""

from __future__ import annotations

import sys
import tempfile
import time
import traceback
import warnings
from pathlib import Path

import backlog
import environment
import fitting
import idle
import long_export
import single_export
from table import show

MEASUREMENTS = {
    "idle": idle.measure,
    "single_export": single_export.measure,
    "long_export": long_export.measure,
    "fitting": fitting.measure,
    "backlog": backlog.measure,
}


def main(names: list[str]) -> int:
    """Run the measurements named, or all; return 2 where one could not be made."""
    if unknown := set(names) - set(MEASUREMENTS):
        print(f"There is no measurement {', '.join(sorted(unknown))}; there are {', '.join(MEASUREMENTS)}.")
        return 2
    figures, broken = [], []
    for name in names or MEASUREMENTS:
        start = time.monotonic()
        with tempfile.TemporaryDirectory(prefix="spikewarden-benchmark-") as folder:
            try:
                figures += MEASUREMENTS[name](Path(folder) / name)
            except Exception:  # noqa: BLE001 - the other measurements are worth having
                broken.append(name)
                traceback.print_exc()
        print(f"{name}: {time.monotonic() - start:.0f} s", file=sys.stderr)
    show(environment.line(), figures)
    if broken:
        print(f"Not measured: {', '.join(broken)}; the reasons stand above.")
    return 2 if broken else 0


if __name__ == "__main__":
    warnings.simplefilter("default")
    sys.exit(main(sys.argv[1:]))
