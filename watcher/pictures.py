"""Plots that go with a mail: the additions line of a failing series, as a picture that every mail program shows.

They lie beside the result files that wait for delivery. They are not forced to disk: a mail whose picture a power cut
took says the same without it.
"""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING, Any

from watcher.record import calibrations, series_entry

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

    from rules.outcomes import Outcomes
    from watcher.record import Export


def stage_pictures(outcomes: Outcomes, export: Export, series: Iterable[int], folder: Path) -> list[dict[str, Any]]:
    """Draw series that have a line; return where each plot is, its hash, and what it shows in words.

    Parameters
    ----------
    outcomes, export
        The export, judged.
    series
        Which series.
    folder
        Where files wait for delivery.
    """
    chosen = [series_entry(outcomes, i) for i in series]
    if not chosen:
        return []
    from watcher import plots  # noqa: PLC0415 - drawing takes longer to import than a whole small export to evaluate

    slopes = {(c["analyte"], c["channel"]): c["slope"] for c in calibrations(outcomes.case)}
    staged = []
    for number, entry in enumerate(chosen, start=1):
        content = plots.additions_picture(entry, slopes.get((entry["analyte"], entry["channel"])))
        if content is None:
            continue
        path = folder / f"{export.sha256[:16]}-r{export.revision}-plot{number}.png"
        path.write_bytes(content)
        staged.append(
            {"staged": str(path), "sha256": hashlib.sha256(content).hexdigest(), "alt": plots.additions_words(entry)}
        )
    return staged
