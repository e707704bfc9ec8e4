"""One line of the table for each figure: as measured, and as a ratio to a baseline of the same run.

Nothing is asserted here: a target that was missed is printed as missed, and the run ends as any other.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from rich.console import Console
from rich.table import Table

if TYPE_CHECKING:
    from collections.abc import Iterable


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure.

    Attributes
    ----------
    name
        What was measured.
    measured, unit
        The median, in its unit.
    baseline, against
        The baseline's median in the same unit, and what it is; NaN and empty where there is none.
    target, met
        The target in words, and whether it was met; None where the figure only explains another.
    faster
        Whether the ratio says how many times faster than the baseline, instead of how many times as much.
    """

    name: str
    measured: float
    unit: str
    baseline: float = float("nan")
    against: str = ""
    target: str = ""
    met: bool | None = None
    faster: bool = False

    @property
    def ratio(self) -> float:
        """Measured to baseline, or the other way round where that says how many times faster."""
        if self.faster:
            return self.baseline / self.measured if self.measured else float("nan")
        return self.measured / self.baseline if self.baseline else float("nan")


def show(title: str, figures: Iterable[Figure]) -> None:
    """Print the table."""
    table = Table(title=title, title_justify="left", box=None, pad_edge=False, header_style="bold")
    for header, justify in (
        ("figure", "left"), ("measured", "right"), ("baseline", "right"), ("ratio", "right"), ("against", "left"),
        ("target", "left"), ("met", "left"),
    ):  # fmt: skip
        table.add_column(header, justify=justify, overflow="fold")
    for each in figures:
        met = {None: "", True: "yes", False: "NO"}[each.met]
        ratio = _number(each.ratio) + (" × faster" if each.faster else " ×")
        has_baseline = bool(each.against)
        table.add_row(
            each.name,
            f"{_number(each.measured)} {each.unit}",
            f"{_number(each.baseline)} {each.unit}" if has_baseline else "",
            ratio if has_baseline else "",
            each.against,
            each.target,
            met,
        )
    Console(width=190, highlight=False, markup=False).print(table)


def _number(value: float) -> str:
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.3g}"
