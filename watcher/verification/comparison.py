"""A computed number beside the published one: how far they agree, and whether that is enough."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite, log10
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from watcher.verification.inputs import Misprint, Value

#: Digits of a number in double precision: what equal numbers are said to agree in.
MOST_DIGITS = 15.7


def digits(computed: float, published: float) -> float:
    """Return the number of agreeing digits, -log10 of the relative difference, from 0 to `MOST_DIGITS`.

    >>> round(digits(1.001, 1.0), 3)
    3.0
    """
    if not isfinite(computed):
        return 0.0
    difference = abs(computed - published) / (abs(published) or 1.0)
    return MOST_DIGITS if difference == 0 else min(max(-log10(difference), 0.0), MOST_DIGITS)


@dataclass(frozen=True, slots=True)
class Comparison:
    """A published value and what the program gives; NaN where it gives nothing."""

    value: Value
    computed: float

    @property
    def agrees(self) -> bool:
        """Whether both differ by no more than the tolerance."""
        # the difference of two decimals carries a rounding error of its own
        allowed = self.value.tolerance * (1 + 1e-9)
        return abs(self.computed - self.value.number) <= allowed

    @property
    def digits(self) -> float:
        """Digits in which both agree."""
        return digits(self.computed, self.value.number)


@dataclass(frozen=True, slots=True)
class Refutation:
    """A known misprint and what the program gives instead."""

    misprint: Misprint
    computed: float

    @property
    def agrees(self) -> bool:
        """Whether the program gives the correct value and not the printed one."""
        correct = Comparison(self.misprint.correct, self.computed)
        printed = abs(self.computed - float(self.misprint.printed))
        return correct.agrees and printed > self.misprint.correct.tolerance
