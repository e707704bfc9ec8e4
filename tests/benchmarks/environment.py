"""The line that says on what the figures were measured."""

from __future__ import annotations

import importlib.util
import os
import platform
import sqlite3
from importlib import metadata


def line() -> str:
    """Return versions, cores and whether pyarrow helps pandas to read."""
    versions = ", ".join(f"{name} {metadata.version(name)}" for name in ("pandas", "numpy", "scipy"))
    pyarrow = "with" if importlib.util.find_spec("pyarrow") else "without"
    return (
        f"Python {platform.python_version()}, {versions}, {pyarrow} pyarrow, SQLite {sqlite3.sqlite_version}, "
        f"{os.cpu_count()} cores, {platform.system()} {platform.machine()}"
    )
