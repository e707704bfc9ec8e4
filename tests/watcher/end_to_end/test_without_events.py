"""File events only wake the service: everything that it does it does without them as well."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parent


@pytest.mark.proof
def test_the_whole_suite_passes_with_file_events_switched_off() -> None:
    """Every test of the real program passes where its services find exports by looking alone."""
    without = os.environ | {"SPIKEWARDEN_TESTS_WITHOUT_EVENTS": "yes"}

    done = subprocess.run(
        [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", str(HERE)],
        cwd=HERE.parents[2],
        env=without,
        capture_output=True,
        text=True,
        timeout=1200,
        check=False,
    )

    assert done.returncode == 0, done.stdout[-4000:]
    assert " passed" in done.stdout
