"""Plots that go with a mail: the additions line of a failing series, as a picture that every mail program shows.

They are drawn after their mail is queued, while no export waits, and lie beside the result files. A mail waits a moment
for them and then goes without: its words say the same. They are not forced to disk.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from rules.figures import figure
from watcher.record import calibrations, series_entry

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

    from rules.outcomes import Outcomes
    from watcher.record import Export


@dataclass(frozen=True, slots=True)
class Undrawn:
    """A plot that is still to be drawn: where it goes, the entry of its series, and the calibration's slope."""

    path: Path
    entry: dict[str, Any]
    slope: float | None

    def plain(self) -> dict[str, str]:
        """Return where the plot will be, and what it shows in words, as JSON values."""
        return {"staged": str(self.path), "alt": line_words(self.entry)}

    def draw(self) -> None:
        """Draw it; the file is there whole or not at all."""
        from watcher import plots  # noqa: PLC0415 - drawing takes longer to import than a small export to evaluate

        content = plots.additions_picture(self.entry, self.slope)
        if content is not None:
            part = self.path.with_suffix(".part")
            part.write_bytes(content)
            part.replace(self.path)


def pictures(outcomes: Outcomes, export: Export, kind: str, series: Iterable[int], folder: Path) -> list[Undrawn]:
    """Return the plots of series that have a line.

    Parameters
    ----------
    outcomes, export
        The export, judged.
    kind, series
        The mail's kind, since an export may give rise to one of each; which series.
    folder
        Where files wait for delivery.
    """
    slopes = {(c["analyte"], c["channel"]): c["slope"] for c in calibrations(outcomes.case)}
    entries = [entry for i in series if has_line(entry := series_entry(outcomes, i))]
    name = f"{export.sha256[:16]}-r{export.revision}-{kind}"
    return [
        Undrawn(folder / f"{name}-{number}.png", entry, slopes.get((entry["analyte"], entry["channel"])))
        for number, entry in enumerate(entries, start=1)
    ]


def has_line(entry: dict[str, Any]) -> bool:
    """Tell whether a series has a line that can be drawn."""
    return entry["fit"] is not None and entry["fit"]["slope"] is not None


def line_words(entry: dict[str, Any]) -> str:
    """Say what the plot of a series shows, with its numbers."""
    fit, effect = entry["fit"], entry["matrix_effect"]
    name = " ".join(part for part in (entry["sample"], entry["analyte"], entry["channel"]) if part)
    line = f"slope {figure(fit['slope'])}, intercept {figure(fit['intercept'])}, {fit['n']} solutions"
    against = "" if effect["value"] is None else f"; matrix effect {figure(effect['value'])} % on the slope"
    return f"Additions line of {name}: {line}{against}; result {entry['result']['text']}"
