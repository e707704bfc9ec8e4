"""Medians of repeated runs, measurement and baseline in turn, and a stopwatch for the steps inside a run.

The machine is shared and noisy: what runs in turn is disturbed alike, so only the ratios of one run count.
"""

from __future__ import annotations

import math
import time
from collections import defaultdict
from contextlib import contextmanager
from statistics import median
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator


def seconds(work: Callable[[], object]) -> float:
    """Run once; return the seconds it took."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def in_turn(repeats: int, *works: Callable[[], object]) -> list[float]:
    """Run each work `repeats` times, one after the other in turn, after one run that is not counted; medians."""
    for work in works:
        work()
    taken: list[list[float]] = [[] for _ in works]
    for _ in range(repeats):
        for place, work in enumerate(works):
            taken[place].append(seconds(work))
    return [median(each) for each in taken]


def percentile(values: list[float], percent: float) -> float:
    """Return the smallest value that at least so many percent do not exceed."""
    ordered = sorted(values)
    return ordered[max(math.ceil(len(ordered) * percent / 100), 1) - 1]


class Stopwatch:
    """Adds up the seconds spent in chosen functions, callees included."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = defaultdict(float)

    @contextmanager
    def on(self, *places: tuple[object, str]) -> Iterator[None]:
        """Watch functions, each named by the object it is looked up on and its name there.

        Raises
        ------
        AttributeError
            A function is not there any more: the list of places has to follow the program.
        """
        before = [(owner, name, getattr(owner, name)) for owner, name in places]
        for owner, name, function in before:
            setattr(owner, name, self._watched(owner, name, function))
        try:
            yield
        finally:
            for owner, name, function in before:
                setattr(owner, name, function)

    def _watched(self, owner: object, name: str, function: Callable[..., Any]) -> Callable[..., Any]:
        label = f"{getattr(owner, '__name__', type(owner).__name__)}.{name}"

        def watched(*args: Any, **keywords: Any) -> Any:
            start = time.perf_counter()
            try:
                return function(*args, **keywords)
            finally:
                self.seconds[label] += time.perf_counter() - start

        return watched
