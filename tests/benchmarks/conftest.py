"""Keeps the measurements out of the test run: they are started by ``python tests/benchmarks``, not collected."""

collect_ignore_glob = ["*.py"]
