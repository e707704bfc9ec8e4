"""What is expected of a series or its batch and not there (yet): such a series is incomplete, whatever else holds."""

from __future__ import annotations

from math import ceil
from typing import TYPE_CHECKING

import numpy as np

from rules.case import Reported
from rules.checks import series_limits

if TYPE_CHECKING:
    from rules.case import Case


#: How a sentence ends that says what the batch lacks.
OF_BATCH = "(expect.spiked)"


def missing(case: Case) -> dict[int, str]:
    """Return each series that lacks something, with one sentence that says what.

    The first that applies: an unspiked solution, a calibration, additions, spiked samples of the batch, the check
    standard that closes the bracket.
    """
    found = dict.fromkeys(
        np.flatnonzero(case.series.has_additions & ~case.series.has_native).tolist(),
        "the unspiked solution is missing",
    )
    for part in (_calibration(case), _levels(case), _spiked(case), _brackets(case)):
        found = part | found
    return {series: found[series] for series in sorted(found)}


def of_batch(case: Case, series: int, sentence: str) -> bool:
    """Tell whether what a series lacks is lacking to its batch, so that one step mends it for all."""
    return bool(sentence) and (sentence == case.open_brackets.get(series) or sentence.endswith(OF_BATCH))


def _calibration(case: Case) -> dict[int, str]:
    wanting = case.judged & (case.reported == Reported.CALIBRATION) & (case.back.calibration < 0)
    found = {}
    for i in np.flatnonzero(wanting).tolist():
        if i not in case.faults:
            reason = case.back.results.reasons.get(i, "no calibration in this export")
            found[i] = f"the settings report the calibration's result: {reason}"
    return found


def _levels(case: Case) -> dict[int, str]:
    expected = case.method.expected_levels
    if expected is None:
        return {}
    at = case.fits.of_series
    levels = np.append(case.fits.distinct, 0)[at]
    few = case.judged & (levels < expected)
    return {
        i: f"{levels[i]} of the {expected} additions that the laboratory expects (expect.levels)"
        for i in np.flatnonzero(few).tolist()
    }


def _spiked(case: Case) -> dict[int, str]:
    """Say what a batch with too few spiked samples lacks, analyte by analyte; one that no stock holds needs none."""
    if case.method.expected_spiked is None:
        return {}
    wanted, among = case.method.expected_spiked
    held = {analyte for stock in case.method.stocks for analyte in stock.contains}
    found: dict[int, str] = {}
    for key in np.unique(case.key).tolist():
        series = np.flatnonzero(case.key == key)
        analyte = case.analyte(int(series[0]))
        judged = case.series.has_additions[series]
        if not judged.any() and analyte not in held:
            continue
        samples = len(np.unique(case.series.sample[series]))
        spiked = len(np.unique(case.series.sample[series[judged]]))
        needed = wanted * ceil(samples / among)
        if spiked < needed:
            sentence = (
                f"{spiked} of {samples} samples are spiked with {analyte}, and the laboratory expects {wanted} per "
                f"{among} {OF_BATCH}"
            )
            found |= dict.fromkeys(series.tolist(), sentence)
    return found


def _brackets(case: Case) -> dict[int, str]:
    off = np.array([limit.off for limit in series_limits(case, "bracket")], dtype=bool)
    return {i: said for i, said in case.open_brackets.items() if not off[case.limit_classes.of_series[i]]}
