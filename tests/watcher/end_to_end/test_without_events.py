"""File events only wake the service: everything that it does it does without them as well."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parent


#: The real program, and every file of tests that starts the service with a worker of the tests.
SUITES = {
    "the real program": [HERE],
    "the service": [path for path in sorted(HERE.parent.glob("test_*.py")) if "bench." in path.read_text("utf-8")],
}


@pytest.mark.proof
@pytest.mark.parametrize("suite", SUITES)
def test_the_whole_suite_passes_with_file_events_switched_off(suite: str) -> None:
    """Every test that starts a service passes where services find exports by looking alone."""
    without = os.environ | {"SPIKEWARDEN_TESTS_WITHOUT_EVENTS": "yes"}

    done = subprocess.run(
        [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", *map(str, SUITES[suite])],
        cwd=HERE.parents[2],
        env=without,
        capture_output=True,
        text=True,
        timeout=1200,
        check=False,
    )

    assert done.returncode == 0, done.stdout[-4000:]
    assert " passed" in done.stdout
